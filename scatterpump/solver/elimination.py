"""Block-tridiagonal systems, many at a time: from the far end to the first block (arrays only).

    D_n = A_nn - A_n,n+1 D_n+1^-1 A_n+1,n,     n = L-2 ... 0,     D_L-1 = A_L-1,L-1,

leaves D_0, the Schur complement on the first block.  T_n, with t = T_n psi_n the wanted amplitudes of all blocks
from n on, comes along in the same sweep: T_n = S_n - T_n+1 D_n+1^-1 A_n+1,n, where S_n picks those that lie in
block n itself.

For blocks of one row the pair (p, q) with D = p/q needs no division and neither over- nor underflows; larger blocks
are inverted, and the largest |D^-1| met is returned as `growth`: digits are lost in proportion to it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Eliminated", "eliminate", "eliminate_single"]

Complex = NDArray[np.complex128]
RESCALE_EVERY = 16


@dataclass(frozen=True, eq=False)
class Eliminated:
    """What is left on the first block.

    Attributes
    ----------
    p, q : (n, w, w) complex array
        D_0 = p q^-1.
    amplitudes : (n, k, w) complex array or None
        T_0; for blocks of one row still to be divided by q.
    growth : (n,) float array
        Largest |D^-1| met; 1 where nothing was divided by.
    """

    p: Complex
    q: Complex
    amplitudes: Complex | None
    growth: NDArray[np.float64]


def eliminate_single(diagonal: Complex, lower: Complex, upper: Complex, *, amplitude: bool) -> Eliminated:
    """Eliminate blocks of one row.

    Parameters
    ----------
    diagonal : (L, n) complex array
        A_nn for n systems.
    lower, upper : (L-1, n) or (L-1, 1) complex array
        A_n+1,n and A_n,n+1.
    amplitude : bool
        Whether the last block's amplitude is wanted.
    """
    steps, count = diagonal.shape
    product = lower * upper
    p, q = diagonal[-1].copy(), np.ones(count, dtype=complex)
    passed = np.ones(count, dtype=complex)  # q_L-1 times the product of -A_n+1,n, on the common scale of p and q
    for n in range(steps - 2, -1, -1):
        p, q = diagonal[n] * p - product[n] * q, p
        if amplitude:
            passed = passed * -lower[n]
        if n % RESCALE_EVERY == 0:
            size = np.maximum(np.abs(p), np.abs(q))
            size[size == 0] = 1.0
            p, q, passed = p / size, q / size, passed / size
    return Eliminated(p[:, None, None], q[:, None, None], passed[:, None, None] if amplitude else None, np.ones(count))


def eliminate(
    diagonal: Sequence[Complex], lower: Sequence[Complex], upper: Sequence[Complex], wanted: Sequence[Complex] | None
) -> Eliminated:
    """Eliminate blocks of any size.

    Parameters
    ----------
    diagonal : L arrays of shape (n, w_i, w_i)
    lower, upper : L-1 arrays of shape (n or 1, w_i+1, w_i) and (n or 1, w_i, w_i+1)
    wanted : L arrays of shape (k, w_i) or None
        S_n: which amplitudes lie in which block.

    Raises
    ------
    numpy.linalg.LinAlgError
        If a block is singular to the last digit.
    """
    here = diagonal[-1]
    amplitudes = None if wanted is None else np.broadcast_to(wanted[-1], (len(here), *wanted[-1].shape))
    growth = np.ones(len(here))
    for n in range(len(diagonal) - 2, -1, -1):
        inverse: Complex = np.asarray(np.linalg.inv(here), dtype=complex)
        growth = np.maximum(growth, np.abs(inverse).max(axis=(1, 2), initial=0.0))
        if amplitudes is not None and wanted is not None:
            amplitudes = wanted[n] - (amplitudes @ inverse) @ lower[n]
        here = np.asarray(diagonal[n]) - _sandwich(upper[n], inverse, lower[n])
    one = np.broadcast_to(np.eye(here.shape[1], dtype=complex), here.shape)
    return Eliminated(here, one, amplitudes, growth)


def _sandwich(upper: Complex, inverse: Complex, lower: Complex) -> Complex:
    """A_n,n+1 D^-1 A_n+1,n; where both couple every row to at most one other, that is picking and scaling elements."""
    up, down = _as_picks(upper), _as_picks(lower.swapaxes(1, 2))
    if up is None or down is None:
        return np.asarray(upper @ inverse @ lower)
    (to, rows), (fro, columns) = up, down
    return np.asarray(inverse[:, to[:, None], fro] * (rows[:, None] * columns))


def _as_picks(coupling: Complex) -> tuple[NDArray[np.int64], Complex] | None:
    """For every row the column of its only element and that element; None if rows have more, or change with phi."""
    if len(coupling) != 1 or (np.count_nonzero(coupling[0], axis=1) > 1).any():
        return None
    place = np.abs(coupling[0]).argmax(axis=1)
    return place, coupling[0][np.arange(len(place)), place]
