"""The current that a pump delivers, I = Q e f, and how many parts per million it is off.

With e = 1.602176634e-19 C, which is exact (BIPM, The International System of Units, 9th ed. 2019), one charge at 1 GHz
is 160.2176634 pA.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import isfinite

from scatterpump.errors import InputError
from scatterpump.operation.charge import Charge, charge
from scatterpump.operation.units import energy_of, joules
from scatterpump.pump import Pump
from scatterpump.winding.result import Winding

__all__ = ["Current", "current"]

ELECTRON = 1.602176634e-19  # coulomb, exact
PREFIXES = ((1.0, "A"), (1e-3, "mA"), (1e-6, "uA"), (1e-9, "nA"), (1e-12, "pA"), (1e-15, "fA"), (1e-18, "aA"))


@dataclass(frozen=True)
class Current:
    """What an ammeter reads.

    Attributes
    ----------
    ampere : float
        Q e f, positive where particles go from probe to drain; for electrons the conventional current runs the other
        way.
    quantised : float or None
        W e f for the proven winding W; None without one.
    ppm : float or None
        Deviation of `ampere` from `quantised` in parts per million; None where `quantised` is None or 0.
    dominating : str
        The largest contribution to the deviation: "leakage", "temperature", "speed" or "numerical error".
    frequency : float
        Cycles a second, in hertz.
    speed_included : bool
        Whether the charge is the one at that frequency; False for a pump that does not say what its unit of energy is,
        whose charge is the one of a slow cycle.
    charge : Charge
    """

    ampere: float
    quantised: float | None
    ppm: float | None
    dominating: str
    frequency: float
    speed_included: bool
    charge: Charge

    def __str__(self) -> str:
        return in_amperes(self.ampere)


def current(pump: Pump, frequency: float, *, temperature: float = 0.0, winding: Winding | None = None) -> Current:
    """Return the current of `pump` driven at `frequency`.

    Parameters
    ----------
    pump : Pump
    frequency : float
        Cycles a second, in hertz; positive.
    temperature : float
        k_B T as an energy in the pump's unit.
    winding : Winding, optional
        The pump's winding, if it is known already.

    Raises
    ------
    InputError
        If the frequency is not positive, and as `scatterpump.charge`.
    """
    if not (isfinite(frequency) and frequency > 0):
        raise InputError(f"frequency is {frequency}", allowed="a positive number of hertz")
    quantum = energy_of(pump, frequency)
    found = charge(pump, temperature=temperature, frequency=quantum or 0.0, winding=winding)
    return delivered(found, frequency, speed_included=joules(pump) is not None)


def delivered(found: Charge, frequency: float, *, speed_included: bool = True) -> Current:
    """Return the current of a charge that is delivered `frequency` times a second (hertz)."""
    number, off = found.number, found.deviation
    return Current(
        found.probe * ELECTRON * frequency,
        None if number is None else number * ELECTRON * frequency,
        None if off is None or not number else 1e6 * off / number,
        _dominating(found),
        frequency,
        speed_included,
        found,
    )


def in_amperes(ampere: float) -> str:
    """Return a current as text with ten digits and a prefix, such as "160.2176634 pA"."""
    size, unit = next(((size, unit) for size, unit in PREFIXES if abs(ampere) >= size), PREFIXES[-1])
    return f"{ampere / size:.10g} {unit}"


def _dominating(found: Charge) -> str:
    parts = {
        "leakage": found.leakage or 0.0,
        "temperature": found.thermal,
        "speed": found.speed,
        "numerical error": found.error,
    }
    return max(parts, key=lambda name: abs(parts[name]))
