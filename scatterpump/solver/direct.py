"""kwant's own sparse solver, one phi at a time: the reference that every other engine is checked against."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import SolverError
from scatterpump.pump import Pump
from scatterpump.solver.modes import with_modes
from scatterpump.solver.trace import ReflectionTrace

__all__ = ["scattering_matrices", "solve"]


def solve(pump: Pump, phases: NDArray[np.float64], *, transmission: bool = True) -> ReflectionTrace:
    """Solve the scattering problem at each of `phases` (radians); without `transmission` t is left out (no rows)."""
    system = with_modes(pump)
    leads = range(len(system.leads)) if transmission else [pump.probe]
    found = [_solve_one(pump, system, phase, list(leads), [pump.probe]) for phase in phases.tolist()]
    others = [lead for lead in leads if lead != pump.probe]
    reflection = np.array([matrix.submatrix(pump.probe, pump.probe) for matrix in found])
    passed = [np.vstack([matrix.submatrix(lead, pump.probe) for lead in others]) for matrix in found if others]
    none = np.zeros((len(found), 0, reflection.shape[2]), dtype=complex)
    return ReflectionTrace(
        phases, reflection, np.array(passed) if others else none, len(found), "direct", pump.fermi_level
    )


def scattering_matrices(pump: Pump, phases: NDArray[np.float64]) -> NDArray[np.complex128]:
    """Return the full S at each of `phases`, all leads in and out in the order of their numbers, shape (n, N, N)."""
    system = with_modes(pump)
    leads = list(range(len(system.leads)))
    return np.array([_solve_one(pump, system, phase, leads, leads).data for phase in phases.tolist()], dtype=complex)


def _solve_one(pump: Pump, system: Any, phase: float, out: list[int], into: list[int]) -> Any:
    import kwant

    parameters = pump.parameters(phase)
    try:
        result = kwant.smatrix(system, pump.fermi_level, params=parameters, out_leads=out, in_leads=into)
    except Exception as cause:  # a user's value function may raise anything
        raise SolverError(phase, parameters, cause) from cause
    if not np.isfinite(result.data).all():
        raise SolverError(phase, parameters, ValueError("the scattering matrix is not finite"))
    return result
