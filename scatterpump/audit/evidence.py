"""What the checks look at, gathered once."""

from __future__ import annotations

from dataclasses import dataclass

from scatterpump.bulk.gap import BulkGap
from scatterpump.pump import Pump
from scatterpump.solver.trace import ReflectionTrace
from scatterpump.winding.result import Winding

__all__ = ["Evidence"]


@dataclass(frozen=True)
class Evidence:
    """A pump and all that was found out about it.

    Attributes
    ----------
    pump : Pump
    trace : ReflectionTrace
        Reflection and transmission at even phases and where levels cross the Fermi level.
    winding : Winding or None
        None if r is singular somewhere.
    gap : BulkGap or None
        None if no cell repeats in the pump.
    chern : int or None
        None without a repeating cell, or where the gap closes.
    """

    pump: Pump
    trace: ReflectionTrace
    winding: Winding | None
    gap: BulkGap | None
    chern: int | None
