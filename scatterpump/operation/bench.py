"""One device on the bench: what the lines of its sheet are taken from, each worked out once."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

from scatterpump.bulk.cell import known_cell
from scatterpump.bulk.gap import BulkGap
from scatterpump.measure import Measure
from scatterpump.operation.plateaus import Plateau, plateaus
from scatterpump.pump import Pump
from scatterpump.verdict import Verdict

__all__ = ["Bench"]


@dataclass(frozen=True, eq=False)
class Bench:
    """A device, its verdict, and what is asked.

    Attributes
    ----------
    device : object
        The description, with a method ``pump()``.
    pump : Pump
    verdict : Verdict
    error : float
        Allowed deviation from the integer: of the leak, and of the charge.
    samples : int
        Samples of disorder to try.
    between : (low, high) or None
        Range of Fermi levels in which to look for plateaus.
    hertz : float or None
        Cycles a second, for the current.
    compute : bool
        Whether to compute what else is estimated from the gap.
    """

    device: Any
    pump: Pump
    verdict: Verdict
    error: float
    samples: int
    between: tuple[float, float] | None
    hertz: float | None = None
    compute: bool = False

    @property
    def measure(self) -> Measure:
        """The units of the sheet."""
        return Measure(self.pump.units)

    @property
    def gap(self) -> BulkGap | None:
        """The proven gap, or None without one that is open at the Fermi level, or where no proof means anything."""
        gap = None if self.verdict.is_void else self.verdict.gap
        return gap if gap is not None and gap.is_open else None

    @cached_property
    def plateaus(self) -> tuple[Plateau, ...]:
        """The windows of Fermi levels; none without a cell that was given or is found, or where no proof counts."""
        none = self.verdict.is_void or known_cell(self.pump) is None
        return () if none else plateaus(self.pump, between=self.between)
