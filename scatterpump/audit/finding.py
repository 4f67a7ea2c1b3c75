"""What an audit says: findings, each with its number, its limit, one sentence of physics and one of remedy."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

__all__ = ["AuditReport", "Finding", "Status", "graded"]

Status = Literal["pass", "caution", "alarm"]


@dataclass(frozen=True)
class Finding:
    """The outcome of one check.

    Attributes
    ----------
    check : str
        Name of the check.
    status : "pass", "caution" or "alarm"
        An alarm means that the number of charges must not be trusted.
    value, limit : float
        What was found and what it is held against, in `unit`.
    unit : str
        Unit of both; "1" for a pure number, "E" for the pump's unit of energy.
    message : str
        One sentence of physics.
    remedy : str
        One sentence on what to do; empty for a pass.
    where : str
        Phase, momentum or lead it belongs to, or empty.
    """

    check: str
    status: Status
    value: float
    limit: float
    unit: str
    message: str
    remedy: str = ""
    where: str = ""


@dataclass(frozen=True)
class AuditReport:
    """All findings, in the order of the checks."""

    findings: tuple[Finding, ...]

    @property
    def alarms(self) -> tuple[Finding, ...]:
        """Findings that forbid trusting the number."""
        return tuple(f for f in self.findings if f.status == "alarm")

    @property
    def cautions(self) -> tuple[Finding, ...]:
        """Findings to know about."""
        return tuple(f for f in self.findings if f.status == "caution")

    @property
    def passed(self) -> bool:
        """True if no check raised an alarm."""
        return not self.alarms


def graded(value: float, caution: float, alarm: float) -> Status:
    """Return the status of a quantity that should be small: compared so that a NaN is an alarm."""
    if not value <= alarm:
        return "alarm"
    return "pass" if value <= caution else "caution"
