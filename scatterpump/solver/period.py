"""Where a list of layers repeats: the longest run of equal cells (arrays only).

Layer n is given by its own block and the block that couples it to layer n + 1, each with all that is known about it
along the cycle: Fourier coefficients, or values at enough phases.  Two blocks are the same if they agree element by
element; elements that differ by rounding only count as equal.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Run", "blocks_held", "longest_run"]

Complex = NDArray[np.complex128]
Labels = NDArray[np.int64]
Counted = NDArray[np.bool_]
SAME = 1e-9  # relative: far above what rounding does to a coefficient, far below what anybody modulates by
ROUNDING = 1e-13  # of the largest element: what a coefficient that should vanish may be


@dataclass(frozen=True)
class Run:
    """Equal cells one after the other.

    Attributes
    ----------
    first : int
        The first layer of the first cell.
    length : int
        Layers in a cell.
    repeats : int
        How many cells there are, at least 2.
    """

    first: int
    length: int
    repeats: int

    @property
    def layers(self) -> range:
        """The layers of all cells together."""
        return range(self.first, self.first + self.length * self.repeats)


def longest_run(
    layers: Sequence[Complex],
    hops: Sequence[Complex],
    counted: tuple[Counted, Counted],
    *,
    longest_cell: int,
    same: float = SAME,
) -> Run | None:
    """Return the run of equal cells that holds most of the `counted` blocks, with the shortest cell that does.

    Parameters
    ----------
    layers : L arrays of shape (s, w_n, w_n)
        Blocks of the layers themselves, s values or coefficients each.
    hops : L-1 arrays of shape (s, w_n+1, w_n)
        Blocks that couple layer n to layer n + 1.
    counted : (L,) and (L-1,) bool arrays
        The blocks that matter: of the layers, and of the hops.
    longest_cell : int
        Most layers that a cell may have.
    same : float
        How much equal elements may differ, relative to their size.

    Returns
    -------
    Run or None
        None if no two neighbouring cells are equal, or none that hold a counted block.
    """
    scale = max((float(np.abs(block).max(initial=0.0)) for block in (*layers, *hops)), default=0.0)
    own = _labels(layers, scale, same)
    if len(np.unique(own)) == len(own):
        return None
    ahead = _labels(hops, scale, same)
    best, most = None, 0
    for length in range(1, min(longest_cell, len(own) // 2) + 1):
        for run in _runs(own, ahead, length):
            held = blocks_held(run, counted)
            if held > most:
                best, most = run, held
    return best


def blocks_held(run: Run, counted: tuple[Counted, Counted]) -> int:
    """Return how many of the `counted` blocks a run holds; the hop out of its last layer is none of its own."""
    layers, hops = counted
    return int(layers[run.first : run.layers.stop].sum() + hops[run.first : run.layers.stop - 1].sum())


def _runs(own: Labels, ahead: Labels, length: int) -> list[Run]:
    """All longest runs of cells of `length` layers: stretches over which layers and hops are those a cell later."""
    same = own[:-length] == own[length:]
    linked = same[:-1] & same[1:] & (ahead[:-length] == ahead[length:])
    starts = np.flatnonzero(same & ~np.concatenate([[False], linked]))
    ends = np.flatnonzero(same & ~np.concatenate([linked, [False]])) + 1
    stretches = zip(starts.tolist(), (ends - starts).tolist(), strict=True)
    return [Run(start, length, 1 + equal // length) for start, equal in stretches if equal >= length]


def _labels(blocks: Sequence[Complex], scale: float, same: float) -> Labels:
    """Numbers that are equal for equal blocks."""
    by_shape: dict[tuple[int, ...], list[int]] = {}
    for n, block in enumerate(blocks):
        by_shape.setdefault(block.shape, []).append(n)
    labels, count = np.zeros(len(blocks), dtype=np.int64), 0
    for members in by_shape.values():
        rows = np.array([blocks[n].ravel() for n in members])
        for left in _neighbours(rows, scale, same):
            while left.size:
                equal = np.array([True]) if left.size == 1 else _same(rows[left], rows[left[0]], scale, same)
                labels[np.array(members)[left[equal]]] = count
                left, count = left[~equal], count + 1
    return labels


def _same(rows: Complex, row: Complex, scale: float, same: float) -> NDArray[np.bool_]:
    """Which of `rows` agree with `row`, element by element."""
    allowed = same * np.maximum(np.abs(rows), np.abs(row)) + ROUNDING * scale
    return np.asarray((np.abs(rows - row) <= allowed).all(axis=1))


def _neighbours(rows: Complex, scale: float, same: float) -> list[Labels]:
    """Positions in groups: rows that agree are in one group, as a weighted sum of their elements is nearly equal."""
    parts = np.concatenate([rows.real, rows.imag], axis=1)
    weights = 1 + np.arange(1, parts.shape[1] + 1) * 0.6180339887498949 % 1  # from 1 to 2, no two alike
    allowed = 2 * (same * np.abs(parts).sum(axis=1).max() + ROUNDING * scale * parts.shape[1])
    sums = parts @ weights
    order = np.argsort(sums, kind="stable")
    return np.split(order, np.flatnonzero(np.diff(sums[order]) > allowed) + 1)
