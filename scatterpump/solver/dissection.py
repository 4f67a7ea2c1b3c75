"""In which order to eliminate the unknowns of a wide sparse system: nested dissection of its graph (arrays only).

Each part is cut in two by a layer of equal distance from one of two far ends, and the layer comes after both halves
(A. George, SIAM J. Numer. Anal. 10, 345 (1973), citation from memory).  All parts are cut in the same round.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["dissected"]

Indices = NDArray[np.int64]
LEAF = 4  # parts of so many unknowns are left whole: 16 fill in 6 % more on a square lattice
MIDDLE = 0.1  # the layer is the thinnest of those so far from the part's middle, as a share of the part
ROUNDS = 36  # keys of base 3 fit into 64 bits
HALF, OTHER, CUT = 0, 1, 2


def dissected(pattern: Any) -> Indices:
    """Return the unknowns in the order in which to eliminate them.

    Parameters
    ----------
    pattern : (n, n) sparse matrix
        Its places matter, its values do not.
    """
    from scipy.sparse import csr_matrix

    graph = csr_matrix((np.ones(pattern.nnz), pattern.indices, pattern.indptr), shape=pattern.shape)
    graph, left = graph + graph.T, np.arange(pattern.shape[0])
    keys = np.zeros(len(left), dtype=np.int64)
    for _ in range(ROUNDS):
        keys *= 3
        if left.size:
            digits, whole = _halves(graph)
            keys[left] += digits
            kept = (digits != CUT) & ~whole
            graph, left = graph[kept][:, kept], left[kept]
    return np.argsort(keys, kind="stable")


def _halves(graph: Any) -> tuple[Indices, NDArray[np.bool_]]:
    """For every unknown the half of its connected part, or the cut, and whether the part is left whole."""
    from scipy.sparse.csgraph import connected_components

    count, part = connected_components(graph, directed=False)
    some = np.full(count, len(part))
    np.minimum.at(some, part, np.arange(len(part)))
    end = _farthest(part, _distances(graph, some), -np.arange(len(part)))
    level = _distances(graph, end)
    here = _cut(part, level)
    other_level = _distances(graph, _farthest(part, level, np.arange(len(part))))
    there = _cut(part, other_level)
    level = np.where((there[1] < here[1])[part], other_level, level)
    cut, size = np.where(there[1] < here[1], there, here)
    digits = np.where(level < cut[part], HALF, np.where(level > cut[part], OTHER, CUT))
    whole = (np.bincount(part) <= LEAF) | ~np.isfinite(size)
    digits[whole[part]] = HALF
    return _thinned(graph, digits), whole[part]


def _cut(part: Indices, level: Indices) -> NDArray[np.float64]:
    """The thinnest layer near the middle of each part, and its size: infinite if the part has too few layers."""
    count, depth = int(part.max()) + 1, int(level.max()) + 1
    sizes = np.bincount(part * depth + level, minlength=count * depth).reshape(count, depth)
    off_middle = np.abs((np.cumsum(sizes, axis=1) - sizes / 2) / sizes.sum(axis=1, keepdims=True) - 0.5)
    cost = sizes + off_middle + np.where(off_middle <= MIDDLE, 0, sizes.max() + 1)
    cost[:, 0] = np.inf
    cost[np.arange(depth) >= (sizes > 0).sum(axis=1, keepdims=True) - 1] = np.inf
    cut = cost.argmin(axis=1)
    size = np.where(np.isfinite(cost.min(axis=1)), sizes[np.arange(count), cut], np.inf)
    return np.array([cut, size])


def _thinned(graph: Any, digits: Indices) -> Indices:
    """Give those of a cut that touch nothing on its other side to the half."""
    touched = graph @ (digits == OTHER).astype(float) > 0
    return np.where((digits == CUT) & ~touched, HALF, digits)


def _farthest(part: Indices, level: Indices, preferred: Indices) -> Indices:
    """An unknown of the largest level in each part: of several the one that is preferred most."""
    order = np.lexsort((preferred, level, part))
    return order[np.cumsum(np.bincount(part)) - 1]


def _distances(graph: Any, starts: Indices) -> Indices:
    """Hops from the start in the same connected part."""
    from scipy.sparse.csgraph import dijkstra

    return np.asarray(dijkstra(graph, directed=False, unweighted=True, indices=starts, min_only=True)).astype(int)
