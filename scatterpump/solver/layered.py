"""The fast engine: r(phi) and t(phi) for many phases at once, layer by layer from the far end.

Four ways lead to the device as the probe sees it, a wave returned for each wave that enters:

* a sweep over all layers (`sweep`);
* where the device repeats a cell often, the cells are joined by doubling (`joined`), and only the ends are swept;
* wide layers are left to a pivoted sparse factorisation for each phase (`schur`), and so are phases at which a sweep
  lost too many digits.

Memory: a chunk of n phases needs about 16 n (E + 6 w^2) bytes, for E elements of H that move and layers of w
unknowns; n is chosen so that this is 128 MiB at most, and that the blocks of a layer stay in the processor's cache.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import ClosedGapError, SolverError
from scatterpump.pump import Pump
from scatterpump.solver.doubling import Load
from scatterpump.solver.joined import joined, joined_endless, run_of
from scatterpump.solver.matching import match
from scatterpump.solver.problem import Problem, prepare
from scatterpump.solver.sweep import swept
from scatterpump.solver.trace import ReflectionTrace

__all__ = [
    "factorised",
    "require_finite",
    "solve",
    "solve_elements",
    "solve_endless",
    "solve_prepared",
    "solve_repeated",
]

Complex = NDArray[np.complex128]
Numbers = NDArray[Any]  # float64 where all is real, else complex128
Floats = NDArray[np.float64]
Sweep = Callable[[Problem, Numbers, bool], tuple[Load, Floats]]
LOST_DIGITS = 1e5


def solve(pump: Pump, phases: Floats, *, transmission: bool = True) -> ReflectionTrace:
    """Solve the scattering problem at each of `phases` (radians); without `transmission` t is left out (no rows)."""
    return solve_prepared(prepare(pump), phases, transmission=transmission)


def solve_prepared(problem: Problem, phases: Floats, *, transmission: bool) -> ReflectionTrace:
    """Solve a prepared problem at each of `phases`."""

    def solve_chunk(some: Floats) -> tuple[Complex, Complex]:
        return solve_elements(problem, problem.path.many(some), transmission=transmission)

    return _in_chunks(problem, phases, solve_chunk)


def solve_repeated(pump: Pump, phases: Floats, count: int, *, transmission: bool) -> ReflectionTrace:
    """Solve the pump prolonged by `count` of its own cells.

    Raises
    ------
    InputError
        If it has no cell that repeats, or a lead that t is wanted for is attached before the end of the cells.
    """
    problem = prepare(pump)
    run = run_of(problem, transmission=transmission)

    def solve_chunk(some: Floats) -> tuple[Complex, Complex]:
        elements = problem.path.many(some)
        device, _ = joined(problem, elements, run, run.repeats - 2 + count, transmission)
        return match(problem.probe, device)

    return _in_chunks(problem, phases, solve_chunk)


def solve_endless(pump: Pump, phases: Floats) -> ReflectionTrace:
    """Solve the pump with its cells repeated for ever; there is no t.

    Raises
    ------
    InputError
        If it has no cell that repeats.
    ClosedGapError
        If waves pass through the cells at some phase.
    """
    problem = prepare(pump)
    run = run_of(problem, transmission=False)

    def solve_chunk(some: Floats) -> tuple[Complex, Complex]:
        device, dark = joined_endless(problem, problem.path.many(some), run)
        if not dark.all():
            where = some[int(dark.argmin())]
            raise ClosedGapError(pump.fermi_level, f"waves pass through the interior at phi = {where:.6g}")
        return match(problem.probe, device)

    return _in_chunks(problem, phases, solve_chunk)


def _in_chunks(
    problem: Problem, phases: Floats, solve_chunk: Callable[[Floats], tuple[Complex, Complex]]
) -> ReflectionTrace:
    parts = [solve_chunk(phases[i : i + problem.chunk]) for i in range(0, len(phases), problem.chunk)]
    reflection, passed = (np.concatenate(found) for found in zip(*parts, strict=True))
    require_finite(problem.pump, phases, reflection)
    return ReflectionTrace(phases, reflection, passed, len(phases), "layered", problem.pump.fermi_level)


def require_finite(pump: Pump, phases: Floats, reflection: Complex) -> None:
    """Raise a `SolverError` for the first phase without an answer."""
    failed = np.flatnonzero(~np.isfinite(reflection).all(axis=(1, 2)))
    if failed.size:
        phase = float(phases[failed[0]])
        cause = ArithmeticError("the device is singular to the last digit: a level at the Fermi level that is cut off")
        raise SolverError(phase, pump.parameters(phase), cause)


def solve_elements(
    problem: Problem,
    elements: Numbers,
    *,
    transmission: bool,
    sweep: Sweep | None = None,
    redo: Callable[[int], tuple[Complex, Complex]] | None = None,
) -> tuple[Complex, Complex]:
    """Return r and t for each row of `elements`, the moving elements of H; NaN where the device is singular.

    Parameters
    ----------
    sweep : callable, optional
        How the device becomes a load; the way that is expected to be fastest.
    redo : callable, optional
        How a row at which digits were lost is done again; by a sparse factorisation.
    """
    rows = len(problem.layers.outgoing) if transmission else 0
    r, t = (np.zeros((len(elements), k, problem.probe.channels), dtype=complex) for k in (problem.probe.channels, rows))
    with np.errstate(all="ignore"):
        try:
            device, growth = (sweep or _fastest)(problem, elements, rows > 0)
            r, t = match(problem.probe, device)
            healthy = (growth < LOST_DIGITS) & np.isfinite(r).all(axis=(1, 2)) & np.isfinite(t).all(axis=(1, 2))
        except np.linalg.LinAlgError:
            healthy = np.zeros(len(elements), dtype=bool)
    for i in np.flatnonzero(~healthy).tolist():
        try:
            r[[i]], t[[i]] = redo(i) if redo else factorised(problem, elements[[i]], transmission=transmission)
        except (np.linalg.LinAlgError, RuntimeError):  # SciPy's factorisation raises the second
            r[i] = t[i] = np.nan
    return r, t


def factorised(problem: Problem, elements: Numbers, *, transmission: bool) -> tuple[Complex, Complex]:
    """Return r and t by a pivoted sparse factorisation for each row of `elements`."""
    return match(problem.probe, problem.sparse.load(elements, transmission=transmission))


def _fastest(problem: Problem, elements: Numbers, amplitude: bool) -> tuple[Load, Floats]:
    """The device as the probe's load, and the growth met, by the way that is expected to be fastest."""
    if problem.schur_pays(transmission=amplitude):
        return problem.sparse.load(elements, transmission=amplitude), np.ones(len(elements))
    run = problem.run if problem.doubling_pays else None
    if run is not None and (problem.reaches_beyond(run) or not amplitude):
        return joined(problem, elements, run, run.repeats - 2, amplitude)
    return swept(problem, elements, amplitude)
