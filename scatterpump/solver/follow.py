"""What kind of path H takes along the cycle: found by sampling its matrix elements, and verified where it counts."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from scatterpump.cycle import Cycle
from scatterpump.solver.harmonics import HIGHEST, fit
from scatterpump.solver.path import TURN, Path, Sample, SampledPath, StraightPath, TrigonometricPath

__all__ = ["follow"]

Floats = NDArray[np.float64]
STRAIGHT_TOLERANCE = 1e-10
GRID = 192
FINE = 1024


def follow(sample: Sample, cycle: Cycle) -> Path:
    """Find out what kind of path H takes along `cycle`, from samples of its matrix elements, shape (n, nnz)."""
    corners = np.array(cycle.corners)
    if cycle.straight and corners.size:
        straight = StraightPath(corners, sample(corners))
        if _is_straight(straight, sample):
            return straight
    elif not corners.size and _plain(cycle) and (harmonics := fit(sample)) is not None:
        return TrigonometricPath(harmonics)
    return SampledPath(sample, corners, _nodes(cycle, corners))


def _is_straight(path: StraightPath, sample: Sample) -> bool:
    inside = path.corners + 0.37 * np.diff(np.append(path.corners, path.corners[0] + TURN))
    straight = np.array([path.at(phase) for phase in inside.tolist()])
    scale = np.abs(path.points).max(axis=0) + 1e-300
    return bool((np.abs(straight - sample(inside)) <= STRAIGHT_TOLERANCE * scale).all())


def _parameters(cycle: Cycle) -> Floats:
    """Numbers among the parameters of a cycle at many even phases, shape (FINE + 1, parameters)."""
    rows = [cycle.at(float(phase)) for phase in np.linspace(0.0, TURN, FINE + 1)]
    numbers = [name for name in rows[0] if all(isinstance(row.get(name), int | float | np.number) for row in rows)]
    return np.array([[float(row[name]) for name in numbers] for row in rows]).reshape(FINE + 1, len(numbers))


def _plain(cycle: Cycle) -> bool:
    """Whether every number among the parameters is a trigonometric polynomial, or in step with phi, at many phases.

    A Hamiltonian is sampled at few phases; a pulse in the parameters between them must not be missed.
    """
    if cycle.plain:
        return True
    values = _parameters(cycle)
    steady = values - np.linspace(0.0, 1.0, FINE + 1)[:, None] * (values[-1] - values[0])
    size = np.abs(np.fft.rfft(steady[:-1], axis=0)) / FINE
    return bool((size[HIGHEST + 1 :] <= 1e-10 * np.maximum(1.0, np.abs(values).max(axis=0))).all())


def _nodes(cycle: Cycle, corners: Floats) -> Floats:
    """Phases at which to sample a path: even ones, the corners, and more where the parameters move fast."""
    values = _parameters(cycle)
    moved = np.abs(np.diff(values, axis=0)) / np.maximum(np.ptp(values, axis=0), 1e-300)
    length = np.concatenate([[0.0], np.cumsum(moved.sum(axis=1))])
    even = np.linspace(0.0, TURN, GRID + 1)
    fast = np.interp(np.linspace(0.0, length[-1], GRID + 1), length, np.linspace(0.0, TURN, FINE + 1))
    every = np.unique(np.concatenate([even, fast, corners]))
    apart = np.concatenate([[True], np.diff(every) > TURN / (16 * FINE)])
    return np.append(every[apart & (every < TURN * (1 - 1e-4))], TURN)
