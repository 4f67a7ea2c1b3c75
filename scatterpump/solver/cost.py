"""What the ways to r(phi) are expected to cost for one phase, in microseconds of one ordinary core.

Fitted to a square lattice with nearest neighbours, 20 to 200 wide and 100 to 400 long; only ratios matter.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["complement", "joins", "sweep"]

Floats = NDArray[np.float64]
PER_AREA, PER_VOLUME = 0.03, 0.0006  # of a layer's width squared (memory) and cubed (arithmetic), all real
COMPLEX = 1.6  # real numbers again, but a layer or more is complex before the open end is out of reach
AMPLITUDES = 1.6
COMPILED, COMPILED_PER_WIDTH = 0.3, 0.002  # what numba leaves of a sweep's time: a third at 40, half at 100
PER_UNKNOWN, PER_UNKNOWN_AND_WIDTH = 3.0, 0.035
ENDS, JOIN = 5.0, 5.0  # a join of cells, and a layer of their ends, in inversions of a complex layer


def sweep(widths: NDArray[Any], *, is_real: bool, transmission: bool, compiled: bool) -> float:
    """Return the cost of eliminating layers of these widths."""
    width = np.asarray(widths, dtype=float)
    share = np.minimum(1.0, COMPILED + COMPILED_PER_WIDTH * width) if compiled else np.ones(len(width))
    cost = float((share * _inversions(widths)).sum())
    return cost * (1.0 if is_real else COMPLEX) * (AMPLITUDES if transmission else 1.0)


def joins(widths: NDArray[Any], repeats: int) -> float:
    """Return the cost of joining a cell with layers of these widths `repeats` times with itself."""
    layers = _inversions(widths)
    return COMPLEX * float(ENDS * layers.sum() + JOIN * np.log2(repeats) * layers.max())


def complement(widths: NDArray[Any]) -> float:
    """Return the cost of one sparse Schur complement: nested dissection cuts no wider than a layer."""
    size = float(widths.sum())
    cut = min(float(widths.max()), float(np.sqrt(size)))
    return size * (PER_UNKNOWN + PER_UNKNOWN_AND_WIDTH * cut)


def _inversions(widths: NDArray[Any]) -> Floats:
    width = np.asarray(widths, dtype=float)
    return np.asarray(PER_AREA * width**2 + PER_VOLUME * width**3)
