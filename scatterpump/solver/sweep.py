"""A sweep over the layers of a prepared pump, or the last of them, for many phases at once."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.blocks import Stack
from scatterpump.solver.doubling import Load, closed_by, closed_by_pair
from scatterpump.solver.elimination import eliminate, eliminate_single
from scatterpump.solver.problem import Problem

__all__ = ["between", "eliminated", "swept"]

Complex = NDArray[np.complex128]
Numbers = NDArray[Any]  # float64 where all is real, else complex128
Floats = NDArray[np.float64]


def swept(problem: Problem, elements: Numbers, amplitude: bool) -> tuple[Load, Floats]:
    """Return the device as the probe's load, by a sweep over all layers, and the growth met at each phase.

    Parameters
    ----------
    problem : Problem
    elements : (n, elements) array
        The moving elements of H.
    amplitude : bool
        Whether t is wanted.
    """
    blocks, count = problem.blocks, len(elements)
    if problem.single:
        real_below = 0 if np.iscomplexobj(elements) else blocks.real_below
        diagonal, lower, upper = (blocks.band(step, elements) for step in (0, 1, -1))
        unit = problem.hopping
        found = eliminate_single(diagonal, lower, upper, count, unit=unit, real_below=real_below, amplitude=amplitude)
        passed = found.passed * problem.layers.weights.max(initial=0.0)  # one mode at most: there is one end
        return closed_by_pair(replace(found, passed=passed), problem.probe.hop, amplitude), np.ones(count)
    here, amplitudes, growth = eliminated(problem, elements, 0, amplitude)
    return closed_by(here, problem.probe.hop[None], amplitudes), growth


def eliminated(problem: Problem, elements: Numbers, first: int, amplitude: bool) -> tuple[Numbers, Complex, Floats]:
    """D and T of layer `first`, with all beyond it eliminated, and the growth met."""
    blocks = problem.blocks
    diagonal, lower, upper = (Stack(blocks, step, first, elements) for step in (0, 1, -1))
    found = eliminate(
        diagonal,
        lower,
        upper,
        problem.wanted(first) if amplitude else None,
        unit=problem.hopping,
        real_below=0 if np.iscomplexobj(elements) else blocks.real_below - first,
    )
    return found.block, found.amplitudes, found.growth


def between(
    problem: Problem, elements: Numbers, first: int, last: int
) -> tuple[list[Numbers], list[Numbers], list[Numbers]]:
    """Blocks of the layers `first` to `last`, and those that couple them."""
    blocks = problem.blocks
    return (
        [blocks.diagonal(n).at(elements) for n in range(first, last + 1)],
        [blocks.lower(n).at(elements) for n in range(first, last)],
        [blocks.upper(n).at(elements) for n in range(first, last)],
    )
