"""Lines of a sheet about warm leads and a drive that takes its time: limits, the charge at rest, the current.

Without `Bench.compute` limits are estimated from the distance of the bands, and the current is that of a slow cycle.
"""

from __future__ import annotations

from collections.abc import Callable
from math import log

from scatterpump.measure import with_prefix
from scatterpump.operation.bench import Bench
from scatterpump.operation.charge import charge
from scatterpump.operation.current import Current, current, delivered
from scatterpump.operation.heat import temperature_limit
from scatterpump.operation.limit import Limit
from scatterpump.operation.line import How, Line
from scatterpump.operation.speed import adiabatic_frequency, speed_limit
from scatterpump.operation.units import hertz, kelvin
from scatterpump.pump import Pump

__all__ = ["at_rest", "delivered_current", "speed", "temperature"]


def temperature(bench: Bench) -> Line | None:
    """How warm may the leads be?"""
    if not bench.verdict.trustworthy:
        return None
    if bench.compute:
        return _computed(
            "temperature", temperature_limit(bench.pump, bench.error, winding=bench.verdict.winding), bench
        )
    estimate = None if bench.gap is None else bench.gap.distance_upper / log(1 / bench.error)
    return _estimated("temperature", estimate, "k_B T", kelvin, bench)


def speed(bench: Bench) -> Line | None:
    """How fast may the cycle be?"""
    if not bench.verdict.trustworthy:
        return None
    if bench.compute:
        return _computed("speed", speed_limit(bench.pump, bench.error, winding=bench.verdict.winding), bench)
    estimate = None if bench.gap is None else adiabatic_frequency(bench.pump, bench.error)
    return _estimated("speed", estimate, "h f", hertz, bench)


def at_rest(bench: Bench) -> Line | None:
    """Which charge does a cold and slow cycle carry?"""
    if not bench.verdict.trustworthy:
        return None
    found = charge(bench.pump, winding=bench.verdict.winding)
    leaked = 0.0 if found.leakage is None else found.leakage
    text = f"{found.probe:+.9f} e a cycle; the leak moves it by {leaked:+.1e} off the integer"
    values = {"charge": found.probe, "leakage": found.leakage, "error": found.error}
    return Line("charge at rest", "computed", text, values)


def delivered_current(bench: Bench) -> Line | None:
    """Which current at the frequency asked for?"""
    if not bench.verdict.trustworthy or bench.hertz is None:
        return None
    found, how = _current(bench, bench.hertz)
    text = f"{found} at {with_prefix(bench.hertz, 'Hz')}"
    if found.ppm is not None:
        text += f", {found.ppm:.2g} ppm off; most by {found.dominating}"
    if not found.charge.frequency:
        text += "; of a slow cycle"
    values = {"ampere": found.ampere, "hertz": bench.hertz, "ppm": found.ppm, "dominating": found.dominating}
    return Line("current", how, text, values)


def _current(bench: Bench, frequency: float) -> tuple[Current, How]:
    if bench.compute:
        found = current(bench.pump, frequency, winding=bench.verdict.winding)
        return found, "computed" if found.speed_included else "estimated"
    slow = charge(bench.pump, winding=bench.verdict.winding)
    return delivered(slow, frequency, speed_included=False), "estimated"


def _computed(label: str, limit: Limit, bench: Bench) -> Line:
    """A limit that was computed, with what sets it."""
    if limit.value is None:
        text = limit.reason
    elif limit.value == 0:
        text = f"none: {limit.reason}"
    else:
        text = f"{_both(label, limit.value, limit.si, bench)} for {limit.allowed:.0e} e; {limit.reason}"
    values = {name: getattr(limit, name) for name in ("value", "si", "unit", "estimate", "allowed", "reason")}
    return Line(label, "computed", text, values)


def _estimated(
    label: str,
    value: float | None,
    energy: str,
    si: Callable[[Pump, float], float | None],
    bench: Bench,
) -> Line | None:
    """A limit from the gap alone."""
    if value is None:
        return None
    found = si(bench.pump, value)
    text = f"about {_both(label, value, found, bench)} ({energy}) for {bench.error:.0e} e, from the gap alone"
    if label == "speed":
        text = f"not beyond {text}, after Landau and Zener; what is computed may lie far below it"
    return Line(label, "estimated", text, {"value": value, "si": found})


def _both(label: str, value: float, si: float | None, bench: Bench) -> str:
    """An energy, or what it is in kelvin or hertz."""
    if si is None:
        return bench.measure.energy(value)
    return with_prefix(si, "K" if label == "temperature" else "Hz")
