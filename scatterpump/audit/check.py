"""What a check is: a question to a pump, with its limits and its remedy said once, for findings and catalogue alike.

A check is written as a function of `Evidence` under the decorator `check`.  Its docstring is the question it asks; it
returns `passed`, `caution` or `alarm`, or None where it does not apply.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from inspect import getdoc
from math import inf
from textwrap import fill

import numpy as np

from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import Basis, Finding, Place, Status
from scatterpump.errors import SolverError

__all__ = ["WIDTH", "Check", "Outcome", "alarm", "caution", "check", "graded", "passed"]

WIDTH = 98
UNSOLVABLE = (
    SolverError,
    np.linalg.LinAlgError,
    RuntimeError,
    ArithmeticError,
)  # what solvers raise on hopeless numbers
UNSOLVABLE_REMEDY = "Look for levels that nothing couples to, and for energies of very different sizes."
NOWHERE = Place()


@dataclass(frozen=True)
class Outcome:
    """What a check found, before its name, unit and usual remedy are put to it; the fields are those of `Finding`."""

    status: Status
    value: float
    limit: float
    message: str
    where: Place = NOWHERE
    basis: Basis = "sampled"
    remedy: str = ""


def passed(value: float, limit: float, message: str, where: Place = NOWHERE, *, basis: Basis = "sampled") -> Outcome:
    """Say that all is well."""
    return Outcome("pass", value, limit, message, where, basis)


def caution(
    value: float, limit: float, message: str, where: Place = NOWHERE, *, basis: Basis = "sampled", remedy: str = ""
) -> Outcome:
    """Say something to know about; `remedy` replaces the check's usual one."""
    return Outcome("caution", value, limit, message, where, basis, remedy)


def alarm(
    value: float, limit: float, message: str, where: Place = NOWHERE, *, basis: Basis = "sampled", remedy: str = ""
) -> Outcome:
    """Say that the number must not be trusted; `remedy` replaces the check's usual one."""
    return Outcome("alarm", value, limit, message, where, basis, remedy)


def graded(
    value: float,
    limits: tuple[float, float],
    well: str,
    ill: str,
    where: Place = NOWHERE,
    *,
    basis: Basis = "sampled",
    remedy: str = "",
) -> Outcome:
    """Judge a quantity that should be small by the limits of (caution, alarm); a NaN is an alarm."""
    good, bad = limits
    if not value <= bad:
        return Outcome("alarm", value, bad, ill, where, basis, remedy)
    if value > good:
        return Outcome("caution", value, good, ill, where, basis, remedy)
    return Outcome("pass", value, good, well, where, basis)


@dataclass(frozen=True)
class Check:
    """One entry of the catalogue, callable with the evidence.

    Attributes
    ----------
    name, unit : str
    because : str
        Why it matters, one or two sentences of physics.
    caution, alarm : str
        When it says so; empty if it never does.
    remedy : str
        What to do.
    needs_proof : bool
        True if a quick audit has to leave it out.
    function : callable
    """

    name: str
    unit: str
    because: str
    caution: str
    alarm: str
    remedy: str
    needs_proof: bool
    function: Callable[[Evidence], Outcome | None]

    def __call__(self, evidence: Evidence) -> Finding | None:
        try:
            found = self.function(evidence)
        except UNSOLVABLE as error:
            if not evidence.is_sampled:
                raise  # not the solution but a value function fails
            found = alarm(inf, 0, f"This cannot be computed: {error}.", remedy=UNSOLVABLE_REMEDY)
        if found is None:
            return None
        remedy = "" if found.status == "pass" else found.remedy or self.remedy
        value, limit = float(found.value), float(found.limit)
        return Finding(
            self.name, found.status, value, limit, self.unit, found.message, remedy, found.where, found.basis
        )

    @property
    def asks(self) -> str:
        """What the check looks at: the docstring of its function."""
        return " ".join((getdoc(self.function) or "").split())

    def explained(self) -> str:
        """Return the catalogue's entry as text."""
        parts = (
            ("", self.asks),
            ("why      ", self.because),
            ("caution  ", self.caution or "never"),
            ("alarm    ", self.alarm or "never"),
            ("remedy   ", self.remedy),
        )
        blocks = [
            fill(text, WIDTH, initial_indent="  " + label, subsequent_indent="  " + " " * len(label))
            for label, text in parts
        ]
        return "\n".join([self.name, *blocks])


def check(
    name: str,
    *,
    unit: str = "1",
    because: str,
    caution: str = "",
    alarm: str = "",
    remedy: str,
    needs_proof: bool = False,
) -> Callable[[Callable[[Evidence], Outcome | None]], Check]:
    """Make a check of a function; see `Check` for the parameters."""

    def made(function: Callable[[Evidence], Outcome | None]) -> Check:
        return Check(name, unit, because, caution, alarm, remedy, needs_proof, function)

    return made
