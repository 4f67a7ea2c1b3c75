"""The one entrance to r(phi)."""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from scatterpump.errors import InputError
from scatterpump.pump import Pump
from scatterpump.solver.trace import ReflectionTrace

__all__ = ["reflect"]


def reflect(pump: Pump, phases: ArrayLike, *, engine: Literal["auto", "direct"] = "auto") -> ReflectionTrace:
    """Solve for reflection and transmission of `pump` at `phases`.

    Parameters
    ----------
    pump : Pump
    phases : (n,) array-like of float
        Radians.
    engine : "auto" or "direct"
        "direct" is kwant's own solver, one phi at a time; "auto" leaves the choice to scatterpump.

    Returns
    -------
    ReflectionTrace

    Raises
    ------
    InputError
        If a phase is not finite, there is none, or a lead depends on the cycle.
    ClosedProbeError
        If the probe has no open mode at the Fermi level.
    SolverError
        If the Hamiltonian or its solution fails at some phase; it says at which.
    """
    from scatterpump.solver import direct

    points = np.atleast_1d(np.asarray(phases, dtype=float))
    if points.ndim != 1 or points.size == 0 or not np.isfinite(points).all():
        raise InputError("the phases are not a list of finite numbers", allowed="one or more angles in radians")
    if engine not in ("auto", "direct"):
        raise InputError(f"engine is {engine!r}", allowed='"auto" or "direct"')
    return direct.solve(pump, points)
