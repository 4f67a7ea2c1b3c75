"""The local density of states at the probe's end of a pump, over phi and energy.

    rho(E, phi) = -1/pi Im tr G,     G = (A - Sigma_p)^-1,

on the orbitals of the first layers; A is what the layered engine leaves of E - H there after it has eliminated all
the rest of the device with its other leads.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import ClosedProbeError, InputError
from scatterpump.measure import Measure
from scatterpump.pump import Pump
from scatterpump.solver.elimination import eliminate_single
from scatterpump.solver.hamiltonian import driven_path
from scatterpump.solver.modes import with_modes
from scatterpump.solver.problem import Problem, prepare
from scatterpump.solver.sweep import between, eliminated

__all__ = ["LocalDensity", "local_density"]

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
Indices = NDArray[np.int64]
Numbers = NDArray[Any]  # float64 where all is real, else complex128
TURN = 2 * np.pi
PHASES, ENERGIES = 121, 49
END_LAYERS, MOST_UNKNOWNS = 6, 60  # what counts as the probe's end: where an edge level mostly lives


@dataclass(frozen=True, eq=False)
class LocalDensity:
    """Density of states at the probe's end.

    Attributes
    ----------
    name : str
    fermi_level : float
    phases : (n,) float array
        Radians, 0 to 2 pi.
    energies : (k,) float array
        In the pump's unit.
    density : (k, n) float array
        States per unit of energy on all orbitals of the first layers; nan at energies where the probe has no open mode.
    unit : str
        What stands behind an energy: "meV", or "pump's unit" where that is another one, or none.
    """

    name: str
    fermi_level: float
    phases: Floats
    energies: Floats
    density: Floats
    unit: str


def local_density(pump: Pump, energies: Floats, *, phases: int = PHASES) -> LocalDensity:
    """Return the density of `pump` at `energies`, at even phases.

    Raises
    ------
    SolverError
        If the Hamiltonian fails at some phase.
    """
    from threadpoolctl import threadpool_limits

    points = np.linspace(0.0, TURN, phases)
    driven_path(pump)  # found once, and shared by the pumps at all energies
    with threadpool_limits(1):  # many small matrices: threads would only get in each other's way
        rows = [_at(pump.at_fermi_level(float(energy)), points) for energy in energies]
    unit = Measure(pump.units).on_axes
    return LocalDensity(pump.name, pump.fermi_level, points, np.asarray(energies, dtype=float), np.array(rows), unit)


def _at(pump: Pump, phases: Floats) -> Floats:
    try:
        problem = prepare(pump)
    except (ClosedProbeError, InputError):  # no open mode, or a band edge exactly at this energy
        return np.full(len(phases), np.nan)
    sigma = with_modes(pump).leads[pump.probe].modes(pump.fermi_level)[1].selfenergy()
    count = _layers(problem)
    chosen = _orbitals(problem, count)
    parts = [phases[start : start + problem.chunk] for start in range(0, len(phases), problem.chunk)]
    return np.concatenate([_traced(_end(problem, part, count), sigma, chosen) for part in parts])


def _layers(problem: Problem) -> int:
    """How many layers the end is made of."""
    unknowns = np.cumsum(problem.layers.widths[:END_LAYERS])
    return max(1, int((unknowns <= MOST_UNKNOWNS).sum()))


def _orbitals(problem: Problem, count: int) -> Indices:
    """Places of the orbitals among the unknowns of the first `count` layers: all but amplitudes of leads' modes."""
    layers, starts = problem.layers, np.cumsum(problem.layers.widths) - problem.layers.widths
    level = layers.level[: problem.blocks.orbitals]
    inside = np.flatnonzero((level >= 0) & (level < count))
    return np.asarray(starts[level[inside]] + layers.place[inside])


def _traced(matrix: Complex, sigma: Complex, chosen: Indices) -> Floats:
    """-1/pi Im of the trace of (A - Sigma)^-1 over the `chosen` unknowns, at each phase."""
    width = len(sigma)  # the probe's own orbitals come first in the first layer
    matrix[:, :width, :width] -= sigma
    states = np.linalg.inv(matrix)[:, chosen, chosen]
    return np.asarray(-states.imag.sum(axis=1) / np.pi)


def _end(problem: Problem, phases: Floats, count: int) -> Complex:
    """E - H on the first `count` layers, all beyond them eliminated, at each phase, shape (n, w, w)."""
    elements, last = problem.path.many(phases), count - 1
    edges = np.concatenate([[0], np.cumsum(problem.layers.widths[:count])])
    matrix = np.zeros((len(phases), edges[-1], edges[-1]), dtype=complex)
    diagonal, lower, upper = between(problem, elements, 0, last)
    for n in range(count):
        here = slice(edges[n], edges[n + 1])
        matrix[:, here, here] = diagonal[n] if n < last else _beyond(problem, elements, last)
        if n < last:
            then = slice(edges[n + 1], edges[n + 2])
            matrix[:, then, here], matrix[:, here, then] = lower[n], upper[n]
    return matrix


def _beyond(problem: Problem, elements: Numbers, first: int) -> Numbers:
    """D of layer `first`, shape (n, w, w)."""
    if not problem.single:
        return eliminated(problem, elements, first, False)[0]
    diagonal, lower, upper = (problem.blocks.band(step, elements).beyond(first) for step in (0, 1, -1))
    found = eliminate_single(diagonal, lower, upper, len(elements), unit=problem.hopping, real_below=0, amplitude=False)
    return np.broadcast_to(np.asarray(found.p / found.q), (len(elements),))[:, None, None]
