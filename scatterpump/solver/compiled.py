"""The elimination sweep compiled by numba: four systems at a time from the far end to the first block.

The same recursion as in `elimination`, on blocks given as lists of their elements (`Elements`), so that the blocks are
never formed for all systems at once.  A group of four goes on in real arithmetic as soon as its own imaginary parts
are below rounding.  Blocks whose pivots are small are inverted again with exchange of rows.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from scatterpump.solver.lanes import PANEL, inner, inverted, inverted_with_pivots, subtract_product
from scatterpump.solver.simd import (
    LANES,
    constant,
    get,
    is_real,
    larger,
    load,
    minus_product,
    packed,
    product,
    put,
    size,
    store,
    tainted,
)

__all__ = ["swept"]

LOOK_EVERY = 4
DROPPED = 1e-17  # of |D|: a twentieth of what one rounding changes
SMALL_PIVOT = 1e4  # inverse of a pivot that costs four digits


@inner
def _element(like: Any, entries: Any, e: int, group: Any) -> Any:
    """Element e of a list for a group of systems, as lanes."""
    moving, parts, rows = group
    value, place = entries[3][e], entries[4][e]
    if place < 0:
        return constant(like, value.real, value.imag)
    a, b, c, d = rows[0], rows[1], rows[2], rows[3]
    re, im = place * parts, place * parts + parts - 1  # where all is real the imaginary parts are not looked at
    return packed(
        like,
        value.real - moving[a, re],
        value.real - moving[b, re],
        value.real - moving[c, re],
        value.real - moving[d, re],
        value.imag - moving[a, im] * (parts - 1),
        value.imag - moving[b, im] * (parts - 1),
        value.imag - moving[c, im] * (parts - 1),
        value.imag - moving[d, im] * (parts - 1),
    )


@inner
def _clear(a: Any, count: int) -> None:
    zero = constant(a, 0.0, 0.0)
    for k in range(count):
        store(a, k, zero)


@inner
def _add_block(a: Any, n: int, w: int, diagonal: Any, group: Any) -> None:
    """a += A_nn."""
    minus = constant(a, -1.0, 0.0)
    for e in range(diagonal[0][n], diagonal[0][n + 1]):
        at = diagonal[1][e] * w + diagonal[2][e]
        store(a, at, minus_product(load(a, at), minus, _element(a, diagonal, e, group)))


@inner
def _times_lower(a: Any, height: int, b: Any, n: int, deep: int, w: int, lower: Any, group: Any) -> None:
    """b = -a A_n+1,n for a of shape (height, deep)."""
    _clear(b, height * w)
    for e in range(lower[0][n], lower[0][n + 1]):
        factor = _element(a, lower, e, group)
        k, j = lower[1][e], lower[2][e]
        for i in range(height):
            store(b, i * w + j, minus_product(load(b, i * w + j), load(a, i * deep + k), factor))


@inner
def _sandwich(
    inverse: Any, here: Any, n: int, deep: int, w: int, upper: Any, lower: Any, spare: Any, group: Any
) -> None:
    """here = -A_n,n+1 D^-1 A_n+1,n, element by element where the couplings pick elements."""
    start, end = lower[0][n], lower[0][n + 1]
    if not (upper[5][n] and lower[5][n]):
        _times_lower(inverse, deep, spare, n, deep, w, lower, group)
        _clear(here, w * w)
        for e in range(upper[0][n], upper[0][n + 1]):
            factor = product(constant(here, -1.0, 0.0), _element(here, upper, e, group))
            i, k = upper[1][e], upper[2][e]
            for j in range(w):
                store(here, i * w + j, minus_product(load(here, i * w + j), factor, load(spare, k * w + j)))
        return
    for e in range(start, end):
        store(spare, e - start, _element(here, lower, e, group))
    if end - start < w or upper[0][n + 1] - upper[0][n] < w:
        _clear(here, w * w)
    for e in range(upper[0][n], upper[0][n + 1]):
        factor = product(constant(here, -1.0, 0.0), _element(here, upper, e, group))
        i, k = upper[1][e] * w, upper[2][e] * deep
        for f in range(start, end):
            value = product(load(inverse, k + lower[1][f]), load(spare, f - start))
            store(here, i + lower[2][f], product(factor, value))


@inner
def _form(here: Any, before: Any, n: int, spare: Any, problem: Any, group: Any) -> None:
    """here = D_n from before = D_n+1^-1."""
    widths, diagonal, lower, upper, _ = problem
    w = widths[n]
    if n == len(widths) - 1:
        _clear(here, w * w)
    else:
        _sandwich(before, here, n, widths[n + 1], w, upper, lower, spare, group)
    _add_block(here, n, w, diagonal, group)


@inner
def _worst(growth: Any, a: Any, count: int) -> None:
    """Growth, or the largest part of the elements of `a` if that is larger; not a number where they are not finite."""
    most, doubt = load(growth, 0), load(growth, 1)
    for k in range(count):
        value = load(a, k)
        most, doubt = larger(most, size(value)), tainted(doubt, value)
    store(growth, 0, most)
    store(growth, 1, doubt)


@inner
def _has_small_pivot(pivots: Any) -> bool:
    for lane in range(LANES):
        if not pivots[lane] <= SMALL_PIVOT:
            return True
    return False


@inner
def _is_real_to_rounding(a: Any, count: int) -> bool:
    for lane in range(LANES):
        real = imaginary = 0.0
        for k in range(count):
            value = get(a, k, lane)
            real, imaginary = max(real, abs(value.real)), max(imaginary, abs(value.imag))
        if not imaginary <= DROPPED * real:
            return False
    return True


@inner
def _add_wanted(kept: Any, n: int, w: int, wanted: Any, height: int) -> None:
    """T += S_n; among real numbers the imaginary parts have rows of their own, after the real ones."""
    minus = constant(kept, -1.0, 0.0)
    for e in range(wanted[0][n], wanted[0][n + 1]):
        at, value = wanted[1][e] * w + wanted[2][e], wanted[3][e]
        store(kept, at, minus_product(load(kept, at), minus, constant(kept, value.real, value.imag)))
        if is_real(kept):
            at += height * w
            store(kept, at, minus_product(load(kept, at), minus, constant(kept, value.imag, 0.0)))


@inner
def _carry(
    kept: Any, inverse: Any, spare: Any, n: int, tall: int, height: int, shape: Any, problem: Any, group: Any
) -> None:
    """T_n = S_n - T_n+1 D_n+1^-1 A_n+1,n in place of T_n+1."""
    deep, w = shape
    _clear(spare, tall * deep)
    origin = w - w  # a literal 0 would be compiled apart
    subtract_product(spare, origin, deep, kept, origin, deep, inverse, origin, deep, tall, deep, deep)
    for k in range(tall * deep):
        store(spare, k, product(load(spare, k), constant(spare, -1.0, 0.0)))
    _times_lower(spare, tall, kept, n, deep, w, problem[2], group)
    _add_wanted(kept, n, w, problem[4], height)


@inner
def _descend(
    stores: Any, growth: Any, n: int, tall: int, height: int, real_below: int, problem: Any, group: Any
) -> Any:
    """Go down from D_n to D_0, or to the first D that is real; return its layer, D, and the inverse it came from.

    `stores` are D_n, a place for its successor, T_n and spare lanes.  T has `height` complex rows, kept as `tall` rows.
    """
    here, before, kept, spare = stores
    widths = problem[0]
    pivots = np.zeros(LANES)
    while n > 0:
        deep, w = widths[n], widths[n - 1]
        if not is_real(here) and n < real_below and n % LOOK_EVERY == 0 and _is_real_to_rounding(here, deep * deep):
            break
        store(pivots, 0, inverted(here, deep, spare, constant(growth, 0.0, 0.0)))
        if _has_small_pivot(pivots):
            _form(here, before, n, spare, problem, group)
            inverted_with_pivots(here, deep)
        _worst(growth, here, deep * deep)
        if tall > 0:
            _carry(kept, here, spare, n - 1, tall, height, (deep, w), problem, group)
        _form(before, here, n - 1, spare, problem, group)
        here, before = before, here
        n -= 1
    return n, here, before


@inner
def _stores(dtype: Any, lanes: int, rows: int, widest: int) -> Any:
    spare = max(widest * widest, PANEL * (2 * widest + PANEL), rows * widest)
    return (
        np.empty(lanes * widest * widest, dtype),
        np.empty(lanes * widest * widest, dtype),
        np.empty(lanes * (rows * widest + 1), dtype),
        np.empty(lanes * spare, dtype),
    )


@inner
def _take_real(source: Any, count: int, target: Any, shift: int) -> None:
    """Real parts into a store of real lanes; with `shift` the imaginary parts too, so many lanes later."""
    for k in range(count):
        for lane in range(LANES):
            value = get(source, k, lane)
            put(target, k, lane, value.real)
            if shift:
                put(target, k + shift, lane, value.imag)


@njit(cache=True, nogil=True)
def swept(
    problem: Any, moving: Any, parts: int, height: int, real_below: int, block: Any, amplitudes: Any, most: Any
) -> None:
    """Eliminate all blocks but the first, and write D_0, T_0 and the growth.

    Parameters
    ----------
    problem : tuple
        Widths (L ints), then the elements of the diagonal, lower and upper blocks and of S, each a tuple of starts,
        rows, columns, values, places and picks (see `elements`).
    moving : (n, parts * elements) float array
        What is taken off the elements that move; complex numbers as two parts.
    height : int
        Rows of T.
    real_below : int
        The first so many blocks are real, with what couples them.
    block, amplitudes, most : (n, w, w), (n, height, w) complex and (n,) float arrays
        Results.
    """
    widths, count = problem[0], len(moving)
    last, first, widest = len(widths) - 1, widths[0], widths.max()
    open_stores = _stores(np.complex128, LANES, height, widest)
    real_stores = _stores(np.float64, LANES, 2 * height, widest)
    growth = np.empty(2 * LANES)
    rows = np.empty(LANES, np.int64)
    for start in range(0, count, LANES):
        for lane in range(LANES):  # the last group is filled up with its last system
            rows[lane] = min(start + lane, count - 1)
            growth[lane], growth[LANES + lane] = 1.0, 0.0
        group = (moving, parts, rows)
        here, before, kept, spare = open_stores
        _clear(kept, height * widths[last])
        _add_wanted(kept, last, widths[last], problem[4], height)
        _form(here, before, last, spare, problem, group)
        n, here, before = _descend(open_stores, growth, last, height, height, real_below, problem, group)
        if n > 0:
            w = widths[n]
            _take_real(here, w * w, real_stores[0], 0)
            if n < last:
                _take_real(before, widths[n + 1] ** 2, real_stores[1], 0)
            _take_real(kept, height * w, real_stores[2], height * w)
            _, real, _ = _descend(real_stores, growth, n, 2 * height, height, real_below, problem, group)
            for k in range(first * first):
                for lane in range(LANES):
                    put(here, k, lane, complex(get(real, k, lane), 0.0))
            for k in range(height * first):
                for lane in range(LANES):
                    value = complex(get(real_stores[2], k, lane), get(real_stores[2], k + height * first, lane))
                    put(kept, k, lane, value)
        for lane in range(LANES):
            most[rows[lane]] = growth[lane] + growth[LANES + lane]
            for i in range(first):
                for j in range(first):
                    block[rows[lane], i, j] = get(here, i * first + j, lane)
            for k in range(height):
                for j in range(first):
                    amplitudes[rows[lane], k, j] = get(kept, k * first + j, lane)
