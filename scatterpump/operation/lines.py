"""The lines of a sheet: one function for each thing that a laboratory asks, in the order in which they stand.

A function takes the `Bench` and returns a `Line`, or None where its question has no answer for this device.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from scatterpump.operation import warmth
from scatterpump.operation.bench import Bench
from scatterpump.operation.length import Resizable, shortest_device
from scatterpump.operation.line import How, Line
from scatterpump.operation.tolerance import LADDER, Reach, disorder_tolerance, drive_tolerance

__all__ = ["LIMITS", "OUTPUT", "How", "Line"]


def fermi_level(bench: Bench) -> Line | None:
    """Over which Fermi levels does the cycle stay gapped?"""
    gap = bench.gap
    if gap is None:
        return None
    low, high = gap.lower_edge.upper, gap.upper_edge.lower
    text = f"{bench.measure.energies(low, high)}; the level is {bench.measure.energy(gap.distance_lower)} inside"
    values = {"lower": low, "upper": high, "distance": gap.distance_lower}
    return Line("Fermi level", _if_exact(gap.exact), text, values)


def potential(bench: Bench) -> Line | None:
    """Which static error of gates or potential leaves the integer?"""
    if bench.gap is None:
        return None
    change = bench.gap.distance_lower
    text = f"any static change of the potential below {bench.measure.energy(change)}, whatever its shape"
    return Line("gate error", _if_exact(bench.gap.exact), text, {"change": change})


def disorder(bench: Bench) -> tuple[Line, ...]:
    """How much disorder?"""
    if bench.gap is None:
        return ()
    found, energy = disorder_tolerance(bench.pump, samples=bench.samples), bench.measure.energy
    text = f"random on-site energies in a box {energy(found.width)} wide"
    if found.best_width > (1 + bench.gap.distance_upper * 0.02) * found.width:
        text += f"; {energy(found.best_width)} with the level at {energy(found.level)}"
    values = {"width": found.width, "best_width": found.best_width, "level": found.level}
    lines = [Line("disorder", _if_exact(found.exact), text, values)]
    if found.samples:
        worst, best, count = min(found.samples), max(found.samples), len(found.samples)
        text = f"of {count} samples the weakest bore a box {energy(worst)} wide, the strongest {energy(best)}"
        text += ", the widest tried" if best >= LADDER[-1] * found.width else ""
        lines.append(Line("disorder tried", "estimated", text, {"samples": list(found.samples)}))
    return tuple(lines)


def drive(bench: Bench) -> Line | None:
    """How weak or strong may the modulation be?"""
    if bench.gap is None:
        return None
    found = drive_tolerance(bench.pump)
    weak, strong = found.weakest, found.strongest
    text = f"{weak.holds:.3g} to {strong.holds:.3g} times the given one"
    lost = [f"{reach.fails:.3g}" for reach in (weak, strong) if reach.fails is not None]
    text += f"; lost at {' and at '.join(lost)}" if lost else "; no limit met"
    return Line("drive", _if_exact(found.exact), text, {"weakest": _reach(weak), "strongest": _reach(strong)})


def length(bench: Bench) -> Line | None:
    """How short may the device be?

    Asked of descriptions that know their own cell, and give it to the pump: only they can build another length.
    """
    if bench.gap is None or bench.pump.bulk is None or not isinstance(bench.device, Resizable):
        return None
    found = shortest_device(bench.device, leak=bench.error)
    cell = bench.pump.finalized_bulk.cell_size
    plural = "" if found.cells == 1 else "s"
    text = f"{found.cells} cell{plural}, {bench.measure.length(found.cells * cell)}, leaks up to {found.leak:.1e}"
    text += f" ({f'proven {found.leak_bound:.1e}' if found.leak_bound < 1 else 'no bound proven'})"
    if found.cells > 1:
        text += f"; one cell less {found.shorter_leak:.1e}, where {found.goal:.1g} is allowed"
    values = {name: getattr(found, name) for name in ("cells", "leak", "leak_bound", "shorter_leak", "goal", "number")}
    return Line("shortest", "computed", text, values)


def integer(bench: Bench) -> Line:
    """Which number of charges?"""
    winding = bench.verdict.winding
    if winding is None or winding.number is None or not bench.verdict.trustworthy:
        return Line("charges a cycle", "computed", "none to be trusted; see the verdict", {"number": None})
    text = f"{winding.number:+d}" if winding.number else "0"
    how: How = "proven" if winding.exact else "estimated"
    return Line("charges a cycle", how, f"{text} {bench.verdict.route}", {"number": winding.number})


def leak(bench: Bench) -> Line | None:
    """How much leaks through?"""
    winding = bench.verdict.winding
    if winding is None or bench.verdict.is_void or not 0 < winding.leak.bound < 1:
        return None
    text = f"at most {winding.leak.bound:.1e} of the electrons, at every phi"
    return Line("leak", _if_exact(winding.exact), text, {"bound": float(winding.leak.bound)})


def _if_exact(exact: bool) -> How:
    return "proven" if exact else "estimated"


def _reach(reach: Reach) -> dict[str, Any]:
    return {"holds": reach.holds, "fails": reach.fails}


Answer = Line | tuple[Line, ...] | None
LIMITS: tuple[Callable[[Bench], Answer], ...] = (
    fermi_level,
    potential,
    disorder,
    drive,
    length,
    warmth.temperature,
    warmth.speed,
)
OUTPUT: tuple[Callable[[Bench], Answer], ...] = (integer, leak, warmth.at_rest, warmth.delivered_current)
