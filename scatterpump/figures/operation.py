"""What a pump does in operation: plateaus of the number, and the charge against frequency and temperature.

Results are taken by their attributes: plateaus have `lower`, `upper` and `number`; charges have `probe`, `number`,
`error`, `frequency` and `temperature`.
"""

from __future__ import annotations

from collections.abc import Iterable
from math import isfinite
from typing import Any

from scatterpump.errors import InputError
from scatterpump.figures.style import ACCENT, GREY, INK

__all__ = ["charge_by_frequency", "charge_by_temperature", "plateau_staircase"]

MARKERS = "osD^vPX"
DECADE, ROOM = 10.0, 0.3
BEYOND = 0.15  # of the range that is known, where a plateau has no end


def plateau_staircase(plateaus: Iterable[Any], ax: Any) -> Any:
    """Draw the number of charges a cycle against the Fermi level; between plateaus, and where hatched, it has none."""
    found = sorted(plateaus, key=lambda plateau: float(plateau.lower))
    if not found:
        raise InputError("there is no plateau to draw", allowed="at least one")
    ends = [float(end) for plateau in found for end in (plateau.lower, plateau.upper) if isfinite(end)]
    low, high = (min(ends), max(ends)) if ends else (-1.0, 1.0)
    margin = BEYOND * (high - low or 1.0)
    left, right = low - margin, high + margin
    for plateau in found:
        start, end = max(float(plateau.lower), left), min(float(plateau.upper), right)
        if plateau.number is None:
            ax.axvspan(start, end, facecolor="none", edgecolor=GREY, hatch="////", linewidth=0)
            continue
        proven = getattr(plateau, "how", "proven") == "proven"
        ax.plot([start, end], [plateau.number] * 2, color=INK, linewidth=2.4, linestyle="-" if proven else (0, (2, 1)))
        ax.annotate(
            f"{plateau.number:+d}" if plateau.number else "0",
            ((start + end) / 2, plateau.number),
            xytext=(0, 4),
            textcoords="offset points",
            ha="center",
        )
    ax.set(xlim=(left, right), xlabel="Fermi level (pump's unit)", ylabel="charges a cycle (1)")
    ax.set_title("plateaus: solid proven, dashed computed only")
    ax.yaxis.get_major_locator().set_params(integer=True)
    ax.margins(y=0.2)
    return ax


def charge_by_frequency(charges: Iterable[Any], ax: Any) -> Any:
    """Draw the charge a cycle against hbar omega, one line for each temperature."""
    return _charges(list(charges), ax, ("frequency", "ħω"), ("temperature", "$k_BT$"))


def charge_by_temperature(charges: Iterable[Any], ax: Any) -> Any:
    """Draw the charge a cycle against k_B T, one line for each frequency."""
    return _charges(list(charges), ax, ("temperature", "$k_BT$"), ("frequency", "ħω"))


def _charges(charges: list[Any], ax: Any, along: tuple[str, str], other: tuple[str, str]) -> Any:
    if not charges:
        raise InputError("there is no charge to draw", allowed="at least one")
    for count, value in enumerate(sorted({getattr(charge, other[0]) for charge in charges})):
        line = sorted((c for c in charges if getattr(c, other[0]) == value), key=lambda c: float(getattr(c, along[0])))
        ax.errorbar(
            [getattr(charge, along[0]) for charge in line],
            [charge.probe for charge in line],
            [charge.error for charge in line],
            color=INK if count % 2 == 0 else GREY,
            marker=MARKERS[count % len(MARKERS)],
            markersize=4,
            linewidth=1.0,
            label=f"{other[1]} = {value:g}",
        )
    numbers = {charge.number for charge in charges if charge.number is not None}
    for number in sorted(numbers):
        ax.axhline(number, color=ACCENT, linewidth=1.0, linestyle="--", label=f"proven number {number:+d}")
    _scale(ax, sorted({float(getattr(charge, along[0])) for charge in charges}))
    ax.set(
        xlabel=f"{along[1]} (pump's unit of energy)", ylabel="charge a cycle (e)", title=f"charge against {along[1]}"
    )
    ax.legend(fontsize=7, frameon=False)
    return ax


def _scale(ax: Any, values: list[float]) -> None:
    """Logarithmic over more than a decade, linear about a zero."""
    positive = [value for value in values if value > 0]
    if len(positive) < 2 or positive[-1] <= DECADE * positive[0]:
        return
    if values[0] > 0:
        ax.set_xscale("log")
        return
    ax.set_xscale("symlog", linthresh=positive[0])
    ax.set_xlim(-ROOM * positive[0], positive[-1] * (1 + ROOM))
