"""Inverses and products of matrices whose elements are lanes: four systems at a time, compiled by numba.

A matrix is a store (`simd`) with rows one after the other.  The inverse is Gauss-Jordan elimination without exchange
of rows, which all lanes would have to agree upon, in panels, so that most of the work is products that stay in
registers.  It tells how large the inverses of its pivots became; a matrix for which that is too large is to be
inverted again by `inverted_with_pivots`, lane by lane.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from scatterpump.solver.simd import (
    LANES,
    constant,
    get,
    is_real,
    larger,
    load,
    minus_product,
    product,
    put,
    reciprocal,
    size,
    store,
)

__all__ = ["inner", "inverted", "inverted_with_pivots", "subtract_product"]

inner = njit(no_cpython_wrapper=True, no_cfunc_wrapper=True)  # called by compiled code only: less to compile
PANEL = 8
UNDIVIDED = 16  # matrices up to this size are not worth panels


@inner
def _tile_1x1(c: Any, ci: int, a: Any, ai: int, b: Any, bi: int, wide: int, depth: int) -> None:
    total = load(c, ci)
    for k in range(depth):
        total = minus_product(total, load(a, ai + k), load(b, bi + k * wide))
    store(c, ci, total)


@inner
def _tile_2x2(c: Any, ci: int, row: int, a: Any, ai: int, deep: int, b: Any, bi: int, wide: int, depth: int) -> None:
    upper_left, upper_right = load(c, ci), load(c, ci + 1)
    lower_left, lower_right = load(c, ci + row), load(c, ci + row + 1)
    for k in range(depth):
        upper, lower = load(a, ai + k), load(a, ai + deep + k)
        left, right = load(b, bi + k * wide), load(b, bi + k * wide + 1)
        upper_left = minus_product(upper_left, upper, left)
        upper_right = minus_product(upper_right, upper, right)
        lower_left = minus_product(lower_left, lower, left)
        lower_right = minus_product(lower_right, lower, right)
    store(c, ci, upper_left)
    store(c, ci + 1, upper_right)
    store(c, ci + row, lower_left)
    store(c, ci + row + 1, lower_right)


@inner
def _tile_3x3(c: Any, ci: int, row: int, a: Any, ai: int, deep: int, b: Any, bi: int, wide: int, depth: int) -> None:
    c00, c01, c02 = load(c, ci), load(c, ci + 1), load(c, ci + 2)
    c10, c11, c12 = load(c, ci + row), load(c, ci + row + 1), load(c, ci + row + 2)
    c20, c21, c22 = load(c, ci + 2 * row), load(c, ci + 2 * row + 1), load(c, ci + 2 * row + 2)
    for k in range(depth):
        at = bi + k * wide
        b0, b1, b2 = load(b, at), load(b, at + 1), load(b, at + 2)
        a0, a1, a2 = load(a, ai + k), load(a, ai + deep + k), load(a, ai + 2 * deep + k)
        c00, c01, c02 = minus_product(c00, a0, b0), minus_product(c01, a0, b1), minus_product(c02, a0, b2)
        c10, c11, c12 = minus_product(c10, a1, b0), minus_product(c11, a1, b1), minus_product(c12, a1, b2)
        c20, c21, c22 = minus_product(c20, a2, b0), minus_product(c21, a2, b1), minus_product(c22, a2, b2)
    store(c, ci, c00)
    store(c, ci + 1, c01)
    store(c, ci + 2, c02)
    store(c, ci + row, c10)
    store(c, ci + row + 1, c11)
    store(c, ci + row + 2, c12)
    store(c, ci + 2 * row, c20)
    store(c, ci + 2 * row + 1, c21)
    store(c, ci + 2 * row + 2, c22)


@inner
def subtract_product(
    c: Any,
    ci: int,
    row: int,
    a: Any,
    ai: int,
    deep: int,
    b: Any,
    bi: int,
    wide: int,
    rows: int,
    columns: int,
    depth: int,
) -> None:
    """c -= a b for parts of stores: from ci, ai, bi on, with `row`, `deep`, `wide` lanes from one row to the next."""
    side = 3 if is_real(c) else 2
    tall, broad = rows - rows % side, columns - columns % side
    for i in range(0, tall, side):
        for j in range(0, broad, side):
            if is_real(c):
                _tile_3x3(c, ci + i * row + j, row, a, ai + i * deep, deep, b, bi + j, wide, depth)
            else:
                _tile_2x2(c, ci + i * row + j, row, a, ai + i * deep, deep, b, bi + j, wide, depth)
        for ii in range(i, i + side):
            for j in range(broad, columns):
                _tile_1x1(c, ci + ii * row + j, a, ai + ii * deep, b, bi + j, wide, depth)
    for i in range(tall, rows):
        for j in range(columns):
            _tile_1x1(c, ci + i * row + j, a, ai + i * deep, b, bi + j, wide, depth)


@inner
def _pivoted(a: Any, first: int, row: int, w: int, k: int, end: int, worst: Any) -> Any:
    """Make the rows from k to `end` what Gauss-Jordan makes of them, with their own pivots, in place.

    Returns the largest inverse of a pivot, or `worst` if that is larger.
    """
    for p in range(k, end):
        top = first + p * row
        pivot = reciprocal(load(a, top + p))
        worst = larger(worst, size(pivot))
        store(a, top + p, constant(a, 1.0, 0.0))
        for j in range(w):
            store(a, top + j, product(load(a, top + j), pivot))
        for i in range(k, end):
            if i != p:
                _less_one(a, first + i * row, top, p, w)
    return worst


@inner
def _less_one(a: Any, here: int, top: int, k: int, w: int) -> None:
    """Take the pivot row k, which begins at `top`, off the row that begins at `here`."""
    factor = load(a, here + k)
    store(a, here + k, constant(a, 0.0, 0.0))
    for j in range(w):
        store(a, here + j, minus_product(load(a, here + j), factor, load(a, top + j)))


@inner
def _less_few(a: Any, here: int, top: int, row: int, k: int, count: int, w: int) -> None:
    """Take one, two or three pivot rows off one row."""
    zero = constant(a, 0.0, 0.0)
    one, two, three = load(a, here + k), zero, zero
    if count > 1:
        two = load(a, here + k + 1)
    if count > 2:
        three = load(a, here + k + 2)
    for p in range(k, k + count):
        store(a, here + p, zero)
    for j in range(w):
        value = minus_product(load(a, here + j), one, load(a, top + j))
        if count > 1:
            value = minus_product(value, two, load(a, top + row + j))
        if count > 2:
            value = minus_product(value, three, load(a, top + 2 * row + j))
        store(a, here + j, value)


@inner
def _less_two(a: Any, here: int, top: int, row: int, k: int, w: int) -> None:
    """Take two pivot rows off two rows."""
    zero = constant(a, 0.0, 0.0)
    there, low = here + row, top + row
    f00, f01, f10, f11 = load(a, here + k), load(a, here + k + 1), load(a, there + k), load(a, there + k + 1)
    for p in range(k, k + 2):
        store(a, here + p, zero)
        store(a, there + p, zero)
    for j in range(w):
        one, two = load(a, top + j), load(a, low + j)
        store(a, here + j, minus_product(minus_product(load(a, here + j), f00, one), f01, two))
        store(a, there + j, minus_product(minus_product(load(a, there + j), f10, one), f11, two))


@inner
def _less_three(a: Any, here: int, top: int, row: int, k: int, w: int) -> None:
    """Take three pivot rows off three rows."""
    zero = constant(a, 0.0, 0.0)
    then, last, mid, low = here + row, here + 2 * row, top + row, top + 2 * row
    f00, f01, f02 = load(a, here + k), load(a, here + k + 1), load(a, here + k + 2)
    f10, f11, f12 = load(a, then + k), load(a, then + k + 1), load(a, then + k + 2)
    f20, f21, f22 = load(a, last + k), load(a, last + k + 1), load(a, last + k + 2)
    for p in range(k, k + 3):
        store(a, here + p, zero)
        store(a, then + p, zero)
        store(a, last + p, zero)
    for j in range(w):
        one, two, three = load(a, top + j), load(a, mid + j), load(a, low + j)
        c0 = minus_product(minus_product(load(a, here + j), f00, one), f01, two)
        c1 = minus_product(minus_product(load(a, then + j), f10, one), f11, two)
        c2 = minus_product(minus_product(load(a, last + j), f20, one), f21, two)
        store(a, here + j, minus_product(c0, f02, three))
        store(a, then + j, minus_product(c1, f12, three))
        store(a, last + j, minus_product(c2, f22, three))


@inner
def _inverted_small(a: Any, first: int, row: int, w: int, worst: Any) -> Any:
    """Invert a small matrix in place, a few pivots at a time: so many multiples of rows stay in registers.

    Returns the largest inverse of a pivot, or `worst` if that is larger.
    """
    side = 3 if is_real(a) else 2
    whole = w - w % side
    for k in range(0, whole, side):
        top = first + k * row
        worst = _pivoted(a, first, row, w, k, k + side, worst)
        for i in range(0, whole, side):
            if i != k:
                if is_real(a):
                    _less_three(a, first + i * row, top, row, k, w)
                else:
                    _less_two(a, first + i * row, top, row, k, w)
        for i in range(whole, w):
            _less_few(a, first + i * row, top, row, k, side, w)
    if whole < w:
        worst = _pivoted(a, first, row, w, whole, w, worst)
        for i in range(whole):
            _less_few(a, first + i * row, first + whole * row, row, whole, w - whole, w)
    return worst


@inner
def inverted(a: Any, w: int, spare: Any, worst: Any) -> Any:
    """Invert a matrix of `w` rows in place, and return the largest inverse of a pivot or `worst` if that is larger.

    `spare` is a store for at least PANEL (2 w + PANEL) lanes.
    """
    origin = w - w  # a literal 0 would be a type of its own, compiled apart
    if w <= UNDIVIDED:
        return _inverted_small(a, origin, w, w, worst)
    zero = constant(a, 0.0, 0.0)
    for first in range(0, w, PANEL):
        b = min(PANEL, w - first)
        columns, pivots = b * w, 2 * b * w
        for i in range(b):
            for j in range(b):
                store(spare, pivots + i * b + j, load(a, (first + i) * w + first + j))
        worst = _inverted_small(spare, pivots, b, b, worst)
        for k in range(b * b):  # the sign that `subtract_product` takes off again
            store(spare, pivots + k, minus_product(zero, constant(a, 1.0, 0.0), load(spare, pivots + k)))
        for i in range(b):
            for j in range(w):
                store(spare, i * w + j, load(a, (first + i) * w + j))
                store(a, (first + i) * w + j, zero)
            for j in range(b):
                store(spare, i * w + first + j, constant(a, 1.0 if i == j else 0.0, 0.0))
        subtract_product(a, first * w, w, spare, pivots, b, spare, origin, w, b, w, b)
        for i in range(w):
            if i < first or i >= first + b:
                for j in range(b):
                    store(spare, columns + i * b + j, load(a, i * w + first + j))
                    store(a, i * w + first + j, zero)
        subtract_product(a, origin, w, spare, columns, b, a, first * w, w, first, w, b)
        end = first + b
        subtract_product(a, end * w, w, spare, columns + end * b, b, a, first * w, w, w - end, w, b)
    return worst


@inner
def inverted_with_pivots(a: Any, w: int) -> None:
    """Invert a matrix of `w` rows in place, lane by lane, with exchange of rows."""
    matrix = np.empty((w, w), a.dtype)
    order = np.empty(w, np.int64)
    for lane in range(LANES):
        for i in range(w):
            for j in range(w):
                matrix[i, j] = get(a, i * w + j, lane)
        _gauss_jordan(matrix, order)
        for i in range(w):
            for j in range(w):
                put(a, i * w + order[j], lane, matrix[i, j])


@inner
def _gauss_jordan(matrix: Any, order: Any) -> None:
    """Invert in place; column order[j] of the inverse is left in column j."""
    w = len(matrix)
    for k in range(w):
        order[k] = k
    for k in range(w):
        best = k
        for i in range(k + 1, w):
            if abs(matrix[i, k]) > abs(matrix[best, k]):
                best = i
        for j in range(w):
            matrix[k, j], matrix[best, j] = matrix[best, j], matrix[k, j]
        order[k], order[best] = order[best], order[k]
        pivot = matrix[k, k]
        matrix[k, k] = 1.0
        for j in range(w):  # a vanishing pivot leaves what is not finite: the growth monitor sees it
            matrix[k, j] = matrix[k, j] / pivot if pivot != 0 else matrix[k, j] * np.inf
        for i in range(w):
            if i != k:
                factor = matrix[i, k]
                matrix[i, k] = 0.0
                for j in range(w):
                    matrix[i, j] -= factor * matrix[k, j]
