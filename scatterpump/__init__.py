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
from scatterpump.builder.channel import GatedChannel
from scatterpump.builder.cylinder import FluxCylinder
from scatterpump.builder.description import Disorder, Lead, SheetLead, Wave
from scatterpump.builder.gates import Comb, Gate, SlidingWave
from scatterpump.builder.optical import OpticalLattice
from scatterpump.builder.quantity import quantity
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
    SweepError,
)
from scatterpump.operation.charge import Charge, charge
from scatterpump.operation.current import Current, current
from scatterpump.operation.heat import temperature_limit
from scatterpump.operation.length import ShortestDevice, shortest_device
from scatterpump.operation.limit import Limit
from scatterpump.operation.lines import Line as SheetLine
from scatterpump.operation.plateaus import Plateau, plateaus
from scatterpump.operation.sheet import Sheet, operating_sheet
from scatterpump.operation.speed import speed_limit
from scatterpump.operation.tolerance import DisorderTolerance, DriveTolerance, disorder_tolerance, drive_tolerance
from scatterpump.pump import Continuum, Pump, Units
from scatterpump.report import Report, make_report
from scatterpump.solver.reflect import reflect, reflect_grid
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
from scatterpump.winding.resolved import Resolved, Sector, resolve
from scatterpump.winding.result import Crossing, Winding

__all__ = [
    "AuditReport",
    "Axis",
    "Bisection",
    "BulkGap",
    "Charge",
    "ClosedGapError",
    "ClosedProbeError",
    "Comb",
    "Continuum",
    "Crossing",
    "Current",
    "Cycle",
    "CycleError",
    "Disorder",
    "DisorderTolerance",
    "DriveTolerance",
    "Finding",
    "FluxCylinder",
    "Gate",
    "GatedChannel",
    "InputError",
    "Layout",
    "Lead",
    "Limit",
    "ModulatedChain",
    "ModulatedRibbon",
    "NoBulkError",
    "OpticalLattice",
    "Place",
    "Plateau",
    "Pump",
    "PumpError",
    "ReflectionTrace",
    "Report",
    "Resolved",
    "Sector",
    "Sheet",
    "SheetLead",
    "SheetLine",
    "ShortestDevice",
    "SingularReflectionError",
    "SlidingWave",
    "SolverError",
    "SweepError",
    "SweepPlan",
    "SweepReport",
    "SweepStatus",
    "Units",
    "Verdict",
    "Wave",
    "Winding",
    "bulk_gap",
    "certify",
    "charge",
    "chern_number",
    "current",
    "disorder_tolerance",
    "drive_tolerance",
    "examine",
    "gather_sweep",
    "inspect",
    "judge",
    "load_device",
    "load_plan",
    "make_report",
    "operating_sheet",
    "plateaus",
    "quantity",
    "reflect",
    "reflect_grid",
    "resolve",
    "run_sweep",
    "shortest_device",
    "speed_limit",
    "sweep_status",
    "temperature_limit",
]

# Without MUMPS kwant falls back to SciPy's solver, which serves as well but for very wide devices.
warnings.filterwarnings("ignore", message="MUMPS is not available", category=RuntimeWarning)
