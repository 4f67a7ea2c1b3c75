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

from scatterpump.bulk.gap import bulk_gap
from scatterpump.errors import InputError
from scatterpump.operation.driven import driven_charge
from scatterpump.operation.limit import Limit, why_not
from scatterpump.operation.slow import SlowCharge, slow_charge
from scatterpump.operation.units import hertz
from scatterpump.pump import Pump
from scatterpump.solver.hamiltonian import DrivenHamiltonian
from scatterpump.solver.path import follow
from scatterpump.winding.result import Winding

__all__ = ["adiabatic_frequency", "landau_zener", "level_scale", "speed_limit", "sweep_rate"]

Entries = NDArray[np.complex128]
SHARE = 0.05  # of the allowed deviation: accuracy of what is compared with it
STEPS = 30  # halvings or doublings of the frequency before it is given up
BELOW = 2  # halvings by which the limit is looked at from below
FINE = 0.03  # relative accuracy of the limit
TINY = 1e-300


def level_scale(pump: Pump) -> float:
    """Return a bound on |H| at phi = 0 by sums over rows: an energy beyond which a device has no levels."""
    driven = DrivenHamiltonian(pump)
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
    driven = DrivenHamiltonian(pump)

    def norm(entries: Entries) -> float:
        return float(np.bincount(driven.rows, weights=np.abs(entries), minlength=1).max())

    return 2 * follow(driven.many, pump.cycle).slopes(norm).largest


def adiabatic_frequency(pump: Pump, error: float = 1e-6) -> float | None:
    """Return hbar omega at which the Landau-Zener probability at the bulk gap is `error`; None without a bulk gap."""
    if pump.bulk is None:
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
    The frequency is halved until the deviation is small enough there and for two more halvings, and then found by
    bisection.  A deviation that exceeds `error` only in a narrow range further below is not seen.
    """
    if not 0 < error < 0.5:
        raise InputError(f"error is {error}", allowed="a number between 0 and 1/2")
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
        reason = "non-adiabatic transitions" if bracket else "no such frequency was met"
        return _limit(pump, value, slow, error, estimate, deviations.evaluations, reason)


class _Deviations:
    """Deviations from the integer at one frequency after another."""

    def __init__(self, pump: Pump, slow: SlowCharge, error: float) -> None:
        self.pump, self.slow, self.error, self.evaluations = pump, slow, error, 0

    def excess(self, logarithm: float) -> float:
        """Return log(|deviation| / error), negative where the pump is good enough, at the log of a frequency."""
        reference, share = self.slow.found.leads, SHARE * self.error
        driven = driven_charge(self.pump, reference, exp(logarithm), absolute=share, relative=SHARE)
        self.evaluations += driven.evaluations
        off = self.slow.found.leak + float(driven.shift[self.pump.probe])
        return log(max(abs(off), TINY) / self.error)


def _bracketed(deviations: _Deviations, start: float) -> tuple[float, float] | None:
    """Logs of a frequency that is good enough, as are the next ones below it, and of twice it, which is not."""
    bad = log(start)
    steps = 0
    while deviations.excess(bad) <= 0:
        bad, steps = bad + log(2), steps + 1
        if steps > STEPS:
            return None
    good, streak = bad, 0
    for _ in range(STEPS):
        good -= log(2)
        if deviations.excess(good) > 0:
            bad, streak = good, 0
        elif (streak := streak + 1) > BELOW:
            return bad - log(2), bad
    return None


def _between(deviations: _Deviations, good: float, bad: float) -> float:
    from scipy.optimize import brentq

    return exp(float(brentq(deviations.excess, good, bad, xtol=FINE)))


def _limit(
    pump: Pump, value: float | None, slow: SlowCharge, error: float, estimate: float | None, work: int, reason: str
) -> Limit:
    leakage = None if slow.number is None else slow.found.leak
    si = None if value is None else hertz(pump, value)
    return Limit(value, si, "Hz", error, leakage, estimate, slow.found.evaluations + work, reason)
