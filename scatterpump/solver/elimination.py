"""Block-tridiagonal systems, many at a time: from the far end to the first block (arrays only).

    D_n = A_nn - A_n,n+1 D_n+1^-1 A_n+1,n,     n = L-2 ... 0,     D_L-1 = A_L-1,L-1,

leaves D_0, the Schur complement on the first block.  T_n, with t = T_n psi_n the wanted amplitudes of all blocks
from n on, comes along in the same sweep: T_n = S_n - T_n+1 D_n+1^-1 A_n+1,n, where S_n picks those that lie in
block n itself.

Only the far end is open, so in a gap the imaginary part of a real device's D_n dies out like |T_n|^2.  Once it is
smaller than rounding of D_n itself it is dropped, and the rest of the sweep is real: half the work or less.

For blocks of one row the pair (p, q) with D = p/q needs no division and neither over- nor underflows; larger blocks
are inverted, and the largest |D^-1| met, times a typical energy, is returned as `growth`: digits are lost in proportion
to it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache
from importlib.util import find_spec
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.blocks import Band, Picks, Stack, picked
from scatterpump.solver.elements import listed_all, tabled
from scatterpump.solver.inverses import inverses

__all__ = ["Eliminated", "EliminatedSingle", "backward", "eliminate", "eliminate_single"]

Numbers = NDArray[Any]  # float64 where all is real, else complex128
Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
Indices = NDArray[np.int64]
RESCALE_EVERY = 32
WEIGHABLE = 1e-100, 1e100
LOOK_EVERY = 4
DROPPED = 1e-16  # of |D|: what one rounding changes
ROUNDED = 4e-16  # of the larger of p and q: what roundings leave of an imaginary part that has died out


@dataclass(frozen=True, eq=False)
class Eliminated:
    """What is left on the first block.

    Attributes
    ----------
    block : (n, w, w) array
        D_0.
    amplitudes : (n, k, w) array
        T_0.
    growth : (n,) float array
        Largest |D^-1| met, times the unit of energy.
    """

    block: Numbers
    amplitudes: Complex
    growth: NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class EliminatedSingle:
    """What is left on the first block of one row.

    Attributes
    ----------
    p, q : (n,) array
        D_0 = p / q.
    passed : (n,) complex array
        T_0 q.
    """

    p: Numbers
    q: Numbers
    passed: Complex


def eliminate_single(
    diagonal: Band, lower: Band, upper: Band, count: int, *, unit: float, real_below: int, amplitude: bool
) -> EliminatedSingle:
    """Eliminate blocks of one row.

    Parameters
    ----------
    diagonal : Band of L blocks
        A_nn for n = `count` systems.
    lower, upper : Band of L-1 blocks
        A_n+1,n and A_n,n+1.
    unit : float
        A typical energy, so that p and q are products of numbers that are neither large nor small.
    real_below : int
        The first so many blocks are real, with what couples them.
    amplitude : bool
        Whether the last block's amplitude is wanted.
    """
    last = len(diagonal) - 1
    products = _products(lower, upper, unit)
    p, q = diagonal[last] / unit * np.ones(count, dtype=complex), np.ones(count, dtype=complex)
    passed = np.ones(count, dtype=complex)  # q_L-1 times the product of -A_n+1,n, on the common scale of p and q
    for end in range(last, 0, -RESCALE_EVERY):
        steps = range(max(0, end - RESCALE_EVERY), end)
        rows = diagonal.rows(steps.start, end)
        p, q, scale = _stepped(rows if unit == 1.0 else rows / unit, products[steps.start : end], p, q)
        p, q, factor = _rescaled(p, q, is_real=steps.start < real_below)
        if amplitude:
            for n in steps:
                passed = passed * (lower[n] / -unit)
        passed = passed * (factor * scale)
    return EliminatedSingle(p * unit, q, passed)


def _products(lower: Band, upper: Band, unit: float) -> Any:
    """A_n,n+1 A_n+1,n of all blocks, one array if they stand still."""
    if lower.is_still and upper.is_still:
        return (np.array(upper.fixed) / unit) * (np.array(lower.fixed) / unit)
    return [(up / unit) * (down / unit) for up, down in zip(upper, lower, strict=True)]


def _stepped(rows: Numbers, products: Any, p: Numbers, q: Numbers) -> tuple[Numbers, Numbers, Any]:
    """Take p, q = d p - o q, p for all d in `rows`, the last first, and their o; q is overwritten.

    With p_n = c_n P_n and c_n = o_n c_n+2 that is P_n = (d_n c_n+1 / c_n) P_n+1 - P_n+2: no products with o are left.
    Returns P, q on its scale, and the factor between p and P.
    """
    weights = _weights(products.real) if isinstance(products, np.ndarray) and not products.imag.any() else None
    if weights is None:
        for d, o in zip(rows[::-1], products[::-1], strict=True):
            p, q = d * p - o * q, p
        return p, q, 1.0
    if (weights != 1.0).any():
        rows *= (weights[1:] / weights[:-1])[:-1, None]
    spare = np.empty_like(p)
    for d in rows[::-1]:
        np.multiply(d, p, out=spare)
        np.subtract(spare, q, out=q)
        p, q = q, p
    return p, q * (weights[1] / weights[0]), 1.0 / weights[0]


def _weights(products: Floats) -> Floats | None:
    """c_n for every step and the two before the first; None where they leave the range."""
    if (products == 1.0).all():
        return np.ones(len(products) + 2)
    weights = [1.0, 1.0]
    for o in products[::-1].tolist():
        weights.append(o * weights[-2])
    found = np.array(weights[::-1])
    return found if WEIGHABLE[0] < np.abs(found).min() and np.abs(found).max() < WEIGHABLE[1] else None


def _rescaled(p: Numbers, q: Numbers, *, is_real: bool) -> tuple[Numbers, Numbers, Numbers]:
    """Divide p and q by a common factor, and return its inverse too.

    Where all that follows is real and p/q is, to less than rounding, the common phase goes out and both become real.
    """
    size = np.maximum(np.abs(p), np.abs(q))
    size[size == 0] = 1.0
    if is_real and np.iscomplexobj(p):
        phase = np.where(np.abs(p) == size, p, q) / size
        turned = p * (phase.conj() / size), q * (phase.conj() / size)
        if all((np.abs(part.imag) <= ROUNDED).all() for part in turned):
            return turned[0].real.copy(), turned[1].real.copy(), phase.conj() / size
    return p / size, q / size, 1 / size


def eliminate(
    diagonal: Sequence[Numbers],
    lower: Sequence[Numbers],
    upper: Sequence[Numbers],
    wanted: Sequence[Complex] | None,
    *,
    unit: float,
    real_below: int,
    kernel: Literal["numpy", "compiled"] | None = None,
) -> Eliminated:
    """Eliminate blocks of any size.

    Parameters
    ----------
    diagonal : L arrays of shape (n, w_i, w_i)
    lower, upper : L-1 arrays of shape (n or 1, w_i+1, w_i) and (n or 1, w_i, w_i+1)
    wanted : L arrays of shape (k, w_i) or None
        S_n: which amplitudes lie in which block.
    unit : float
        A typical energy: against its inverse |D^-1| is large or small.
    real_below : int
        The first so many blocks are real, with what couples them.
    kernel : {"numpy", "compiled"}, optional
        By default the compiled sweep, if numba is installed.

    Raises
    ------
    numpy.linalg.LinAlgError
        If a block is singular to the last digit; the compiled sweep lets the growth tell instead.
    """
    if kernel == "compiled" or (kernel is None and has_compiler()):
        return _eliminated_compiled(diagonal, lower, upper, wanted, unit, real_below)
    return _eliminated_numpy(diagonal, lower, upper, wanted, unit, real_below)


@cache
def has_compiler() -> bool:
    """Whether numba is installed."""
    return find_spec("numba") is not None


def _widths(diagonal: Sequence[Numbers]) -> Indices:
    if isinstance(diagonal, Stack):
        return np.asarray(diagonal.blocks.layers.widths[diagonal.first :], dtype=np.int64)
    return np.array([block.shape[1] for block in diagonal], dtype=np.int64)


def _eliminated_compiled(
    diagonal: Sequence[Numbers],
    lower: Sequence[Numbers],
    upper: Sequence[Numbers],
    wanted: Sequence[Complex] | None,
    unit: float,
    real_below: int,
) -> Eliminated:
    from scatterpump.solver.compiled import swept

    stacks = diagonal, lower, upper
    if isinstance(diagonal, Stack) and isinstance(lower, Stack) and isinstance(upper, Stack):
        elements, moving = [each.elements for each in (diagonal, lower, upper)], diagonal.moving
    else:
        elements, moving = listed_all(stacks, len(diagonal[-1]))
    widths = _widths(diagonal)
    chosen, _ = listed_all([[each[None] for each in wanted or ()]], 1)
    count, height = len(moving), len(wanted[0]) if wanted else 0
    parts = 2 if np.iscomplexobj(moving) else 1
    layers, entries = tabled(widths, [*elements, *chosen])
    block = np.empty((count, widths[0], widths[0]), dtype=complex)
    amplitudes, growth = np.empty((count, height, widths[0]), dtype=complex), np.empty(count)
    moving = np.ascontiguousarray(moving.T).view(np.float64)
    swept(layers, entries, moving, parts, height, unit, real_below, block, amplitudes, growth)
    return Eliminated(block, amplitudes, growth)


def _eliminated_numpy(
    diagonal: Sequence[Numbers],
    lower: Sequence[Numbers],
    upper: Sequence[Numbers],
    wanted: Sequence[Complex] | None,
    unit: float,
    real_below: int,
) -> Eliminated:
    here = diagonal[-1]
    amplitudes = None if wanted is None else np.broadcast_to(wanted[-1], (len(here), *wanted[-1].shape))
    growth = np.ones(len(here))
    for n in range(len(diagonal) - 2, -1, -1):
        if n < real_below and n % LOOK_EVERY == 0:
            here = _real_if_negligible(here)
        inverse, largest = inverses(here, unit)
        growth = np.maximum(growth, largest)
        picks = _picks(upper, n, -1), _picks(lower, n, 1)
        here, amplitudes = backward(diagonal[n], lower[n], upper[n], inverse, amplitudes, picks)
        if amplitudes is not None and wanted is not None:
            amplitudes = wanted[n] + amplitudes
    if amplitudes is None:
        amplitudes = np.zeros((len(here), 0, here.shape[1]), dtype=complex)
    return Eliminated(here, amplitudes, growth)


def backward(
    block: Numbers,
    lower: Numbers,
    upper: Numbers,
    inverse: Numbers,
    rows: Numbers | None,
    picks: tuple[Picks | None, Picks | None],
) -> tuple[Numbers, Any]:
    """One step: A_nn - A_n,n+1 D^-1 A_n+1,n and -T D^-1 A_n+1,n, for T = `rows` if there are any.

    The inverse may be overwritten.
    """
    carried = None if rows is None else -_times(rows, inverse) @ lower
    taken = _sandwich(upper, inverse, lower, *picks)
    if len(taken) < len(block) or np.result_type(block, taken) != taken.dtype:
        return np.asarray(block - taken), carried
    return np.asarray(np.subtract(block, taken, out=taken)), carried


def _real_if_negligible(block: Numbers) -> Numbers:
    """The block without its imaginary part, if that is less than rounding everywhere."""
    if not np.iscomplexobj(block) or np.abs(block[0].imag).max() > DROPPED * np.abs(block[0].real).max():
        return block
    imaginary, real = np.abs(block.imag).max(axis=(1, 2)), np.abs(block.real).max(axis=(1, 2))
    return np.ascontiguousarray(block.real) if (imaginary <= DROPPED * real).all() else block


def _times(amplitudes: Numbers, inverse: Numbers) -> Numbers:
    """Product of complex rows with a matrix that may be real, without making it complex."""
    if np.iscomplexobj(inverse) or not np.iscomplexobj(amplitudes):
        return np.asarray(amplitudes @ inverse)
    rows = amplitudes.shape[1]
    both = np.concatenate([amplitudes.real, amplitudes.imag], axis=1) @ inverse
    return np.asarray(both[:, :rows] + 1j * both[:, rows:])


def _picks(stack: Sequence[Numbers], n: int, step: int) -> Picks | None:
    """Which elements block n of a stack picks: along its rows for `step` -1, along its columns for 1."""
    if isinstance(stack, Stack):
        return stack.picks(n)
    return picked(stack[n] if step < 0 else stack[n].swapaxes(1, 2))


def _sandwich(upper: Numbers, inverse: Numbers, lower: Numbers, up: Picks | None, down: Picks | None) -> Numbers:
    """A_n,n+1 D^-1 A_n+1,n; where both couple every row to at most one other, that is picking and scaling elements."""
    if up is None or down is None:
        return np.asarray(upper @ inverse @ lower)
    (to, rows), (fro, columns) = up, down
    if not (_is_count(to) and _is_count(fro) and inverse.shape[1:] == (len(to), len(fro))):
        inverse = inverse[:, to[:, None], fro]
    scale = rows[:, None] * columns
    return inverse if (scale == 1.0).all() else np.asarray(inverse * scale)


def _is_count(places: Indices) -> bool:
    """Whether these are 0, 1, 2, ..."""
    return bool((places == np.arange(len(places))).all())
