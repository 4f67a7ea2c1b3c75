"""The one entrance to r(phi): chooses the engine."""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from scatterpump.errors import InputError
from scatterpump.pump import Pump
from scatterpump.solver.trace import ReflectionTrace

__all__ = ["Engine", "reflect", "reflect_grid"]

Engine = Literal["auto", "layered", "direct"]
ENGINES = ("auto", "layered", "direct")
WIDE = 50  # sites of the probe from which kwant needs longer for one phase than finding H along the cycle takes


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
        layer by layer, or where layers are wide by one sparse factorisation each.  "auto" takes "layered", but "direct"
        for a single phase of a narrow pump that nothing is known about yet.  The trace says which one ran.
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
    from scatterpump.solver import direct, layered

    points = _finite(phases, "phases", "angles in radians")
    if engine not in ENGINES:
        raise InputError(f"engine is {engine!r}", allowed=", ".join(map(repr, ENGINES)))
    if repeat or endless:
        _check_prolonging(engine, repeat, endless)
        if endless:
            return layered.solve_endless(pump, points)
        return layered.solve_repeated(pump, points, repeat, transmission=transmission)
    if engine == "direct" or (engine == "auto" and len(points) == 1 and _pays_once(pump)):
        return direct.solve(pump, points, transmission=transmission)
    return layered.solve(pump, points, transmission=transmission)


def reflect_grid(
    pump: Pump, energies: ArrayLike, phases: ArrayLike, *, transmission: bool = True
) -> tuple[ReflectionTrace, ...]:
    """Solve for reflection and transmission of `pump` at all of `energies` and `phases`.

    Energies share H(phi) and, while no lead opens or closes a mode, one sweep over the device.  The basis of lead modes
    is fixed at each energy; between energies it is arbitrary.

    Parameters
    ----------
    pump : Pump
        Its own Fermi level plays no part.
    energies : (k,) array-like of float
        In the pump's unit.
    phases : (n,) array-like of float
        Radians.
    transmission : bool
        As in `reflect`.

    Returns
    -------
    tuple of k ReflectionTrace
        In the order of `energies`.

    Raises
    ------
    InputError, ClosedProbeError, SolverError
        As `reflect`, at any of the energies.
    """
    from scatterpump.solver.grid import solve_grid

    lists = (_finite(energies, "energies", "energies"), _finite(phases, "phases", "angles in radians"))
    return solve_grid(pump, *lists, transmission=transmission)


def _pays_once(pump: Pump) -> bool:
    """Whether asking kwant once is expected to be faster than finding H along the whole cycle first."""
    return "path" not in pump.remembered and len(pump.finalized.lead_interfaces[pump.probe]) < WIDE


def _finite(values: ArrayLike, name: str, kind: str) -> NDArray[np.float64]:
    points = np.atleast_1d(np.asarray(values, dtype=float))
    if points.ndim != 1 or points.size == 0 or not np.isfinite(points).all():
        raise InputError(f"the {name} are not a list of finite numbers", allowed=f"one or more {kind}")
    return points


def _check_prolonging(engine: str, repeat: int, endless: bool) -> None:
    if engine == "direct":
        raise InputError("kwant's own solver cannot prolong a pump", allowed='engine="layered" or "auto"')
    if endless and repeat:
        raise InputError("both repeat and endless are asked for", allowed="one of them")
    if isinstance(repeat, bool) or not isinstance(repeat, int | np.integer) or repeat < 0:
        raise InputError(f"repeat is {repeat!r}", allowed="a whole number of cells, 0 or more")
