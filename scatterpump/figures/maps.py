"""Maps over the cycle: the local density at the probe's end, and the potential along the device."""

from __future__ import annotations

from typing import Any

import numpy as np

from scatterpump.figures.axes import colour_bar, cycle_axis
from scatterpump.figures.style import ACCENT, strength_map
from scatterpump.portrait.density import LocalDensity
from scatterpump.portrait.potential import Potential

__all__ = ["local_density", "potential"]

SHOWN = 0.99  # of all values lie on the scale: one sharp level must not bleach the rest


def local_density(density: LocalDensity, ax: Any) -> Any:
    """Draw the density of states at the probe's end over phi and energy; darker means more, blank: no open mode."""
    known = np.ma.masked_invalid(density.density)
    strong = float(np.quantile(known.compressed(), SHOWN)) if known.count() else 1.0
    drawn = ax.pcolormesh(
        density.phases,
        density.energies,
        known,
        cmap=strength_map(),
        vmin=0.0,
        vmax=strong,
        shading="nearest",
        rasterized=True,
    )
    ax.axhline(density.fermi_level, color=ACCENT, linewidth=1.1, linestyle="--")
    cycle_axis(ax.xaxis, ax.set_xlim)
    ax.set_ylim(density.energies[0], density.energies[-1])
    ax.set(ylabel=f"energy ({density.unit})", title="density at the probe's end")
    colour_bar(drawn, ax, f"states per {density.unit}", extend="max")
    return ax


def potential(potential: Potential, ax: Any) -> Any:
    """Draw the mean on-site energy at each place along the device, over phi; darker means higher."""
    drawn = ax.pcolormesh(
        potential.places, potential.phases, potential.energies, cmap=strength_map(), shading="nearest", rasterized=True
    )
    cycle_axis(ax.yaxis, ax.set_ylim)
    ax.set(xlabel="x (lattice constants)", title="potential")
    colour_bar(drawn, ax, f"on-site ({potential.unit})")
    return ax
