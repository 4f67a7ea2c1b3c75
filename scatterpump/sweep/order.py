"""In which order the points of a plan are taken, and which of them a share has.  Integers in, integers out.

A plan's points are numbered in the order of its axes, the last one running fastest.  They are taken at

    point(position) = position * stride  modulo  count,     stride near count / golden ratio, coprime to count,

so that every stretch of positions is spread evenly over the map: the first hundred show all of it coarsely, a timed
sample is fair, and shares, which are stretches, take equally long.  A stretch of positions is named by its two ends,
whatever the number of shares it was computed with.
"""

from __future__ import annotations

from functools import cache
from math import gcd, sqrt

import numpy as np
from numpy.typing import NDArray

__all__ = ["points_at", "positions_of", "runs", "share_bounds"]

GOLDEN = (sqrt(5) - 1) / 2
SEARCHED = 100  # far more than the largest gap between numbers coprime to one of ten digits

Integers = NDArray[np.int64]


@cache
def _stride(count: int) -> int:
    """Return the number near `count` / golden ratio whose ratio to `count` is the hardest to approximate."""
    wanted = round(count * GOLDEN)
    near = range(max(1, wanted - SEARCHED), min(count, wanted + SEARCHED) + 1)
    return min((s for s in near if gcd(s, count) == 1), key=lambda s: (max(_quotients(s, count)), abs(s - wanted)))


def _quotients(part: int, whole: int) -> list[int]:
    """Return the partial quotients of the continued fraction of `part` / `whole`: small ones spread evenly."""
    quotients = []
    while part:
        quotients.append(whole // part)
        whole, part = part, whole % part
    return quotients


def points_at(positions: Integers, count: int) -> Integers:
    """Return the numbers of the points at `positions` of the order."""
    return positions * _stride(count) % count


def positions_of(points: Integers, count: int) -> Integers:
    """Return the positions at which `points` are taken: the inverse of `points_at`."""
    return points * pow(_stride(count), -1, count) % count if count > 1 else np.zeros_like(points)


def share_bounds(share: int, shares: int, count: int) -> tuple[int, int]:
    """Return the stretch [start, stop) of positions that `share`, counted from 1, has of `count`."""
    return count * (share - 1) // shares, count * share // shares


def runs(wanted: NDArray[np.bool_]) -> list[tuple[int, int]]:
    """Return the stretches [start, stop) in which `wanted` is true, in order."""
    edges = np.flatnonzero(np.diff(np.concatenate(([False], wanted, [False])).astype(np.int8)))
    return [(int(a), int(b)) for a, b in edges.reshape(-1, 2)]
