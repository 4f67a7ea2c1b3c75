"""How warm a pump may be: the temperature at which the averaged charge goes wrong.

The slow charge is found once at the energies that matter for a whole range of temperatures; averages share it.
"""

from __future__ import annotations

from math import isfinite, log

import numpy as np

from scatterpump.bulk.cell import known_cell
from scatterpump.bulk.gap import bulk_gap
from scatterpump.operation.limit import Limit, found_limit, require_error, why_not
from scatterpump.operation.slow import SlowCharge, SlowCharges, slow_charge
from scatterpump.operation.speed import level_scale
from scatterpump.operation.thermal import Floats, Levels, average, weight
from scatterpump.operation.units import kelvin
from scatterpump.pump import Pump
from scatterpump.winding.result import Winding

__all__ = ["temperature_limit"]

SHARE = 0.05  # of the average, or of the allowed deviation: accuracy of what is compared with it
SEARCHED = 2.0 ** np.arange(-2.0, 1.25, 0.25)  # temperatures, in units of the estimate
BEYOND = 10.0  # how far past the window's edge to average, in the same unit: 2 % of the hottest tail are left out
FIRST = 1e-3  # of the estimated scale: where the search for the window's edge begins
STEPS = 22  # of half an octave: up to the scale itself
HALF = 0.5  # of a charge: where the window is taken to end


def temperature_limit(pump: Pump, error: float = 1e-6, *, winding: Winding | None = None) -> Limit:
    """Return the largest k_B T at which the slow charge in a cycle is within `error` of the proven integer.

    Parameters
    ----------
    pump : Pump
    error : float
        Deviation to be allowed, in e; between 0 and 1/2.
    winding : Winding, optional
        The pump's winding, if it is known already.

    Notes
    -----
    Electrons alone are warm: phonons and charging energies are not part of the theory.
    """
    require_error(error)
    from threadpoolctl import threadpool_limits

    with threadpool_limits(1):  # many small problems: threads would only get in each other's way
        slow = slow_charge(pump, winding)
        refused = why_not(slow, error)
        if refused:
            return _limit(pump, 0.0 if slow.number is not None else None, slow, error, None, 0, refused)
        charges = SlowCharges(pump, slow)
        levels = Levels(charges.at, slow.found.leads)
        distance = _distance(pump) or _window(pump, levels)
        estimate = distance / log(1 / error)
        far = distance + BEYOND * estimate
        around = np.array([-far, -distance, 0.0, distance, far])
        value = _warmest(levels, pump.probe, slow.found.leak, error, estimate, around)
        reason = "no such temperature was met" if value is None else f"states {distance:.3g} from the Fermi level"
        return _limit(pump, value, slow, error, estimate, charges.evaluations, reason)


def _distance(pump: Pump) -> float:
    """Distance of the nearest bulk band from the Fermi level; 0 where none is known."""
    distance = 0.0 if known_cell(pump) is None else bulk_gap(pump).distance_upper
    return float(distance) if isfinite(distance) else 0.0


def _window(pump: Pump, levels: Levels) -> float:
    """Distance from the Fermi level, to a factor of sqrt 2, at which the charge from the probe is off by a half."""
    scale = level_scale(pump)
    for distance in scale * FIRST * np.sqrt(2.0) ** np.arange(STEPS):
        shifts = levels.shifts(distance * np.array([-1.0, 1.0]))[:, pump.probe]
        if np.abs(shifts).max() > HALF:
            return float(distance)
    return scale


def _warmest(levels: Levels, probe: int, leak: float, error: float, estimate: float, around: Floats) -> float | None:
    """Warm the leads step by step, and find where between two temperatures the deviation passes `error`.

    Panels begin at the same energies for all temperatures, so that averages share what they are taken over.
    """
    cold, before = 0.0, 0.0
    for temperature in estimate * SEARCHED:
        off = abs(leak + _shift(levels, temperature, error, around)[probe])
        if off > error:
            if cold == 0:
                return 0.0
            share = log(error / before) / log(off / before)  # log |deviation| is straight in 1/T
            return float(1 / (1 / cold + share * (1 / temperature - 1 / cold)))
        cold, before = temperature, off
    return None


def _shift(levels: Levels, temperature: float, error: float, around: Floats) -> Floats:
    """What a temperature adds to the charge from each lead."""
    found = average(
        levels,
        lambda energies: weight(energies, temperature, 0.0)[None],
        around,
        absolute=np.full(len(levels.reference), SHARE * error),
        relative=SHARE,
    )
    return np.asarray(found.shift[0])


def _limit(
    pump: Pump, value: float | None, slow: SlowCharge, error: float, estimate: float | None, work: int, reason: str
) -> Limit:
    si = None if value is None else kelvin(pump, value)
    return found_limit(value, si, "K", slow, error, estimate, work, reason)
