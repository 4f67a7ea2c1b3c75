"""Branch and bound on the (k, phi) torus: how near the bands of a family H(k, phi) come to zero and to each other.

Energies count from the Fermi level, so n bands are negative.  The two sides f_+ = E_{n+1} and f_- = -E_n are
distances from it, and f_+ + f_- is the direct gap.  The torus is covered by boxes |h_k| <= a_k, |h_phi| <= a_phi
about centres c where H, H_k and H_phi are known.  By Courant-Fischer E_{n+1}(c+h) is at least the lowest level of
H(c+h) compressed to the empty states of the centre: filled levels only push it up, so that the repulsion of the two
bands across the gap costs nothing.  Split the empty states into the m lowest (levels from e_0 on) and the rest (from
e_m on).  With the slope v = <u|H'|u> of the lowest, R = U_m^+ H' U_m - v, B = U_m^+ H' U_rest, and, by Taylor and
Weyl,

    second = sup|H_kk| a_k^2/2 + sup|H_kphi| a_k a_phi + sup|H_phiphi| a_phi^2/2,
    x = |H_k| a_k + |H_phi| a_phi + second,
    r = |R_k| a_k + |R_phi| a_phi,
    b = |B_k| a_k + |B_phi| a_phi + second,

the compressed matrix is bounded from below by [[e_0 + v.h - r - second, b], [b, e_m - x]], whose lower eigenvalue gives

    E_{n+1}(c+h) >= e_0 + v.h - r - second - y,    y = (sqrt(s^2 + 4 b^2) - s)/2,    s = e_m - e_0 - 2x,

for every m; Weyl's e_0 - x holds as well, and the best counts.  f_- is the same for -H.  As the linear term is exact,
the error is of second order in the size of the box, with degenerate bands too (m > 1).  A box that is not good enough
is cut in three, whose middle needs no new eigenproblem.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

__all__ = ["Cover", "Found", "search"]

Reals = NDArray[np.float64]
Family = Callable[[Reals], NDArray[np.complex128]]

CHUNK = 1 << 20
TINY = float(np.finfo(float).tiny)
ROUNDED = 1e-9


@dataclass(frozen=True, eq=False)
class Cover:
    """The boxes to begin with.

    Attributes
    ----------
    centre, half : (n, 2) float arrays
        Centres and half widths, in the order k, phi.
    stretch : (n,) int array
        Which row of the bounds holds in each box.
    mirrored : bool
        True if the bands at -k are those at k: boxes centred outside 0 <= k <= pi are then left out.
    """

    centre: Reals
    half: Reals
    stretch: NDArray[np.int64]
    mirrored: bool


@dataclass(frozen=True, eq=False)
class Found:
    """Brackets of the minima of f_+, f_- and the direct gap.

    Attributes
    ----------
    lower, upper : (3,) float arrays
        Bound over the whole torus, and the smallest sample; inf for what does not exist.
    place : (3, 2) float array
        Where that sample was taken.
    evaluations : int
        Eigenproblems solved.
    """

    lower: Reals
    upper: Reals
    place: Reals
    evaluations: int


class _Boxes(NamedTuple):
    """Boxes (n of them, s sides, clusters of up to M states) with what one eigenproblem at each centre tells."""

    centre: Reals  # (n, 2)
    half: Reals  # (n, 2)
    stretch: NDArray[np.int64]  # (n,)
    speed: Reals  # (n, 2), bounds on |H_k|, |H_phi|
    level: Reals  # (n, s), e_0
    slope: Reals  # (n, s, 2), v
    mixing: Reals  # (n, s, M, 2), |R| for m = 1 ... M
    coupling: Reals  # (n, s, M, 2), |B|
    ahead: Reals  # (n, s, M), e_m - e_0

    def where(self, chosen: NDArray[np.bool_]) -> _Boxes:
        return _Boxes._make(column[chosen] for column in self)


def search(
    family: Family, bends: Reals, cover: Cover, *, filled: int, accuracy: float, floor: float, budget: int
) -> Found:
    """Bracket each side to `accuracy` times the smaller one, and the direct gap to `accuracy` times itself.

    The search ends early once a sample comes within `floor` of zero, or when the `budget` of eigenproblems is spent;
    the bounds hold all the same.

    Parameters
    ----------
    family : callable
        Centres (n, 2) to H, H_k, H_phi there, shape (n, 3, q, q).
    bends : (stretches, 3) float array
        Bounds on |H_kk|, |H_kphi|, |H_phiphi|.
    cover : Cover
    filled : int
        Number n of bands that are to lie below zero.
    """
    boxes = _measured(family, cover.centre, cover.half, cover.stretch, filled)
    spent, sides = len(boxes.half), boxes.level.shape[1]
    settled = upper = np.full(2 * sides - 1, np.inf)
    place = np.zeros((len(upper), 2))
    while True:
        bounds, values = _bounds(boxes, bends), _with_gap(boxes.level)
        place = np.where((values.min(axis=0) < upper)[:, None], boxes.centre[values.argmin(axis=0)], place)
        upper = np.minimum(upper, values.min(axis=0))
        nearest = upper[:sides].min()
        rough = (bounds < upper - accuracy * np.append(np.full(sides, nearest), upper[sides:])).any(axis=1)
        settled = np.minimum(settled, bounds[~rough].min(axis=0, initial=np.inf))
        if not rough.any() or nearest <= floor or spent + 2 * rough.sum() > budget:
            lower = np.minimum(settled, bounds[rough].min(axis=0, initial=np.inf))
            return _found(lower, upper, place, spent, filled)
        middle, centre, half, stretch = _thirds(boxes.where(rough), cover.mirrored)
        boxes = _joined(middle, _measured(family, centre, half, stretch, filled))
        spent += len(centre)


def _found(lower: Reals, upper: Reals, place: Reals, spent: int, filled: int) -> Found:
    """Put the quantities that exist in the order f_+, f_-, gap."""
    if len(lower) == 3:
        return Found(lower, upper, place, spent)
    lone = np.array([filled == 0, filled > 0, False])
    return Found(np.where(lone, lower, np.inf), np.where(lone, upper, np.inf), np.repeat(place, 3, axis=0), spent)


def _with_gap(sides: Reals) -> Reals:
    return sides if sides.shape[1] == 1 else np.column_stack([sides, sides.sum(axis=1)])


def _bounds(boxes: _Boxes, bends: Reals) -> Reals:
    """Return lower bounds over each box, shape (n, 1 or 3)."""
    k, phi = boxes.half.T
    second = (bends[boxes.stretch] * np.column_stack([k * k / 2, k * phi, phi * phi / 2])).sum(axis=1)
    weyl = (boxes.speed * boxes.half).sum(axis=1) + second
    loss = _loss(boxes, second, weyl)
    reach = np.minimum(weyl[:, None], _rise(boxes.slope, boxes.half) + loss)
    lower = _with_gap(boxes.level - reach)
    if lower.shape[1] == 3:
        joint = _rise(boxes.slope.sum(axis=1, keepdims=True), boxes.half)[:, 0] + loss.sum(axis=1)
        lower[:, 2] = np.maximum(lower[:, 2], boxes.level.sum(axis=1) - joint)
    return lower


def _rise(slope: Reals, half: Reals) -> Reals:
    """Return max |slope.h| over each box, shape (n, s)."""
    return np.asarray((np.abs(slope) * half[:, None, :]).sum(axis=2))


def _loss(boxes: _Boxes, second: Reals, weyl: Reals) -> Reals:
    """Return r + y + second with the best m, shape (n, s)."""
    half = boxes.half[:, None, None, :]
    mixing = (boxes.mixing * half).sum(axis=3)
    coupling = (boxes.coupling * half).sum(axis=3) + second[:, None, None]
    room = boxes.ahead - 2 * weyl[:, None, None]
    # y = (hypot(s, 2b) - s)/2 without its cancellation; room is inf where m takes all states
    pushed = 2 * coupling**2 / (np.hypot(room, 2 * coupling) + np.abs(room) + TINY) + np.maximum(-room, 0)
    return np.asarray((mixing + pushed).min(axis=2) + second[:, None])


def _thirds(boxes: _Boxes, mirrored: bool) -> tuple[_Boxes, Reals, Reals, NDArray[np.int64]]:
    """Cut boxes where H changes more: return the middle thirds, and centre, half and stretch of the outer ones."""
    across = np.eye(2, dtype=bool)[(boxes.speed * boxes.half).argmax(axis=1)]
    half = np.where(across, boxes.half / 3, boxes.half)
    shift = np.where(across, 2 * half, 0.0)
    centre = np.concatenate([boxes.centre - shift, boxes.centre + shift])
    inside = np.abs(centre[:, 0] - np.pi / 2) < np.pi / 2 + ROUNDED if mirrored else np.ones(len(centre), dtype=bool)
    halves, stretches = np.concatenate([half, half]), np.concatenate([boxes.stretch, boxes.stretch])
    return boxes._replace(half=half), centre[inside], halves[inside], stretches[inside]


def _joined(first: _Boxes, second: _Boxes) -> _Boxes:
    return _Boxes._make(map(np.concatenate, zip(first, second, strict=True)))


def _measured(family: Family, centre: Reals, half: Reals, stretch: NDArray[np.int64], filled: int) -> _Boxes:
    """Solve one eigenproblem at each centre, some thousands at a time."""
    bands = family(centre[:1]).shape[-1]
    size = max(1, CHUNK // bands**2)
    parts = [
        _solved(family, centre[i : i + size], half[i : i + size], stretch[i : i + size], filled)
        for i in range(0, max(1, len(centre)), size)
    ]
    return _Boxes._make(map(np.concatenate, zip(*parts, strict=True)))


def _solved(family: Family, centre: Reals, half: Reals, stretch: NDArray[np.int64], filled: int) -> _Boxes:
    hamiltonian, *slopes = np.moveaxis(family(centre), 1, 0)
    energies, states = np.linalg.eigh(hamiltonian)
    speed = np.stack([np.abs(slope).sum(axis=2).max(axis=1) for slope in slopes], axis=1)
    turned = np.stack([states.conj().swapaxes(1, 2) @ slope @ states for slope in slopes], axis=1)
    empty, full = slice(filled, None), slice(filled - 1 if filled else 0, None, -1)
    bands = energies.shape[1]
    size = max(filled, bands - filled)
    sides = [_side(energies[:, empty], turned[:, :, empty, empty], size)] if filled < bands else []
    sides += [_side(-energies[:, full], -turned[:, :, full, full], size)] if filled else []
    return _Boxes(centre, half, stretch, speed, *(np.stack(column, axis=1) for column in zip(*sides, strict=True)))


def _side(levels: Reals, slopes: NDArray[np.complex128], size: int) -> tuple[Reals, Reals, Reals, Reals, Reals]:
    """Return level, slope, and for clusters m = 1 ... size mixing, coupling and the way to the next level.

    Parameters
    ----------
    levels : (n, p) float array
        Ascending.
    slopes : (n, 2, p, p) complex array
        H_k and H_phi between their states.
    """
    states = levels.shape[1]
    slope = slopes[:, :, 0, 0].real
    weight = np.abs(slopes - slope[:, :, None, None] * np.eye(states)) ** 2
    mixing = np.diagonal(weight.cumsum(axis=3).cumsum(axis=2), axis1=2, axis2=3)
    beyond = weight[..., ::-1].cumsum(axis=3)[..., ::-1].cumsum(axis=2)
    coupling = np.diagonal(beyond, offset=1, axis1=2, axis2=3)
    pad = size - states
    norms = [
        np.sqrt(np.pad(part, ((0, 0), (0, 0), (0, size - part.shape[2])), constant_values=fill)).swapaxes(1, 2)
        for part, fill in ((mixing, np.inf), (coupling, 0.0))
    ]
    ahead = np.pad(levels[:, 1:] - levels[:, :1], ((0, 0), (0, 1 + pad)), constant_values=np.inf)
    return levels[:, 0], slope, norms[0], norms[1], ahead
