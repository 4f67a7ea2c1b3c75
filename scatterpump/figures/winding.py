"""How det r goes round: on its circle, its phase against phi, and its eigenphases."""

from __future__ import annotations

from typing import Any

import numpy as np

from scatterpump.figures.axes import CYCLE_TICKS, colour_bar, cycle_axis
from scatterpump.figures.style import ACCENT, GREY, INK, PALE, cycle_map
from scatterpump.portrait.turning import Turning

__all__ = ["determinant_circle", "determinant_phase", "eigenphases"]

TURN = 2 * np.pi
LATE = 0.85  # of the cycle: beyond it the word beside a crossing goes to its left, where there is room
MOST_RINGS = 60  # beyond which they hide what they ring
LIFT = 0.16  # of the radius over a cycle: a second turn does not hide the first
STRIP = (0.035, 0.075)  # heights of the intervals of the proof, as shares of the axes


def determinant_circle(turning: Turning, ax: Any) -> Any:
    """Draw det r on the unit circle, coloured by phi and lifted outwards as phi grows, from where it is at phi = 0.

    The rings are at the middles of the intervals of the proof.
    """
    from matplotlib.patches import Circle

    ax.add_patch(Circle((0, 0), 1.0, fill=False, edgecolor=PALE, linewidth=1.0))
    path = _lifted(turning, turning.phases) * turning.modulus
    dots = ax.scatter(path.real, path.imag, c=turning.phases, cmap=cycle_map(), vmin=0, vmax=TURN, s=9, zorder=2)
    middles = np.array([(a + b) / 2 % TURN for a, b in turning.winding.covering])
    if 0 < middles.size <= MOST_RINGS:
        rings = _lifted(turning, middles) * np.interp(middles, turning.phases, turning.modulus)
        ax.plot(rings.real, rings.imag, "o", markersize=5, markerfacecolor="none", markeredgecolor=INK, zorder=3)
    ax.set_aspect("equal")
    limit = 1.08 * (1 + LIFT)
    ax.set(xlim=(-limit, limit), ylim=(-limit, limit), xticks=(-1, 0, 1), yticks=(-1, 0, 1))
    ax.set(xlabel="Re det r (1)", ylabel="Im det r (1)", title="det r, lifted as φ grows")
    bar = colour_bar(dots, ax, "φ (rad)")
    bar.set_ticks(CYCLE_TICKS, labels=["0", "π/2", "π", "3π/2", "2π"])
    return ax


def _lifted(turning: Turning, phases: Any) -> Any:
    return (1 + LIFT * phases / TURN) * np.exp(1j * turning.at(phases))


def determinant_phase(turning: Turning, ax: Any) -> Any:
    """Draw the turns of det r against phi, the levels that cause them, and the intervals that make up the proof.

    Dotted: the samples miss a level that is too narrow for the eye, and go round another number of times than proven.
    """
    turns = turning.turned / TURN
    ax.plot(turning.phases, turns, color=INK, linewidth=1.3, linestyle="-" if turning.agrees else ":")
    low, high = float(turns.min()), float(turns.max())
    room = max(high - low, 0.1)
    ax.set_ylim(low - 0.28 * room, high + 0.08 * room)
    cycle_axis(ax.xaxis, ax.set_xlim)
    _mark_crossings(turning, ax)
    _strip(turning, ax)
    ax.set(ylabel="turns of det r (1)", title=_number(turning))
    return ax


def _number(turning: Turning) -> str:
    winding = turning.winding
    if winding.number is None:
        return f"not proven, {len(winding.unproven)} stretches open"
    count = len(winding.covering)
    number = f"{winding.number:+d}" if winding.number else "0"
    if not turning.agrees:
        return f"W = {number} is proven; a level too narrow to draw"
    return f"W = {number}, proven by {count} interval{'s' * (count != 1)}"


def _mark_crossings(turning: Turning, ax: Any) -> None:
    for crossing in turning.winding.crossings:
        late = crossing.phase > LATE * TURN
        ax.axvline(crossing.phase, color=ACCENT, linewidth=1.0, linestyle="--", zorder=1)
        ax.annotate(
            "filled" if crossing.direction > 0 else "emptied",
            (crossing.phase, 1.0),
            xycoords=("data", "axes fraction"),
            xytext=(-3 if late else 3, -2),
            ha="right" if late else "left",
            zorder=1.5,  # the curve stays on top
            textcoords="offset points",
            color=ACCENT,
            fontsize=7,
            va="top",
        )


def _strip(turning: Turning, ax: Any) -> None:
    """Intervals in two rows, so that one sees them overlap; what is not proven is hatched."""
    from matplotlib.collections import LineCollection

    place = ax.get_xaxis_transform()
    lines = [[(a, STRIP[i % 2]), (b, STRIP[i % 2])] for i, (a, b) in enumerate(turning.winding.covering)]
    ax.add_collection(LineCollection(lines, colors=GREY, linewidths=2.2, transform=place), autolim=False)
    for start, end in turning.winding.unproven:
        ax.axvspan(start, end, facecolor="none", edgecolor=ACCENT, hatch="////", linewidth=0.0)


def eigenphases(turning: Turning, ax: Any) -> Any:
    """Draw the argument of every eigenvalue of r against phi, and where a level crosses the Fermi level.

    Where the curves stand depends on the arbitrary phases of the lead's modes; how they move does not.
    """
    channels = turning.eigenphases.shape[1]
    ax.plot(turning.phases, turning.eigenphases, ".", color=INK, markersize=2.2)
    cycle_axis(ax.xaxis, ax.set_xlim)
    ax.set_yticks(np.arange(-2, 3) * np.pi / 2, ("−π", "−π/2", "0", "π/2", "π"))
    ax.set_ylim(-np.pi, np.pi)
    _mark_crossings(turning, ax)
    ax.set(ylabel="eigenphases of r (rad)", title=f"{channels} channel{'s' * (channels != 1)} of the probe")
    return ax
