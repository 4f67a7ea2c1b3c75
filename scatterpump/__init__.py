"""A verdict on a quantum charge pump: the integer, whether it holds, and by which margin.

>>> import scatterpump as sp
>>> pump = sp.ModulatedChain(sites=90, fermi_level=-1.2, onsite=[sp.Wave(1.5, 3)],
...                          probe=sp.Lead(hopping=2.0), drain=sp.Lead(hopping=2.0)).pump()
>>> sp.certify(pump).number
1

Importing it is light: kwant, scipy and matplotlib are loaded by the functions that need them.
"""

from __future__ import annotations

import warnings

from scatterpump.audit.examine import examine
from scatterpump.audit.finding import AuditReport, Finding
from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Disorder, Lead, Wave
from scatterpump.bulk.chern import chern_number
from scatterpump.bulk.gap import BulkGap, bulk_gap
from scatterpump.cycle import Cycle
from scatterpump.device_file import load_device
from scatterpump.errors import (
    ClosedGapError,
    ClosedProbeError,
    InputError,
    PumpError,
    SingularReflectionError,
    SolverError,
    SweepError,
)
from scatterpump.pump import Pump
from scatterpump.solver.reflect import reflect
from scatterpump.solver.trace import ReflectionTrace
from scatterpump.sweep.axis import Axis
from scatterpump.sweep.gather import gather_sweep
from scatterpump.sweep.plan import SweepPlan
from scatterpump.sweep.plan_file import load_plan
from scatterpump.sweep.point import Bisection
from scatterpump.sweep.run import SweepReport, run_sweep
from scatterpump.sweep.status import SweepStatus, sweep_status
from scatterpump.verdict import Verdict, judge
from scatterpump.winding.certificate import certify
from scatterpump.winding.result import Crossing, Winding

__all__ = [
    "AuditReport",
    "Axis",
    "Bisection",
    "BulkGap",
    "ClosedGapError",
    "ClosedProbeError",
    "Crossing",
    "Cycle",
    "Disorder",
    "Finding",
    "InputError",
    "Lead",
    "ModulatedChain",
    "Pump",
    "PumpError",
    "ReflectionTrace",
    "SingularReflectionError",
    "SolverError",
    "SweepError",
    "SweepPlan",
    "SweepReport",
    "SweepStatus",
    "Verdict",
    "Wave",
    "Winding",
    "bulk_gap",
    "certify",
    "chern_number",
    "examine",
    "gather_sweep",
    "judge",
    "load_device",
    "load_plan",
    "reflect",
    "run_sweep",
    "sweep_status",
]

# Without MUMPS kwant falls back to SciPy's solver, which serves as well but for very wide devices.
warnings.filterwarnings("ignore", message="MUMPS is not available", category=RuntimeWarning)
