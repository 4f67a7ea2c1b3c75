"""Maps over the cycle: the local density at the probe's end, and the potential along the device."""

from __future__ import annotations

from typing import Any

import numpy as np

from scatterpump.figures.axes import colour_bar, cycle_axis
from scatterpump.figures.style import ACCENT, strength_map
from scatterpump.portrait.density import LocalDensity
from scatterpump.portrait.potential import Potential

__all__ = ["local_density", "potential"]

DECADES = 4  # of density that are told apart below the largest


def local_density(density: LocalDensity, ax: Any) -> Any:
    """Draw the density of states at the probe's end over phi and energy; darker means more, blank: no open mode."""
    from matplotlib.colors import LogNorm

    ax.set_facecolor("white")
    known = np.ma.masked_invalid(density.density)
    largest = float(known.max()) if known.count() and known.max() > 0 else 1.0
    faintest = largest / 10**DECADES
    drawn = ax.pcolormesh(
        density.phases,
        density.energies,
        np.ma.maximum(known, faintest),
        cmap=strength_map(),
        norm=LogNorm(faintest, largest),
        shading="nearest",
        rasterized=True,
    )
    ax.axhline(density.fermi_level, color=ACCENT, linewidth=1.1, linestyle="--")
    cycle_axis(ax.xaxis, ax.set_xlim)
    ax.set_ylim(density.energies[0], density.energies[-1])
    ax.set(ylabel="energy (pump's unit)", title="local density at the probe's end")
    colour_bar(drawn, ax, "states per unit of energy")
    return ax


def potential(potential: Potential, ax: Any) -> Any:
    """Draw the mean on-site energy at each place along the device, over phi; darker means higher."""
    drawn = ax.pcolormesh(
        potential.places, potential.phases, potential.energies, cmap=strength_map(), shading="nearest", rasterized=True
    )
    cycle_axis(ax.yaxis, ax.set_ylim)
    ax.set(xlabel="x (lattice constants)", title="potential along the device")
    colour_bar(drawn, ax, "on-site energy (pump's unit)")
    return ax
