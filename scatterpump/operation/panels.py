"""Integrals over panels that are halved where it is needed (arrays only).

A panel is compared with its two halves; what they differ by is the error of the panel, and an overestimate of that of
the halves, which are kept.  Panels are measured many at a time, since whoever measures them is fastest that way.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import NDArray

__all__ = ["Integral", "Measure", "differentiation", "gauss", "integrate", "lobatto"]

Floats = NDArray[np.float64]
Measure = Callable[[Floats, Floats], Floats]
NARROWEST = 1e-13  # of the place itself: beyond it nodes are no longer told apart


@dataclass(frozen=True, eq=False)
class Integral:
    """Integrals of several functions over the same panels.

    Attributes
    ----------
    values, errors : (k,) float array
        The integrals, and the sums of what panels and their halves differ by.
    edges : (p+1,) float array
        Ends of the panels that were accepted, in order.
    measured : int
        Panels measured, halves included.
    converged : bool
        Whether the errors are as small as was asked.
    """

    values: Floats
    errors: Floats
    edges: Floats
    measured: int
    converged: bool


def integrate(
    measure: Measure, edges: Floats, *, absolute: Floats, relative: Floats | float = 0.0, budget: int = 4000
) -> Integral:
    """Integrate over the panels between `edges`, halving them until the errors are small enough.

    Parameters
    ----------
    measure : callable
        Starts and ends of p panels, shape (p,) each, to k integrals over each of them, shape (p, k).
    edges : (p+1,) float array
        The panels to begin with.
    absolute : (k,) float array
        Errors to be allowed.
    relative : float or (k,) float array
        Errors to be allowed as a share of the sum of the moduli over all panels; the larger allowance counts.
    budget : int
        Most panels to measure.
    """
    starts, ends = edges[:-1], edges[1:]
    values, sizes, errors = (np.zeros(len(absolute)) for _ in range(3))
    whole, measured = np.empty((0, len(absolute))), 0
    kept: list[Floats] = [edges[-1:]]
    while True:
        middles, fresh = (starts + ends) / 2, len(starts) - len(whole)  # at first the panels, then only their halves
        found = measure(
            np.concatenate([starts[:fresh], starts, middles]), np.concatenate([ends[:fresh], middles, ends])
        )
        measured += len(found)
        whole, left, right = np.split(np.concatenate([whole, found]), 3)
        off, size = np.abs(left + right - whole), np.abs(left) + np.abs(right)
        allowed = np.maximum(absolute, relative * (sizes + size.sum(axis=0)))
        refine = _worst((off / allowed).max(axis=1), 1.0 - float((errors / allowed).max()))
        refine &= ends - starts > NARROWEST * np.abs(ends)
        final = not refine.any() or measured + 2 * refine.sum() > budget
        keep = np.full(len(starts), True) if final else ~refine
        values = values + (left + right)[keep].sum(axis=0)
        sizes, errors = sizes + size[keep].sum(axis=0), errors + off[keep].sum(axis=0)
        kept += [starts[keep], middles[keep]]
        if final:
            return Integral(values, errors, np.sort(np.concatenate(kept)), measured, not refine.any())
        starts, ends, whole = (
            np.concatenate([first[refine], second[refine]])
            for first, second in ((starts, middles), (middles, ends), (left, right))
        )


def _worst(shares: Floats, left: float) -> NDArray[np.bool_]:
    """Which panels to halve: none if all errors fit into what is `left`, else all but the best that fill half of it."""
    shares = np.where(np.isfinite(shares), shares, np.inf)
    if shares.sum() <= left:
        return np.zeros(len(shares), dtype=bool)
    order = np.argsort(shares)
    result = np.zeros(len(shares), dtype=bool)
    result[order[np.cumsum(shares[order]) > left / 2]] = True
    return result


@cache
def gauss(count: int) -> tuple[Floats, Floats]:
    """Return nodes and weights of Gauss's rule on [-1, 1]."""
    nodes, weights = np.polynomial.legendre.leggauss(count)
    return nodes, weights


@cache
def lobatto(count: int) -> tuple[Floats, Floats]:
    """Return nodes and weights of the Gauss-Lobatto rule on [-1, 1], whose first and last node are the ends.

    M. Abramowitz, I. A. Stegun, Handbook of Mathematical Functions, 25.4.32 (citation from memory).
    """
    highest = np.polynomial.legendre.Legendre.basis(count - 1)
    nodes = np.concatenate([[-1.0], np.sort(highest.deriv().roots().real), [1.0]])
    return nodes, 2 / (count * (count - 1) * highest(nodes) ** 2)


@cache
def differentiation(count: int) -> Floats:
    """Return the matrix that differentiates the polynomial through values at the nodes of `lobatto`.

    Barycentric: J.-P. Berrut, L. N. Trefethen, SIAM Rev. 46, 501 (2004) (citation from memory).
    """
    nodes, _ = lobatto(count)
    apart = nodes[:, None] - nodes + np.eye(count)
    weights = 1 / apart.prod(axis=1)
    result = weights / weights[:, None] / apart
    np.fill_diagonal(result, 0.0)
    np.fill_diagonal(result, -result.sum(axis=1))
    return np.asarray(result)
