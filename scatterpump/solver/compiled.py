"""The elimination sweep compiled by numba: four systems at a time from the far end to the first block.

The same recursion as in `elimination`, on blocks given as lists of their elements (`Elements`), so that the blocks are
never formed for all systems at once.  A group of four goes on in real arithmetic as soon as its own imaginary parts
are below rounding.  Blocks whose pivots are small are inverted again with exchange of rows.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from scatterpump.solver.elimination import DROPPED, LOOK_EVERY
from scatterpump.solver.inverses import SMALL_PIVOT
from scatterpump.solver.lanes import PANEL, inner, inverted, inverted_with_pivots, subtract_product
from scatterpump.solver.simd import (
    LANES,
    constant,
    get,
    is_real,
    larger,
    load,
    minus_product,
    plus,
    product,
    put,
    scaled,
    size,
    store,
    tainted,
)

__all__ = ["swept"]


@inner
def _element(entries: Any, e: int, moved: Any) -> Any:
    """Element e of the list for a group of systems, as lanes; `moved` holds what is taken off those that move."""
    entry = entries[e]
    value = constant(moved, entry.real, entry.imag)
    return value if entry.place < 0 else minus_product(value, constant(moved, 1.0, 0.0), load(moved, entry.place))


@inner
def _clear(a: Any, count: int) -> None:
    zero = constant(a, 0.0, 0.0)
    for k in range(count):
        store(a, k, zero)


@inner
def _add_block(a: Any, layer: Any, entries: Any, moved: Any) -> None:
    """a += A_nn."""
    minus = constant(a, -1.0, 0.0)
    for e in range(layer.diagonal, layer.diagonal_end):
        at = entries[e].row * layer.width + entries[e].column
        store(a, at, minus_product(load(a, at), minus, _element(entries, e, moved)))


@inner
def _times_lower(a: Any, height: int, deep: int, b: Any, layer: Any, entries: Any, moved: Any) -> None:
    """b = -a A_n+1,n for a of shape (height, deep)."""
    w = layer.width
    _clear(b, height * w)
    for e in range(layer.lower, layer.lower_end):
        factor = _element(entries, e, moved)
        k, j = entries[e].row, entries[e].column
        for i in range(height):
            store(b, i * w + j, minus_product(load(b, i * w + j), load(a, i * deep + k), factor))


@inner
def _sandwich(inverse: Any, deep: int, here: Any, layer: Any, spare: Any, entries: Any, moved: Any) -> None:
    """here = -A_n,n+1 D^-1 A_n+1,n."""
    w = layer.width
    _times_lower(inverse, deep, deep, spare, layer, entries, moved)
    _clear(here, w * w)
    for e in range(layer.upper, layer.upper_end):
        factor = product(constant(here, -1.0, 0.0), _element(entries, e, moved))
        i, k = entries[e].row, entries[e].column
        for j in range(w):
            store(here, i * w + j, minus_product(load(here, i * w + j), factor, load(spare, k * w + j)))


@inner
def _picked(inverse: Any, deep: int, here: Any, layer: Any, spare: Any, entries: Any, moved: Any) -> None:
    """The same, element by element, where every row and every column is coupled to at most one other."""
    w, start, count = layer.width, layer.lower, layer.lower_end - layer.lower
    for f in range(count):
        store(spare, f, _element(entries, start + f, moved))
    if count < w or layer.upper_end - layer.upper < w:
        _clear(here, w * w)
    for e in range(layer.upper, layer.upper_end):
        factor = product(constant(here, -1.0, 0.0), _element(entries, e, moved))
        i, k = entries[e].row * w, entries[e].column * deep
        for f in range(count):
            value = product(load(inverse, k + entries[start + f].row), load(spare, f))
            store(here, i + entries[start + f].column, product(factor, value))


@inner
def _plain(inverse: Any, deep: int, here: Any, layer: Any, entries: Any) -> None:
    """The same where the couplings are real and stand still."""
    w, start, end = layer.width, layer.lower, layer.lower_end
    if end - start < w or layer.upper_end - layer.upper < w:
        _clear(here, w * w)
    for e in range(layer.upper, layer.upper_end):
        factor, i, k = -entries[e].real, entries[e].row * w, entries[e].column * deep
        for f in range(start, end):
            store(here, i + entries[f].column, scaled(load(inverse, k + entries[f].row), factor * entries[f].real))


@inner
def _form(here: Any, before: Any, n: int, spare: Any, layers: Any, entries: Any, moved: Any) -> None:
    """here = D_n from before = D_n+1^-1."""
    layer = layers[n]
    if n == len(layers) - 1:
        _clear(here, layer.width * layer.width)
    elif layer.plain:
        _plain(before, layers[n + 1].width, here, layer, entries)
    elif layer.picks:
        _picked(before, layers[n + 1].width, here, layer, spare, entries, moved)
    else:
        _sandwich(before, layers[n + 1].width, here, layer, spare, entries, moved)
    _add_block(here, layer, entries, moved)


@inner
def _worst(growth: Any, a: Any, count: int) -> None:
    """Growth, or the largest part of the elements of `a` if that is larger; not a number where they are not finite."""
    most, doubt = load(growth, 0), load(growth, 1)
    also, twice = most, doubt
    for k in range(0, count - 1, 2):  # two at a time: each waits for its own predecessor only
        one, two = load(a, k), load(a, k + 1)
        most, also = larger(most, size(one)), larger(also, size(two))
        doubt, twice = tainted(doubt, one), tainted(twice, two)
    last = load(a, count - 1)
    store(growth, 0, larger(larger(most, also), size(last)))
    store(growth, 1, plus(tainted(doubt, last), twice))


@inner
def _has_small_pivot(pivots: Any, unit: float) -> bool:
    for lane in range(LANES):
        if not pivots[lane] * unit <= SMALL_PIVOT:
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
def _add_wanted(kept: Any, layer: Any, entries: Any, height: int) -> None:
    """T += S_n; among real numbers the imaginary parts have rows of their own, after the real ones."""
    minus = constant(kept, -1.0, 0.0)
    for e in range(layer.wanted, layer.wanted_end):
        entry = entries[e]
        at = entry.row * layer.width + entry.column
        store(kept, at, minus_product(load(kept, at), minus, constant(kept, entry.real, entry.imag)))
        if is_real(kept):
            at += height * layer.width
            store(kept, at, minus_product(load(kept, at), minus, constant(kept, entry.imag, 0.0)))


@inner
def _carry(
    kept: Any, inverse: Any, spare: Any, deep: int, tall: int, height: int, layer: Any, entries: Any, moved: Any
) -> None:
    """T_n = S_n - T_n+1 D_n+1^-1 A_n+1,n in place of T_n+1."""
    _clear(spare, tall * deep)
    origin = deep - deep  # a literal 0 would be compiled apart
    subtract_product(spare, origin, deep, kept, origin, deep, inverse, origin, deep, tall, deep, deep)
    for k in range(tall * deep):
        store(spare, k, product(load(spare, k), constant(spare, -1.0, 0.0)))
    _times_lower(spare, tall, deep, kept, layer, entries, moved)
    _add_wanted(kept, layer, entries, height)


@inner
def _descend(
    stores: Any,
    growth: Any,
    n: int,
    tall: int,
    height: int,
    unit: float,
    real_below: int,
    layers: Any,
    entries: Any,
    moved: Any,
) -> Any:
    """Go down from D_n to D_0, or to the first D that is real; return its layer, D, and the inverse it came from.

    `stores` are D_n, a place for its successor, T_n and spare lanes.  T has `height` complex rows, kept as `tall` rows.
    """
    here, before, kept, spare = stores
    pivots = np.zeros(LANES)
    while n > 0:
        deep = layers[n].width
        if not is_real(here) and n < real_below and n % LOOK_EVERY == 0 and _is_real_to_rounding(here, deep * deep):
            break
        store(pivots, 0, inverted(here, deep, spare, constant(growth, 0.0, 0.0)))
        if _has_small_pivot(pivots, unit):
            _form(here, before, n, spare, layers, entries, moved)
            inverted_with_pivots(here, deep)
        _worst(growth, here, deep * deep)
        if tall > 0:
            _carry(kept, here, spare, deep, tall, height, layers[n - 1], entries, moved)
        _form(before, here, n - 1, spare, layers, entries, moved)
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


@inner
def _take_moving(moving: Any, rows: Any, parts: int, moved: Any) -> None:
    """What is taken off the moving elements of a group of systems, as lanes."""
    for k in range(len(moving)):
        for lane in range(LANES):
            re, im = moving[k, rows[lane] * parts], moving[k, rows[lane] * parts + parts - 1]
            put(moved, k, lane, complex(re, im * (parts - 1)))  # where all is real there are no imaginary parts


@inner
def _give(kept: Any, real: Any, count: int, imaginary: int) -> None:
    """Real lanes back into a store of complex ones; their imaginary parts lie `imaginary` lanes later, or nowhere."""
    for k in range(count):
        for lane in range(LANES):
            put(kept, k, lane, complex(get(real, k, lane), get(real, k + imaginary, lane) if imaginary else 0.0))


@njit(cache=True, nogil=True)
def swept(
    layers: Any,
    entries: Any,
    moving: Any,
    parts: int,
    height: int,
    unit: float,
    real_below: int,
    block: Any,
    amplitudes: Any,
    most: Any,
) -> None:
    """Eliminate all blocks but the first, and write D_0, T_0 and the growth.

    Parameters
    ----------
    layers, entries : record arrays
        The elements of the diagonal, lower and upper blocks and of S, and where they are (`elements.tabled`).
    moving : (elements, parts * n) float array
        What is taken off the elements that move; complex numbers as two parts.
    height : int
        Rows of T.
    unit : float
        A typical energy.
    real_below : int
        The first so many blocks are real, with what couples them.
    block, amplitudes, most : (n, w, w), (n, height, w) complex and (n,) float arrays
        Results.
    """
    count, last, first = len(most), len(layers) - 1, layers[0].width
    widest = 0
    for n in range(last + 1):
        widest = max(widest, layers[n].width)
    open_stores = _stores(np.complex128, LANES, height, widest)
    real_stores = _stores(np.float64, LANES, 2 * height, widest)
    moved = np.empty(LANES * len(moving), np.complex128)
    real_moved = np.empty(len(moved), np.float64)
    growth = np.empty(2 * LANES)
    rows = np.empty(LANES, np.int64)
    for start in range(0, count, LANES):
        for lane in range(LANES):  # the last group is filled up with its last system
            rows[lane] = min(start + lane, count - 1)
            growth[lane], growth[LANES + lane] = 0.0, 0.0
        _take_moving(moving, rows, parts, moved)
        here, before, kept, spare = open_stores
        _clear(kept, height * layers[last].width)
        _add_wanted(kept, layers[last], entries, height)
        _form(here, before, last, spare, layers, entries, moved)
        n, here, before = _descend(open_stores, growth, last, height, height, unit, real_below, layers, entries, moved)
        if n > 0:
            w = layers[n].width
            _take_real(moved, len(moving), real_moved, 0)
            _take_real(here, w * w, real_stores[0], 0)
            if n < last:
                _take_real(before, layers[n + 1].width ** 2, real_stores[1], 0)
            _take_real(kept, height * w, real_stores[2], height * w)
            _, real, _ = _descend(
                real_stores, growth, n, 2 * height, height, unit, real_below, layers, entries, real_moved
            )
            _give(here, real, first * first, 0)
            _give(kept, real_stores[2], height * first, height * first)
        for lane in range(LANES):
            most[rows[lane]] = max(1.0, growth[lane] * unit) + growth[LANES + lane]
            for i in range(first):
                for j in range(first):
                    block[rows[lane], i, j] = get(here, i * first + j, lane)
            for k in range(height):
                for j in range(first):
                    amplitudes[rows[lane], k, j] = get(kept, k * first + j, lane)
