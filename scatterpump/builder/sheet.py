"""What ribbons and cylinders share: how they become pumps, leads as wide as they are, disorder on a square lattice."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.builder.description import Disorder, SheetLead
from scatterpump.pump import Pump

if TYPE_CHECKING:
    import kwant

    from scatterpump.builder.cylinder import FluxCylinder
    from scatterpump.builder.ribbon import ModulatedRibbon

__all__ = ["noise", "ring_bonds", "sheet_pump"]

Fill = Callable[[Any, Any, range, range, Disorder], None]


def sheet_pump(sheet: FluxCylinder | ModulatedRibbon, fill: Fill, width: int, *, closed: bool) -> Pump:
    """Build the kwant system of a sheet and return it as a `Pump`: probe lead 0, drain lead 1.

    Parameters
    ----------
    sheet : FluxCylinder or ModulatedRibbon
    fill : callable
        Puts sites and bonds into a builder: (builder, lattice, columns, bonds along, disorder).
    width : int
        Rows.
    closed : bool
        Whether the last row is tied to the first.
    """
    import kwant

    lattice, system = kwant.lattice.square(norbs=1), kwant.Builder()
    fill(system, lattice, range(sheet.sites), range(sheet.sites - 1), sheet.disorder)
    for lead, outside, inside in ((sheet.probe, -1, 0), (sheet.drain, sheet.sites, sheet.sites - 1)):
        if not isinstance(lead, str):
            _attach(system, lattice, lead, outside, inside, width, closed=closed)
    cell = None
    if sheet.period is not None:
        cell = kwant.Builder(kwant.TranslationalSymmetry((sheet.period, 0)))
        fill(cell, kwant.lattice.square(norbs=1), range(sheet.period), range(sheet.period), Disorder())
    drain = None if isinstance(sheet.drain, str) else 1
    return Pump(system, sheet.cycle, sheet.fermi_level, drain=drain, bulk=cell, name=sheet.name)


def ring_bonds(width: int, *, closed: bool) -> list[tuple[int, int]]:
    """Return the bonds across, as pairs (y + 1, y); `closed` adds the one from the last row to the first."""
    bonds = [(y + 1, y) for y in range(width - 1)]
    return [*bonds, (0, width - 1)] if closed and width > 2 else bonds


def _attach(
    system: kwant.Builder, lattice: Any, lead: SheetLead, outside: int, inside: int, width: int, *, closed: bool
) -> None:
    """Attach a lead to a system on a square lattice.

    Parameters
    ----------
    outside, inside : int
        x of the lead-like column that is added, and of the device's column next to it.
    width : int
        Rows.
    closed : bool
        Whether the last row is tied to the first, as on a cylinder.
    """
    import kwant

    wire = kwant.Builder(kwant.TranslationalSymmetry((outside - inside, 0)))
    for builder, x in ((system, outside), (wire, 0)):
        builder[(lattice(x, y) for y in range(width))] = lead.level
        if lead.tie:
            for upper, lower in ring_bonds(width, closed=closed):
                builder[lattice(x, upper), lattice(x, lower)] = -lead.tie
    for y in range(width):
        system[lattice(outside, y), lattice(inside, y)] = -lead.contact
        wire[lattice(0, y), lattice(1, y)] = -lead.hopping
    system.attach_lead(wire)


def noise(strength: float, columns: range, rows: range, salt: str) -> NDArray[np.float64]:
    """Return box disorder of full width `strength`, a function of place and salt alone, shape (columns, rows)."""
    found = np.zeros((len(columns), len(rows)))
    if strength == 0:
        return found
    import kwant.digest

    for x in columns:
        found[x] = [strength * (kwant.digest.uniform(f"{x} {y}", salt) - 0.5) for y in rows]
    return found
