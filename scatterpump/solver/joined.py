"""A pump whose interior repeats a cell: its cells joined by doubling, prolonged by more of them, or endless.

The first cell belongs to the head, with all layers before it, and the last one to the tail; what lies between is one
cell to some power.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import InputError
from scatterpump.solver.doubling import Load, Scattering, behind, closed_by, endless, ports, repeated, segment
from scatterpump.solver.period import Run
from scatterpump.solver.problem import Problem
from scatterpump.solver.sweep import between, eliminated

__all__ = ["joined", "joined_endless", "run_of"]

Numbers = NDArray[Any]
Floats = NDArray[np.float64]


def run_of(problem: Problem, *, transmission: bool) -> Run:
    """Return the run of equal cells.

    Raises
    ------
    InputError
        If there is none, or a lead that t is wanted for is attached before its end.
    """
    if problem.run is None:
        raise InputError(
            "the device has no cell that it repeats at least three times, so it cannot be prolonged",
            allowed="three or more equal cells, without disorder, driven by a trigonometric or piecewise linear path",
        )
    if transmission and not problem.reaches_beyond(problem.run):
        raise InputError(
            "a lead is attached before the end of the repeated cells, so t of a longer device is not known",
            allowed="transmission=False, or leads beyond the repeated cells",
        )
    return problem.run


def joined(problem: Problem, elements: Numbers, run: Run, count: int, amplitude: bool) -> tuple[Load, Floats]:
    """Return the device as the probe's load, with `count` cells between the first and the last, and the growth met."""
    near, far = _ports(problem, elements, run)
    here, amplitudes, growth = eliminated(problem, elements, _tail(run), amplitude)
    cell = _cell(problem, elements, run, near, far)
    return behind(_head(problem, elements, run, far), repeated(cell, count, closed_by(here, near, amplitudes))), growth


def joined_endless(problem: Problem, elements: Numbers, run: Run) -> tuple[Load, NDArray[np.bool_]]:
    """Return the device with endlessly many cells, and at which phases nothing passes through them."""
    near, far = _ports(problem, elements, run)
    load, dark = endless(_cell(problem, elements, run, near, far))
    return behind(_head(problem, elements, run, far), load), dark


def _tail(run: Run) -> int:
    """First layer of the last cell."""
    return run.first + run.length * (run.repeats - 1)


def _ports(problem: Problem, elements: Numbers, run: Run) -> tuple[Numbers, Numbers]:
    return ports(-problem.blocks.upper(_tail(run) - 1).at(elements))


def _cell(problem: Problem, elements: Numbers, run: Run, near: Numbers, far: Numbers) -> Scattering:
    start = run.first + run.length
    return segment(*between(problem, elements, start, start + run.length - 1), near, far)


def _head(problem: Problem, elements: Numbers, run: Run, far: Numbers) -> Scattering:
    return segment(*between(problem, elements, 0, run.first + run.length - 1), problem.probe.hop[None], far)
