"""A layout as text: what a person wants to see agree with the device in mind."""

from __future__ import annotations

from textwrap import wrap

import numpy as np
from numpy.typing import NDArray

from scatterpump.anatomy.layout import UNREACHED, Layout, LeadView
from scatterpump.measure import Measure
from scatterpump.version import version

__all__ = ["describe"]

Floats = NDArray[np.float64]
WIDTH, LABEL = 98, 18


def describe(layout: Layout) -> str:
    """Return the table that `Layout.summary` shows."""
    unit = f" {Measure(layout.units).energy_unit}".rstrip()
    lines = [f"{layout.name}, Fermi level {layout.fermi_level:g}{unit}   (scatterpump {version()})", ""]
    lines += _row("sites", _sites(layout))
    lines += _row("bonds", f"{len(layout.bonds)}")
    for lead in layout.leads:
        lines += _row(f"lead {lead.number}", _lead(lead))
    if layout.widths is not None:
        lines += _row("layers", _layers(layout))
    lines += _motion(layout)
    lines += _row("interior", _interior(layout))
    for trouble in layout.troubles:
        lines += _row("UNKNOWN", trouble)
    return "\n".join(lines)


def _row(label: str, text: str) -> list[str]:
    first, *rest = wrap(text, WIDTH - LABEL) or [""]
    return [f"{label:<{LABEL}}{first}", *(" " * LABEL + line for line in rest)]


def _sites(layout: Layout) -> str:
    count, dimension = layout.positions.shape
    text = str(count)
    if layout.orbitals is not None:
        text += f", {layout.orbitals} orbital{'s' * (layout.orbitals != 1)}"
    if count:
        size = np.ptp(layout.positions, axis=0)
        text += f", {' x '.join(f'{length:.4g}' for length in size)} lattice constants"
    islands = 0 if layout.layer is None else int((layout.layer == UNREACHED).sum())
    return text + (f"; {islands} of them are reached by no path from the probe" if islands else "")


def _lead(lead: LeadView) -> str:
    modes = (
        "its modes are unknown"
        if lead.modes is None
        else f"{lead.modes} open mode{'s' * (lead.modes != 1)} at the Fermi level"
    )
    role = "counts as part of the drain" if lead.role == "lead" else lead.role
    name = f"{lead.name}: " if lead.name else ""
    return f"{name}{role}, attached to {len(lead.sites)} site{'s' * (len(lead.sites) != 1)}, {modes}"


def _layers(layout: Layout) -> str:
    assert layout.widths is not None
    narrow, wide = int(layout.widths.min()), int(layout.widths.max())
    width = f"{wide}" if narrow == wide else f"{narrow} to {wide}"
    return f"{len(layout.widths)} from the probe on, {width} unknown{'s' * (wide != 1)} wide"


def _interior(layout: Layout) -> str:
    if layout.period is None:
        return layout.interior
    return f"repeats every {layout.period:.6g} lattice constant{'s' * (layout.period != 1)}: {layout.interior}"


def _motion(layout: Layout) -> list[str]:
    if layout.site_change is None or layout.bond_change is None:
        return []
    sites, bonds = layout.site_change, layout.bond_change
    changes = f"{_changing(sites, 'on-site value')}; {_changing(bonds, 'bond')}"
    text = f"{changes}; the largest element of H is {layout.scale:.4g}"
    return [*_row("along the cycle", text), *_row("change of H", layout.drive)]


def _changing(changes: Floats, name: str) -> str:
    count = np.count_nonzero(changes)
    if not count:
        return f"no {name} changes"
    return f"{count} {name}{'s change' if count > 1 else ' changes'}, by up to {changes.max():.4g}"
