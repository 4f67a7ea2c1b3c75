"""One point of a plan: its device, and what is known about it, each thing worked out once and only when asked for."""

from __future__ import annotations

from collections.abc import Callable
from copy import deepcopy
from dataclasses import dataclass, field, replace
from functools import cached_property
from pathlib import Path
from typing import Any, Literal

import numpy as np

from scatterpump.bulk.cell import known_cell
from scatterpump.bulk.gap import BulkGap, bulk_gap
from scatterpump.device_file import put, read_device
from scatterpump.errors import InputError, SingularReflectionError
from scatterpump.pump import Pump
from scatterpump.solver.reflect import reflect
from scatterpump.solver.trace import ReflectionTrace
from scatterpump.verdict import Verdict, judge
from scatterpump.winding.certificate import certify
from scatterpump.winding.result import Winding

__all__ = ["Bisection", "Point", "PumpMaker", "described"]

PumpMaker = Callable[[dict[str, Any]], Pump]
Engine = Literal["auto", "layered", "direct"]


@dataclass(frozen=True)
class Bisection:
    """The key along which it is searched where the integer is lost.

    Parameters
    ----------
    key : str
        Dotted key of the device, such as "disorder.onsite".
    first, last : float
        Where the search begins (the integer is there) and ends.
    accuracy : float
        Width of the bracket to stop at.
    """

    key: str
    first: float
    last: float
    accuracy: float

    def __post_init__(self) -> None:
        numbers = (self.first, self.last, self.accuracy)
        if not all(isinstance(n, int | float) and not isinstance(n, bool) and abs(n) < np.inf for n in numbers):
            raise InputError("the search for the lost integer has ends that are no numbers", allowed="finite numbers")
        if not self.first < self.last or not 0 < self.accuracy:
            raise InputError(
                f"the search for the lost integer runs from {self.first:g} to {self.last:g} to {self.accuracy:g}",
                allowed="'from' below 'to', and a positive 'accuracy'",
            )


@dataclass(frozen=True)
class Point:
    """A device and the choices with which it is looked at.

    Parameters
    ----------
    make : callable
        Takes {key: value} and returns the pump.
    changes : dict
        The values of this point.
    phases : int
        Number of even phases at which r is sampled where samples are asked for.
    engine : str
        Which solver samples r.
    whole : bool
        True if the audit is wanted, which looks at everything.
    leak : bool
        True if a bound on the leak is wanted, which takes as long again as the number.
    bisection : Bisection or None
    """

    make: PumpMaker
    changes: dict[str, Any]
    phases: int = 48
    engine: Engine = "auto"
    whole: bool = False
    leak: bool = True
    bisection: Bisection | None = field(default=None)

    def changed(self, key: str, value: Any) -> Point:
        """Return the same point with one more key changed, to be looked at without an audit."""
        return replace(self, changes={**self.changes, key: value}, whole=False, leak=False)

    @cached_property
    def pump(self) -> Pump:
        return self.make(self.changes)

    @cached_property
    def winding(self) -> Winding | None:
        """The winding, or None where r is singular."""
        if self.whole:
            return self.verdict.winding
        try:
            return certify(self.pump, leak=self.leak)
        except SingularReflectionError:
            return None

    @cached_property
    def gap(self) -> BulkGap | None:
        """The bulk gap, or None without a cell that was given or is found."""
        if self.whole:
            return self.verdict.gap
        return None if known_cell(self.pump) is None else bulk_gap(self.pump)

    @cached_property
    def verdict(self) -> Verdict:
        return judge(self.pump)

    @cached_property
    def trace(self) -> ReflectionTrace:
        return reflect(self.pump, 2 * np.pi * np.arange(self.phases) / self.phases, engine=self.engine)


def described(content: dict[str, Any], folder: Path) -> PumpMaker:
    """Return the maker that changes keys of a device file's content; `folder` holds the files it names."""

    def make(changes: dict[str, Any]) -> Pump:
        changed = deepcopy(content)
        for key, value in changes.items():
            put(changed, key, value, where="sweep")
        return read_device(changed, folder=folder).pump()

    return make
