"""Energies and lengths as a laboratory reads them: "0.442 meV", "320 nm", or the bare number where there is no unit."""

from __future__ import annotations

from dataclasses import dataclass
from math import floor, inf, log10

from scatterpump.pump import Units

__all__ = ["OWN", "Measure", "with_prefix"]

PREFIXES = {-15: "f", -12: "p", -9: "n", -6: "u", -3: "m", 0: "", 3: "k", 6: "M", 9: "G", 12: "T"}
MEV = 1.602176634e-22  # joules, exact since 2019
SAME = 1e-9
DIGITS = 4
OWN = "the system's own unit"


def with_prefix(value: float, unit: str) -> str:
    """Return e.g. "1.234 GHz": four digits and a prefix that leaves one to three of them before the point."""
    if value == 0 or abs(value) == inf:
        return f"{value:g} {unit}"
    power = 3 * floor(log10(float(f"{abs(value):.{DIGITS}g}")) / 3)
    power = min(max(power, min(PREFIXES)), max(PREFIXES))
    return f"{value / 10.0**power:.{DIGITS}g} {PREFIXES[power]}{unit}"


@dataclass(frozen=True)
class Measure:
    """The units of one pump.

    Parameters
    ----------
    units : Units or None
        None for a pump whose numbers have no unit.
    """

    units: Units | None

    @property
    def energy_unit(self) -> str:
        """What a number of the pump's energies is followed by, or "" if by nothing."""
        return "meV" if self.units is not None and abs(self.units.energy / MEV - 1) < SAME else ""

    @property
    def on_axes(self) -> str:
        """What stands behind an energy on the axis of a drawing."""
        return self.energy_unit or "pump's unit"

    @property
    def scale(self) -> str:
        """What one unit of energy in numbers without a unit beside them is: in a sheet's JSON, say."""
        if self.energy_unit:
            return self.energy_unit
        return OWN if self.units is None else f"{self.units.energy:.{DIGITS}g} J"

    def energy(self, value: float) -> str:
        """Return an energy: in meV, or as a number with the frequency E/h behind it, or as a number."""
        if self.energy_unit:
            return f"{value:.{DIGITS}g} {self.energy_unit}"
        if self.units is None:
            return f"{value:.{DIGITS}g}"
        from scipy.constants import h

        return f"{value:.{DIGITS}g} (h x {with_prefix(value * self.units.energy / h, 'Hz')})"

    def energies(self, low: float, high: float) -> str:
        """Return a range of energies; one end may be infinite."""
        unit = f" {self.energy_unit}".rstrip()
        if low == -inf or high == inf:
            known, word = (high, "below") if low == -inf else (low, "above")
            return "any" if abs(known) == inf else f"{word} {known:.{DIGITS}g}{unit}"
        return f"{low:.{DIGITS}g} to {high:.{DIGITS}g}{unit}"

    def length(self, sites: float) -> str:
        """Return a length of so many lattice constants."""
        return f"{sites:g} sites" if self.units is None else with_prefix(sites * self.units.length, "m")
