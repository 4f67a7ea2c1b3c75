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

from scatterpump.anatomy.layout import Layout, inspect
from scatterpump.audit.examine import examine
from scatterpump.audit.finding import AuditReport, Finding, Place
from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.cylinder import FluxCylinder
from scatterpump.builder.description import Disorder, Lead, SheetLead, Wave
from scatterpump.builder.ribbon import ModulatedRibbon
from scatterpump.bulk.chern import chern_number
from scatterpump.bulk.gap import BulkGap, bulk_gap
from scatterpump.cycle import Cycle
from scatterpump.device_file import load_device
from scatterpump.errors import (
    ClosedGapError,
    ClosedProbeError,
    CycleError,
    InputError,
    NoBulkError,
    PumpError,
    SingularReflectionError,
    SolverError,
)
from scatterpump.pump import Continuum, Pump
from scatterpump.report import Report, make_report
from scatterpump.solver.reflect import reflect, reflect_grid
from scatterpump.solver.trace import ReflectionTrace
from scatterpump.verdict import Verdict, judge
from scatterpump.winding.certificate import certify
from scatterpump.winding.resolved import Resolved, Sector, resolve
from scatterpump.winding.result import Crossing, Winding

__all__ = [
    "AuditReport",
    "BulkGap",
    "ClosedGapError",
    "ClosedProbeError",
    "Continuum",
    "Crossing",
    "Cycle",
    "CycleError",
    "Disorder",
    "Finding",
    "FluxCylinder",
    "InputError",
    "Layout",
    "Lead",
    "ModulatedChain",
    "ModulatedRibbon",
    "NoBulkError",
    "Place",
    "Pump",
    "PumpError",
    "ReflectionTrace",
    "Report",
    "Resolved",
    "Sector",
    "SheetLead",
    "SingularReflectionError",
    "SolverError",
    "Verdict",
    "Wave",
    "Winding",
    "bulk_gap",
    "certify",
    "chern_number",
    "examine",
    "inspect",
    "judge",
    "load_device",
    "make_report",
    "reflect",
    "reflect_grid",
    "resolve",
]

# Without MUMPS kwant falls back to SciPy's solver, which serves as well but for very wide devices.
warnings.filterwarnings("ignore", message="MUMPS is not available", category=RuntimeWarning)
