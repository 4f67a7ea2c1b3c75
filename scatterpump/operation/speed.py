"""How fast a pump may be driven: an estimate from the gap, and the frequency at which the computed charge goes wrong.

Two levels that come as close as a gap D while the distance of their diabatic partners changes at the rate v exchange
an electron with the probability

    P = exp(-pi D^2 / 2 hbar v)

(L. D. Landau, Phys. Z. Sowjetunion 2, 46 (1932); C. Zener, Proc. R. Soc. Lond. A 137, 696 (1932), citations from
memory).  With v = omega s, s = 2 max |dH/dphi|, this is a scale for the frequency beyond which nothing is quantised.
It is an estimate and no bound: what leaks through the device grows with the square of the frequency as well, which only
the Floquet charge knows.
"""

from __future__ import annotations

from math import exp, isfinite, log, pi

import numpy as np
from numpy.typing import NDArray

from scatterpump.bulk.cell import known_cell
from scatterpump.bulk.gap import bulk_gap
from scatterpump.operation.driven import FIRST_SIDEBANDS, driven_charge
from scatterpump.operation.limit import Limit, found_limit, require_error, why_not
from scatterpump.operation.slow import SlowCharge, slow_charge
from scatterpump.operation.units import hertz
from scatterpump.pump import Pump
from scatterpump.solver.hamiltonian import driven_path
from scatterpump.winding.result import Winding

__all__ = ["adiabatic_frequency", "landau_zener", "level_scale", "speed_limit", "sweep_rate"]

Entries = NDArray[np.complex128]
SHARE = 0.2  # of the allowed deviation: accuracy of what is compared with it, a few per cent of the frequency
PANELS = 8  # of energies at most for one frequency: levels of a long device are too many to be resolved one by one
STEPS = 30  # halvings or doublings of the frequency before it is given up
SAFE = log(0.1)  # how far below the allowed deviation a frequency is taken to be safe
FINE = 0.05  # relative accuracy of the limit
INSIDE = 0.1  # share of a bracket by which it shrinks at least
APART = 0.5  # logarithms of frequencies between which a slope is not all scatter
FEWER = 2 / 3  # of the sidebands that were needed last, to begin with at the next frequency
TINY = 1e-300


def level_scale(pump: Pump) -> float:
    """Return a bound on |H| at phi = 0 by sums over rows: an energy beyond which a device has no levels."""
    driven, _ = driven_path(pump)
    return float(np.bincount(driven.rows, weights=np.abs(driven.at(0.0)), minlength=1).max())


def landau_zener(gap: float, rate: float) -> float:
    """Return the probability of passing an avoided crossing the wrong way.

    Parameters
    ----------
    gap : float
        Smallest distance D of the two levels, an energy.
    rate : float
        hbar v, with v the rate at which the distance of the diabatic levels changes: an energy squared.
    """
    return exp(-pi * gap**2 / (2 * rate)) if rate > 0 else 0.0


def sweep_rate(pump: Pump) -> float:
    """Return s = 2 max |dH/dphi|, a bound on how fast two levels of the device move apart (|.| by sums over rows)."""
    driven, path = driven_path(pump)

    def norm(entries: Entries) -> float:
        return float(np.bincount(driven.rows, weights=np.abs(entries), minlength=1).max())

    return 2 * path.slopes(norm).largest


def adiabatic_frequency(pump: Pump, error: float = 1e-6) -> float | None:
    """Return hbar omega at which the Landau-Zener probability at the bulk gap is `error`; None without a bulk gap."""
    if known_cell(pump) is None:
        return None
    gap, rate = bulk_gap(pump).lower, sweep_rate(pump)
    return float(pi * gap**2 / (2 * rate * log(1 / error))) if rate > 0 and isfinite(gap) else None


def speed_limit(pump: Pump, error: float = 1e-6, *, winding: Winding | None = None) -> Limit:
    """Return the largest frequency at which the cold charge in a cycle is within `error` of the proven integer.

    Parameters
    ----------
    pump : Pump
    error : float
        Deviation to be allowed, in e; between 0 and 1/2.
    winding : Winding, optional
        The pump's winding, if it is known already.

    Notes
    -----
    The frequency is halved until the deviation is a tenth of what is allowed, and then found by secants; a deviation
    that exceeds `error` only in a narrow range further below is not seen.  Of a long device's many levels only an
    average is taken, at a few energies; the reason says how well the limit is known then.
    """
    require_error(error)
    from threadpoolctl import threadpool_limits

    with threadpool_limits(1):  # many small problems: threads would only get in each other's way
        slow = slow_charge(pump, winding)
        estimate = adiabatic_frequency(pump, error)
        refused = why_not(slow, error)
        if refused:
            return _limit(pump, 0.0 if slow.number is not None else None, slow, error, estimate, 0, refused)
        deviations = _Deviations(pump, slow, error)
        bracket = _bracketed(deviations, estimate or sweep_rate(pump) / 2)
        value = _between(deviations, *bracket) if bracket else None
        reason = f"non-adiabatic transitions; known to {deviations.unsure:.0%}" if bracket else "no such frequency met"
        return _limit(pump, value, slow, error, estimate, deviations.evaluations, reason)


class _Deviations:
    """Deviations from the integer at one frequency after another, and how well a limit found from them is known."""

    def __init__(self, pump: Pump, slow: SlowCharge, error: float) -> None:
        self.pump, self.slow, self.error, self.evaluations = pump, slow, error, 0
        self.sidebands, self.unsure = FIRST_SIDEBANDS, FINE
        self.known: dict[float, float] = {}

    def excess(self, logarithm: float) -> float:
        """Return log(|deviation| / error), negative where the pump is good enough, at the log of a frequency."""
        if logarithm not in self.known:
            self.known[logarithm] = self._measured(exp(logarithm))
        return self.known[logarithm]

    def _measured(self, frequency: float) -> float:
        driven = driven_charge(
            self.pump,
            self.slow.found.leads,
            frequency,
            absolute=SHARE * self.error,
            relative=SHARE,
            sidebands=max(FIRST_SIDEBANDS, int(FEWER * self.sidebands)),
            panels=PANELS,
        )
        self.sidebands = driven.sidebands
        self.evaluations += driven.evaluations
        off = max(abs(self.slow.found.leak + float(driven.shift[self.pump.probe])), TINY)
        found = log(off / self.error)
        if abs(found) < 1:  # near the limit
            self.unsure = FINE + min(driven.error / off, 1.0) / self._steepness(log(frequency), found)
        return found

    def _steepness(self, logarithm: float, found: float) -> float:
        """d log |deviation| / d log frequency, from others that are not too near; the square at least."""
        slopes = [(found - other) / (logarithm - at) for at, other in self.known.items() if abs(logarithm - at) > APART]
        return max([2.0, *slopes])


def _bracketed(deviations: _Deviations, start: float) -> tuple[float, float] | None:
    """Logs of a frequency that is safe, and of one above it that is too high."""
    bad = log(start)
    good, steps = None, 0
    while deviations.excess(bad) <= 0:
        good, bad, steps = bad, bad + log(2), steps + 1
        if steps > STEPS:
            return None
    if good is not None:
        return good, bad
    good = bad
    for _ in range(STEPS):
        good -= log(2)
        if deviations.excess(good) > 0:
            bad = good
        elif deviations.excess(good) <= SAFE:
            return good, bad
    return None


def _between(deviations: _Deviations, good: float, bad: float) -> float:
    """The frequency at which the deviation is what is allowed: log |deviation| is nearly straight between the two."""
    while bad - good > FINE:
        low, high = deviations.excess(good), deviations.excess(bad)
        share = min(max(low / (low - high), INSIDE), 1 - INSIDE)
        place = good + share * (bad - good)
        if abs(found := deviations.excess(place)) <= SHARE:
            return exp(place)
        good, bad = (place, bad) if found < 0 else (good, place)
    return exp(good)


def _limit(
    pump: Pump, value: float | None, slow: SlowCharge, error: float, estimate: float | None, work: int, reason: str
) -> Limit:
    si = None if value is None else hertz(pump, value)
    return found_limit(value, si, "Hz", slow, error, estimate, work, reason)
