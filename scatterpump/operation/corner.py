"""W^+ A^-1 W of a banded matrix A and a few columns W, without A^-1 W (arrays only).

It is the corner that is left of [[A, W], [-W^+, 0]] when A is eliminated.  A band of half-width b falls into blocks
of b unknowns, each coupled to its neighbours alone, which are eliminated one after the other by dense pivoted
factorisations: matrices times matrices, that stay in the processor's cache, where a banded solver reads its whole
factor anew for every column.  Columns join when their first row is met.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["corner"]

Complex = NDArray[np.complex128]
Indices = NDArray[np.int64]


def corner(matrix: Any, columns: Any) -> Complex:
    """Return W^+ A^-1 W, shape (c, c).

    Parameters
    ----------
    matrix : (n, n) sparse matrix
        A, complex, with its elements near the diagonal.
    columns : (n, c) sparse matrix
        W.

    Raises
    ------
    numpy.linalg.LinAlgError
        If a part of A that is met on the way is singular.
    """
    band, width = _blocks(matrix.tocoo())
    dense, first = _columns(columns, width, len(band))
    order = np.argsort(first, kind="stable")
    found = np.zeros((len(order),) * 2, dtype=complex)
    pivot, right, below = _begun(band, dense, order, first)
    for block in range(1, len(band)):
        solved = np.linalg.solve(pivot, np.hstack([band[block - 1, :, 2], right]))
        before, active = band[block, :, 0], right.shape[1]
        pivot = band[block, :, 1] - before @ solved[:, :width]
        found[:active, :active] += below @ solved[:, width:]
        own = dense[block][:, order[: int((first <= block).sum())]]
        right = _grown(-before @ solved[:, width:], own)
        below = _grown(-(below @ solved[:, :width]).T, own.conj()).T
    found[: len(below), : len(below)] += below @ np.linalg.solve(pivot, right)
    result = np.empty_like(found)
    result[np.ix_(order, order)] = found
    return result


def _begun(band: Complex, dense: Complex, order: Indices, first: Indices) -> tuple[Complex, Complex, Complex]:
    """The first block: its part of A, of the columns that it meets, and of their adjoints."""
    own = dense[0][:, order[: int((first == 0).sum())]]
    return band[0, :, 1], own, own.conj().T


def _grown(carried: Complex, own: Complex) -> Complex:
    """`own` columns, with what was `carried` to the first of them added."""
    result = own.copy()
    result[:, : carried.shape[1]] += carried
    return result


def _blocks(matrix: Any) -> tuple[Complex, int]:
    """A as (blocks, b, 3, b): row block, row, block before, own or after, column; padded with ones on the diagonal."""
    width = max(1, int(np.abs(matrix.row - matrix.col).max(initial=0)))
    count = -(-matrix.shape[0] // width)
    result = np.zeros((count, width, 3, width), dtype=complex)
    rows, columns = matrix.row.astype(np.int64), matrix.col.astype(np.int64)
    result[rows // width, rows % width, columns // width - rows // width + 1, columns % width] = matrix.data
    padding = np.arange(matrix.shape[0], count * width) % width
    result[-1, padding, 1, padding] = 1.0
    return result, width


def _columns(columns: Any, width: int, count: int) -> tuple[Complex, Indices]:
    """W as (blocks, b, c), and the first block of every column."""
    places = columns.tocoo()
    result = np.zeros((count, width, columns.shape[1]), dtype=complex)
    result[places.row // width, places.row % width, places.col] = places.data
    first = np.full(columns.shape[1], count - 1, dtype=np.int64)
    np.minimum.at(first, places.col, places.row // width)
    return result, first
