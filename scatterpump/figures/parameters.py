"""The cycle in the plane of its parameters."""

from __future__ import annotations

from typing import Any

from scatterpump.figures.axes import colour_bar
from scatterpump.figures.style import ACCENT, INK, strength_map
from scatterpump.portrait.parameters import ParameterPlane

__all__ = ["parameter_plane"]

ARROW = 4  # samples from the tail of the arrow to its head


def parameter_plane(plane: ParameterPlane, ax: Any) -> Any:
    """Draw the cycle of two parameters; darker where a band is nearer to the Fermi level, hatched where it reaches it.

    The square is phi = 0, and the arrow points the way of growing phi.
    """
    if plane.distance.size:
        shades = strength_map().reversed()
        drawn = ax.pcolormesh(
            plane.x, plane.y, plane.distance, cmap=shades, vmin=0.0, shading="nearest", rasterized=True
        )
        colour_bar(drawn, ax, f"nearest band ({plane.unit})")
        _hatch_closed(plane, ax)
    x, y = plane.path.T
    ax.plot(x, y, color="white", linewidth=3.2)
    ax.plot(x, y, color=INK, linewidth=1.4)
    ax.plot(x[:1], y[:1], "s", color=INK, markersize=5)
    middle = len(x) // 8
    ax.annotate(
        "",
        (x[middle + ARROW], y[middle + ARROW]),
        (x[middle], y[middle]),
        arrowprops={"arrowstyle": "-|>", "color": INK, "mutation_scale": 14},
    )
    unit = "(pump's unit)"
    ax.set(xlabel=f"{plane.names[0]} {unit}", ylabel=f"{plane.names[1]} {unit}", title="the cycle and the gap")
    return ax


def _hatch_closed(plane: ParameterPlane, ax: Any) -> None:
    if plane.is_closed.any():
        from matplotlib import rc_context

        with rc_context({"hatch.color": ACCENT}):
            ax.contourf(plane.x, plane.y, plane.is_closed, levels=(0.5, 1.5), colors="none", hatches=("//////",))
