"""Bands of the interior and levels at the ends, against phi."""

from __future__ import annotations

from math import isfinite
from typing import Any

import numpy as np

from scatterpump.figures.axes import cycle_axis
from scatterpump.figures.style import ACCENT, GREY, INK, PALE
from scatterpump.portrait.spectrum import Spectrum
from scatterpump.portrait.window import energy_window

__all__ = ["edge_levels"]

HALF = 0.5  # of a level's weight: where it lives


def edge_levels(spectrum: Spectrum, ax: Any) -> Any:
    """Draw band edges (grey areas), levels between them, the Fermi level and its proven window (dotted).

    Dots are levels at the probe's end, rings those at another.
    """
    for bottom, top in zip(spectrum.bottom.T, spectrum.top.T, strict=True):
        ax.fill_between(spectrum.phases, bottom, top, color=PALE, linewidth=0.5)
    _levels(spectrum, ax, near=True)
    _levels(spectrum, ax, near=False)
    ax.axhline(spectrum.fermi_level, color=ACCENT, linewidth=1.1, linestyle="--", label="Fermi level")
    if spectrum.gap is not None and spectrum.gap.is_open:
        edges = [e for e in (spectrum.gap.lower_edge.upper, spectrum.gap.upper_edge.lower) if isfinite(e)]
        for number, edge in enumerate(edges):
            label = "proven window" if number == 0 else None
            ax.axhline(edge, color=INK, linewidth=0.9, linestyle=":", label=label)
    cycle_axis(ax.xaxis, ax.set_xlim)
    ax.set_ylim(*energy_window(spectrum))
    what = "bands and levels" if spectrum.bottom.shape[1] else "levels (no cell repeats: no bands)"
    ax.set(ylabel=f"energy ({spectrum.unit})", title=what)
    ax.legend(loc="upper center", bbox_to_anchor=(0.5, -0.2), fontsize=7, frameon=False, ncols=2, handletextpad=0.4)
    return ax


def _levels(spectrum: Spectrum, ax: Any, *, near: bool) -> None:
    chosen = spectrum.is_between_bands & ((spectrum.nearness > HALF) == near)
    phases = np.repeat(spectrum.phases[:, None], spectrum.levels.shape[1], axis=1)[chosen]
    face, edge, label = (INK, INK, "at the probe") if near else ("white", GREY, "at the other end")
    ax.plot(
        phases,
        spectrum.levels[chosen],
        "o",
        markersize=3.0,
        markerfacecolor=face,
        markeredgecolor=edge,
        markeredgewidth=0.7,
        label=label,
        zorder=3,
    )
