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


def reflect(
    pump: Pump,
    phases: ArrayLike,
    *,
    engine: Engine = "auto",
    transmission: bool = True,
    repeat: int = 0,
    endless: bool = False,
) -> ReflectionTrace:
    """Solve for reflection and transmission of `pump` at `phases`.

    Parameters
    ----------
    pump : Pump
    phases : (n,) array-like of float
        Radians.
    engine : "auto", "layered" or "direct"
        "direct" is kwant's own solver, one phi at a time: the reference.  "layered" eliminates all phases at once,
        layer by layer.  "auto" takes "layered", but "direct" for up to four phases and where layers are so wide that a
        sparse factorisation is cheaper.  The trace says which one ran.
    transmission : bool
        Whether t is wanted as well; without it the trace's ``transmission`` has no rows.
    repeat : int
        Prolong the pump by so many of its own cells, which are found in its interior and not built; "layered" only.
    endless : bool
        Prolong it for ever: r of the semi-infinite pump, free of finite length, and no t; "layered" only.

    Returns
    -------
    ReflectionTrace

    Raises
    ------
    InputError
        If a phase is not finite, there is none, a lead depends on the cycle, or a pump without a repeated cell is to
        be prolonged.
    ClosedGapError
        If waves pass through the interior of an endless pump.
    ClosedProbeError
        If the probe has no open mode at the Fermi level.
    SolverError
        If the Hamiltonian or its solution fails at some phase; it says at which.
    """
    from scatterpump.solver import direct, layered, problem

    points = np.atleast_1d(np.asarray(phases, dtype=float))
    if points.ndim != 1 or points.size == 0 or not np.isfinite(points).all():
        raise InputError("the phases are not a list of finite numbers", allowed="one or more angles in radians")
    if engine not in ENGINES:
        raise InputError(f"engine is {engine!r}", allowed=", ".join(map(repr, ENGINES)))
    if repeat or endless:
        _check_prolonging(engine, repeat, endless)
        if endless:
            return layered.solve_endless(pump, points)
        return layered.solve_repeated(pump, points, repeat, transmission=transmission)
    if engine == "direct" or (engine == "auto" and len(points) <= FEW):
        return direct.solve(pump, points, transmission=transmission)
    ready = problem.prepare(pump)
    if engine == "auto" and ready.is_wide:
        return direct.solve(pump, points, transmission=transmission)
    return layered.solve_prepared(ready, points, transmission=transmission)


def _check_prolonging(engine: str, repeat: int, endless: bool) -> None:
    if engine == "direct":
        raise InputError("kwant's own solver cannot prolong a pump", allowed='engine="layered" or "auto"')
    if endless and repeat:
        raise InputError("both repeat and endless are asked for", allowed="one of them")
    if isinstance(repeat, bool) or not isinstance(repeat, int | np.integer) or repeat < 0:
        raise InputError(f"repeat is {repeat!r}", allowed="a whole number of cells, 0 or more")
