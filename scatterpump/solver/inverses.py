"""Inverses of many small matrices at once, and how large they became (arrays only).

Where there are many and they are small, all are inverted together by Gauss-Jordan elimination, an element of every
matrix at a time and without exchange of rows; those whose pivots become small are inverted again by LAPACK.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["SMALL_PIVOT", "inverses"]

Numbers = NDArray[Any]  # float64 where all is real, else complex128
Floats = NDArray[np.float64]
SMALL_PIVOT = 1e4  # inverse of a pivot, in the unit of energy, that costs four digits
WIDEST, FEWEST = 12, 200  # where LAPACK, one matrix after the other, is as fast


def inverses(blocks: Numbers, unit: float) -> tuple[Numbers, Floats]:
    """Return the inverses of `blocks`, shape (n, w, w), and the largest |element| of each times `unit`, shape (n,).

    The latter is not a number for blocks that are not finite.

    Raises
    ------
    numpy.linalg.LinAlgError
        If a block is singular to the last digit.
    """
    if blocks.shape[1] > WIDEST or len(blocks) < FEWEST:
        found = np.linalg.inv(blocks)
    else:
        lanes = np.array(blocks.transpose(1, 2, 0), order="C")
        with np.errstate(all="ignore"):  # what fails is done again
            worst = _gauss_jordan(lanes)
        found = np.ascontiguousarray(lanes.transpose(2, 0, 1))
        again = np.flatnonzero(~(worst * unit <= SMALL_PIVOT))
        if again.size:
            found[again] = np.linalg.inv(blocks[again])
    return found, unit * _largest(found) + _taint(blocks)


def _gauss_jordan(lanes: Numbers) -> Floats:
    """Invert matrices of shape (w, w, n) in place, and return the largest inverse of a pivot of each."""
    spare, worst = np.empty_like(lanes), np.zeros(lanes.shape[2])
    for k in range(len(lanes)):
        pivot = 1.0 / lanes[k, k]
        worst = np.maximum(worst, np.abs(pivot))
        row, column = lanes[k] * pivot, lanes[:, k].copy()
        np.multiply(column[:, None], row, out=spare)
        np.subtract(lanes, spare, out=lanes)
        lanes[k], lanes[:, k] = row, column * -pivot
        lanes[k, k] = pivot
    return np.asarray(worst, dtype=float)


def _largest(blocks: Numbers) -> Floats:
    """Largest real or imaginary part of each block."""
    parts = blocks.reshape(len(blocks), -1).view(np.float64)
    return np.asarray(np.maximum(parts.max(axis=1, initial=0.0), -parts.min(axis=1, initial=0.0)))


def _taint(blocks: Numbers) -> Floats:
    """Zero, or not a number for blocks that are not finite."""
    parts = np.ascontiguousarray(blocks).reshape(len(blocks), -1).view(np.float64)
    return np.asarray(0.0 * (parts @ np.ones(parts.shape[1])))
