"""From a pump's own unit of energy to kelvin and hertz, for pumps that say what that unit is."""

from __future__ import annotations

from scatterpump.pump import Pump

__all__ = ["energy_of", "hertz", "joules", "kelvin"]


def joules(pump: Pump) -> float | None:
    """Return the pump's unit of energy in joules, or None if it has none."""
    units = getattr(pump, "units", None)
    return None if units is None else float(units.energy)


def kelvin(pump: Pump, energy: float) -> float | None:
    """Return the temperature T with k_B T = `energy`, or None."""
    from scipy.constants import k

    unit = joules(pump)
    return None if unit is None else energy * unit / k


def hertz(pump: Pump, energy: float) -> float | None:
    """Return the frequency f with h f = `energy`, or None."""
    from scipy.constants import h

    unit = joules(pump)
    return None if unit is None else energy * unit / h


def energy_of(pump: Pump, frequency: float) -> float | None:
    """Return h f of a frequency in hertz in the pump's unit of energy, or None."""
    from scipy.constants import h

    unit = joules(pump)
    return None if unit is None else h * frequency / unit
