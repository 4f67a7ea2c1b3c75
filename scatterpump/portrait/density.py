"""The local density of states at the probe's end of a pump, over phi and energy.

    rho(E, phi) = -1/pi Im tr G,     G = (D_0 - Sigma_p)^-1,

on the orbitals that the probe is attached to; D_0 is what the layered engine leaves of E - H there after it has
eliminated all the rest of the device with its other leads.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import ClosedProbeError, InputError
from scatterpump.pump import Pump
from scatterpump.solver.elimination import eliminate_single
from scatterpump.solver.hamiltonian import driven_path
from scatterpump.solver.modes import with_modes
from scatterpump.solver.problem import Problem, prepare
from scatterpump.solver.sweep import eliminated

__all__ = ["LocalDensity", "local_density"]

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
Numbers = NDArray[Any]  # float64 where all is real, else complex128
TURN = 2 * np.pi
PHASES, ENERGIES = 121, 81


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
        States per unit of energy on all orbitals the probe is attached to; nan at energies where the probe has no
        open mode.
    """

    name: str
    fermi_level: float
    phases: Floats
    energies: Floats
    density: Floats


def local_density(pump: Pump, energies: Floats, *, phases: int = PHASES) -> LocalDensity:
    """Return the density of `pump` at `energies`, at even phases.

    Raises
    ------
    SolverError
        If the Hamiltonian fails at some phase.
    """
    points = np.linspace(0.0, TURN, phases)
    driven_path(pump)  # found once, and shared by the pumps at all energies
    rows = [_at(pump.at_fermi_level(float(energy)), points) for energy in energies]
    return LocalDensity(pump.name, pump.fermi_level, points, np.asarray(energies, dtype=float), np.array(rows))


def _at(pump: Pump, phases: Floats) -> Floats:
    try:
        problem = prepare(pump)
    except (ClosedProbeError, InputError):  # no open mode, or a band edge exactly at this energy
        return np.full(len(phases), np.nan)
    sigma = with_modes(pump).leads[pump.probe].modes(pump.fermi_level)[1].selfenergy()
    return np.concatenate([_traced(problem, part, sigma) for part in _chunks(phases, problem.chunk)])


def _chunks(phases: Floats, size: int) -> list[Floats]:
    return [phases[start : start + size] for start in range(0, len(phases), size)]


def _traced(problem: Problem, phases: Floats, sigma: Complex) -> Floats:
    """-1/pi Im tr (D_0 - Sigma)^-1 at each of `phases`."""
    block = _left(problem, problem.path.many(phases))
    width = len(sigma)  # the probe's own orbitals come first in the first layer
    block[:, :width, :width] -= sigma
    return np.asarray(-np.trace(np.linalg.inv(block), axis1=1, axis2=2).imag / np.pi)


def _left(problem: Problem, elements: Numbers) -> Complex:
    """D_0 at each phase, shape (n, w, w)."""
    if not problem.single:
        return eliminated(problem, elements, 0, False)[0].astype(complex)
    diagonal, lower, upper = (problem.blocks.band(step, elements) for step in (0, 1, -1))
    found = eliminate_single(diagonal, lower, upper, len(elements), real_below=0, amplitude=False)
    return (found.p / found.q).astype(complex)[:, None, None]
