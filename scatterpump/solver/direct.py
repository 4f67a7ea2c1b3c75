"""kwant's own sparse solver, one phi at a time: the reference that every other engine is checked against."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import SolverError
from scatterpump.pump import Pump
from scatterpump.solver.modes import with_modes
from scatterpump.solver.trace import ReflectionTrace

__all__ = ["scattering_matrix", "solve"]


def solve(pump: Pump, phases: NDArray[np.float64]) -> ReflectionTrace:
    """Solve the scattering problem at each of `phases` (radians)."""
    system = with_modes(pump)
    others = [lead for lead in range(len(system.leads)) if lead != pump.probe]
    blocks = [_solve_one(pump, system, phase, [pump.probe, *others], [pump.probe]) for phase in phases.tolist()]
    size = blocks[0].shape[1]
    stack = np.array(blocks)
    return ReflectionTrace(phases, stack[:, :size], stack[:, size:], len(blocks), "direct")


def scattering_matrix(pump: Pump, phase: float) -> NDArray[np.complex128]:
    """Return the full S at `phase`, all leads in and out in the order of their numbers."""
    system = with_modes(pump)
    leads = list(range(len(system.leads)))
    return _solve_one(pump, system, phase, leads, leads)


def _solve_one(pump: Pump, system: Any, phase: float, out: list[int], into: list[int]) -> NDArray[np.complex128]:
    import kwant

    parameters = pump.parameters(phase)
    try:
        result = kwant.smatrix(system, pump.fermi_level, params=parameters, out_leads=out, in_leads=into)
    except Exception as cause:  # a user's value function may raise anything
        raise SolverError(phase, parameters, cause) from cause
    data = np.asarray(result.data, dtype=complex)
    if not np.isfinite(data).all():
        raise SolverError(phase, parameters, ValueError("the scattering matrix is not finite"))
    return data
