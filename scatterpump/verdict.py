"""The verdict: the integer, how sure it is, the margins, and every alarm, in one record.

scatterpump is single-particle theory: no interactions, no decoherence, no temperature.  A verdict guides
measurement and does not replace it.
"""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import asdict, dataclass
from typing import Any

from scatterpump.audit.evidence import Evidence
from scatterpump.audit.examine import run_checks
from scatterpump.audit.finding import AuditReport
from scatterpump.bulk.cell import interior
from scatterpump.bulk.gap import BulkGap
from scatterpump.plain import plain
from scatterpump.pump import Pump, Units
from scatterpump.version import version
from scatterpump.winding.resolved import Resolved, resolve_if_asked
from scatterpump.winding.result import Winding

__all__ = ["Verdict", "judge"]


@dataclass(frozen=True)
class Verdict:
    """Everything found out about a pump.

    Attributes
    ----------
    name : str
        The pump's name.
    fermi_level : float
        Energy at which it was judged.
    winding : Winding or None
        None if r is singular somewhere on the cycle.
    gap : BulkGap or None
        None if no cell repeats along the device and none was given.
    chern : int or None
        None without such a cell or where the gap closes.
    audit : AuditReport
    route : str
        Which way a positive number of charges goes, in words.
    interior : str
        Which cell the gap and the Chern number belong to, or why there is none, in words.
    resolved : Resolved or None
        What each eigenvalue of a conserved quantity carries; None if the probe was built without a conservation law.
    units : Units or None
        What one unit of energy and one lattice constant are, in joules and metres; None if the pump does not say.
    """

    name: str
    fermi_level: float
    winding: Winding | None
    gap: BulkGap | None
    chern: int | None
    audit: AuditReport
    route: str
    interior: str
    resolved: Resolved | None
    units: Units | None = None

    @property
    def trustworthy(self) -> bool:
        """True if there is a proven integer and no alarm."""
        return self.winding is not None and self.winding.certified and self.audit.passed

    @property
    def is_void(self) -> bool:
        """True if by an alarm there is no r(phi) to speak of, as without a Hermitian H: no proof counts then."""
        return bool(self.audit.unseen)  # with proofs no check is left out but for such an alarm

    def to_dict(self) -> dict[str, Any]:
        """Return plain data: numbers, text, lists and dictionaries; an infinite number is None."""
        content = {"scatterpump": version(), "trustworthy": self.trustworthy, "is_void": self.is_void, **asdict(self)}
        return dict(plain(content))

    def to_json(self) -> str:
        """Return `to_dict` as JSON text."""
        return json.dumps(self.to_dict(), indent=2, allow_nan=False)

    def summary(self) -> str:
        """Return the verdict as a table that a person reads in ten seconds, alarms first."""
        from scatterpump.summary import summarise

        return summarise(self)

    def _repr_html_(self) -> str:
        """Return the verdict as a table, for notebooks."""
        from scatterpump.html import verdict_table

        return verdict_table(self)


def judge(pump: Pump, *, progress: Callable[[float], None] | None = None) -> Verdict:
    """Reach a verdict on `pump`: winding, gap, Chern number and audit.

    Parameters
    ----------
    pump : Pump
    progress : callable, optional
        Called with the share of the cycle that is covered so far, 0 to 1.

    Raises
    ------
    ClosedProbeError
        If the probe has no open mode at the Fermi level.
    InputError
        If a lead depends on the cycle.
    SolverError
        If the Hamiltonian or its solution fails at some phase.
    """
    from threadpoolctl import threadpool_limits

    evidence = Evidence(pump, progress=progress)
    with threadpool_limits(1):  # many small factorisations: threads would only get in each other's way
        winding, gap, chern = evidence.winding, evidence.gap, evidence.chern
        report = run_checks(evidence)
        resolved = resolve_if_asked(pump)
    route, cell = pump.route, interior(pump)
    return Verdict(pump.name, pump.fermi_level, winding, gap, chern, report, route, cell, resolved, pump.units)
