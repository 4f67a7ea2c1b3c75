"""The list of checks, and the entrance that runs them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from scatterpump.audit.bulk import fermi_level_in_gap
from scatterpump.audit.check import Check
from scatterpump.audit.connections import couplings_present, drain_present, leads_apart, leads_attached, sites_reached
from scatterpump.audit.continuum import continuum_resolved
from scatterpump.audit.cycle import cycle_closes, cycle_continuous, cycle_drives
from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import AuditReport, Finding
from scatterpump.audit.hamiltonian import elements_finite, hermitian
from scatterpump.audit.leads import leads_still, modes_move, probe_open
from scatterpump.audit.levels import contact_above_leak, start_clear
from scatterpump.audit.numerics import engines_agree, scattering_unitary, well_conditioned
from scatterpump.audit.proof import cycle_covered, integer_agrees
from scatterpump.audit.reflection import decays, leakage, reflection_invertible
from scatterpump.pump import Pump

__all__ = ["CHECKS", "examine", "run_checks"]


@dataclass(frozen=True)
class Stage:
    """Checks that make sense together; an alarm from one of `needed` leaves later stages nothing to look at."""

    checks: tuple[Check, ...]
    needed: tuple[Check, ...] = ()


STAGES = (
    Stage((elements_finite,), needed=(elements_finite,)),
    Stage((hermitian,), needed=(hermitian,)),
    Stage((cycle_closes, cycle_continuous, cycle_drives)),
    Stage((couplings_present, sites_reached, leads_attached, leads_apart, continuum_resolved)),
    Stage((leads_still,), needed=(leads_still,)),
    Stage((probe_open, modes_move), needed=(probe_open, modes_move)),
    Stage((drain_present, well_conditioned, engines_agree, scattering_unitary)),
    Stage((leakage, reflection_invertible, contact_above_leak, start_clear)),
    Stage((fermi_level_in_gap, decays)),
    Stage((cycle_covered, integer_agrees)),
)
CHECKS: tuple[Check, ...] = tuple(check for stage in STAGES for check in stage.checks)


def examine(pump: Pump, *, quick: bool = False) -> AuditReport:
    """Run every check on `pump`.

    Where the Hamiltonian is not finite or not Hermitian, or a lead depends on the cycle or has no usable modes, there
    is no r(phi) to look at, and the report names the checks that could not be made.

    Parameters
    ----------
    pump : Pump
    quick : bool
        Whether to do without proofs: what is then said about r and the gap holds at the phases sampled.

    Raises
    ------
    SolverError
        If a value function fails at some phase.
    """
    return run_checks(Evidence(pump, quick=quick))


def run_checks(evidence: Evidence) -> AuditReport:
    """Run every check on evidence that may in part be in hand already."""
    from threadpoolctl import threadpool_limits

    found: list[Finding] = []
    unseen: list[str] = []
    idle: list[str] = []
    blocked = False
    with threadpool_limits(1), np.errstate(all="ignore"):  # small matrices; what overflows is told by the findings
        for stage in STAGES:
            for check in stage.checks:
                if blocked or (check.needs_proof and evidence.quick):
                    unseen.append(check.name)
                elif (finding := check(evidence)) is None:
                    idle.append(check.name)
                else:
                    found.append(finding)
            needed = {check.name for check in stage.needed}
            blocked = blocked or any(f.check in needed and f.status == "alarm" for f in found)
    return AuditReport(tuple(found), tuple(unseen), evidence.quick, tuple(idle))
