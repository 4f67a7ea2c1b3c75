"""The one entrance to r(phi): chooses the engine."""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from scatterpump.errors import InputError
from scatterpump.pump import Pump
from scatterpump.solver.trace import ReflectionTrace

__all__ = ["Engine", "reflect"]

Engine = Literal["auto", "layered", "direct"]
ENGINES = ("auto", "layered", "direct")
FEW = 4


def reflect(pump: Pump, phases: ArrayLike, *, engine: Engine = "auto", transmission: bool = True) -> ReflectionTrace:
    """Solve for reflection and transmission of `pump` at `phases`.

    Parameters
    ----------
    pump : Pump
    phases : (n,) array-like of float
        Radians.
    engine : "auto", "layered" or "direct"
        "direct" is kwant's own solver, one phi at a time: the reference.  "layered" eliminates all phases at once,
        layer by layer, or shares one analysis among sparse factorisations where layers are wide.  "auto" takes
        "layered", but "direct" for up to four phases.  The trace says which one ran.
    transmission : bool
        Whether t is wanted as well; without it the trace's ``transmission`` has no rows.

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
    from scatterpump.solver import direct, layered

    points = np.atleast_1d(np.asarray(phases, dtype=float))
    if points.ndim != 1 or points.size == 0 or not np.isfinite(points).all():
        raise InputError("the phases are not a list of finite numbers", allowed="one or more angles in radians")
    if engine not in ENGINES:
        raise InputError(f"engine is {engine!r}", allowed=", ".join(map(repr, ENGINES)))
    if engine == "direct" or (engine == "auto" and len(points) <= FEW):
        return direct.solve(pump, points, transmission=transmission)
    problem = layered.prepare(pump)
    return layered.solve_prepared(problem, points, transmission=transmission)
