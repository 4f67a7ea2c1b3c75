"""What an audit says: findings, each with its number, its limit, one sentence of physics and one of remedy."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Any, Literal

from scatterpump.plain import plain

__all__ = ["AuditReport", "Basis", "Finding", "Place", "Status"]

Status = Literal["pass", "caution", "alarm"]
Basis = Literal["proven", "sampled", "exact"]


@dataclass(frozen=True)
class Place:
    """Where a finding belongs; empty if it belongs to the pump as a whole.

    Attributes
    ----------
    phase : float or None
        phi in radians.
    momentum : float or None
        k in radians per cell.
    site : tuple of float or None
        Position of a site, in lattice constants.
    lead : int or None
        Number of a lead.
    """

    phase: float | None = None
    momentum: float | None = None
    site: tuple[float, ...] | None = None
    lead: int | None = None

    def __bool__(self) -> bool:
        return any(part is not None for part in (self.phase, self.momentum, self.site, self.lead))

    def __str__(self) -> str:
        parts = [f"lead {self.lead}"] if self.lead is not None else []
        parts += [f"site at {_position(self.site)}"] if self.site is not None else []
        parts += [f"k = {self.momentum:.4g}"] if self.momentum is not None else []
        parts += [f"phi = {self.phase:.4g}"] if self.phase is not None else []
        return ", ".join(parts)


def _position(site: tuple[float, ...]) -> str:
    text = ", ".join(f"{x:.6g}" for x in site)
    return text if len(site) == 1 else f"({text})"


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
    where : Place
        Phase, momentum, site or lead it belongs to.
    basis : "proven", "sampled" or "exact"
        Whether it holds for every phi by proof, was met at the phases looked at, or does not depend on phi at all.
    """

    check: str
    status: Status
    value: float
    limit: float
    unit: str
    message: str
    remedy: str = ""
    where: Place = Place()
    basis: Basis = "sampled"


@dataclass(frozen=True)
class AuditReport:
    """All findings, in the order of the checks.

    Attributes
    ----------
    findings : tuple of Finding
    unseen : tuple of str
        Names of checks that were not made: they need a proof, or something that an alarm says is not there.
    quick : bool
        True if no proof was tried: findings hold at the phases sampled.
    idle : tuple of str
        Names of checks that have nothing to look at, such as those on bands of a device in which no cell repeats.
    """

    findings: tuple[Finding, ...]
    unseen: tuple[str, ...] = ()
    quick: bool = False
    idle: tuple[str, ...] = ()

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

    def to_dict(self) -> dict[str, Any]:
        """Return plain data: numbers, text, lists and dictionaries; a number that is not finite is None."""
        return dict(plain({"passed": self.passed, **asdict(self)}))

    def _repr_html_(self) -> str:
        """Return the findings as a table, for notebooks."""
        from scatterpump.html import audit_table

        return audit_table(self)
