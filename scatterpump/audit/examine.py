"""The list of checks, and the entrance that runs them."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from scatterpump.audit.bulk import fermi_level_in_gap, integer_agrees
from scatterpump.audit.cycle import cycle_closes
from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import AuditReport, Finding
from scatterpump.audit.leads import drain_present, leads_still, probe_open
from scatterpump.audit.numerics import scattering_unitary
from scatterpump.audit.reflection import decays, leakage, reflection_invertible
from scatterpump.bulk.chern import chern_number
from scatterpump.bulk.gap import BulkGap, bulk_gap
from scatterpump.errors import ClosedGapError, NoBulkError, SingularReflectionError
from scatterpump.pump import Pump
from scatterpump.solver.reflect import reflect
from scatterpump.winding.certificate import certify
from scatterpump.winding.result import Winding

__all__ = ["CHECKS", "LEAD_CHECKS", "examine", "gather", "run_checks"]

LEAD_CHECKS: tuple[Callable[[Pump], Finding], ...] = (leads_still, probe_open, drain_present)
CHECKS: tuple[Callable[[Evidence], Finding | None], ...] = (
    cycle_closes,
    leakage,
    reflection_invertible,
    decays,
    fermi_level_in_gap,
    integer_agrees,
    scattering_unitary,
)
SAMPLES = 48


def examine(pump: Pump) -> AuditReport:
    """Run every check on `pump`.

    Checks of the leads come first; if the probe is closed or a lead depends on the cycle there is no r(phi) to look
    at, and the report ends there.

    Raises
    ------
    SolverError
        If the Hamiltonian or its solution fails at some phase.
    """
    still = leads_still(pump)
    if still.status == "alarm":
        return AuditReport((still,))
    opened = probe_open(pump)
    if opened.status == "alarm":
        return AuditReport((still, opened))
    return run_checks(gather(pump))


def gather(pump: Pump, *, progress: Callable[[float], None] | None = None) -> Evidence:
    """Compute all that the checks look at."""
    winding = _winding(pump, progress)
    even = 2 * np.pi * np.arange(SAMPLES) / SAMPLES
    resonances = [] if winding is None else [crossing.phase for crossing in winding.crossings]
    return Evidence(
        pump,
        trace=reflect(pump, np.sort([*even, *resonances])),
        winding=winding,
        gap=_gap(pump),
        chern=_chern(pump),
    )


def run_checks(evidence: Evidence) -> AuditReport:
    """Run every check on evidence already in hand."""
    found = [check(evidence.pump) for check in LEAD_CHECKS]
    found += [finding for check in CHECKS if (finding := check(evidence)) is not None]
    return AuditReport(tuple(found))


def _winding(pump: Pump, progress: Callable[[float], None] | None) -> Winding | None:
    try:
        return certify(pump, progress=progress)
    except SingularReflectionError:
        return None


def _gap(pump: Pump) -> BulkGap | None:
    try:
        return bulk_gap(pump)
    except NoBulkError:
        return None


def _chern(pump: Pump) -> int | None:
    try:
        return chern_number(pump)
    except (ClosedGapError, NoBulkError):
        return None
