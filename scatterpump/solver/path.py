"""H along the cycle, as the list of its nonzero matrix elements, with bounds on how fast it changes.

What is known about H(phi) decides how much of a proof is exact:

* ``trigonometric``: a few Fourier coefficients, found by sampling and verified at other angles; all bounds are exact.
* ``straight``: linear in phi between corners of the cycle, verified inside every piece; exact.
* ``sampled``: neither; rates of change are largest difference quotients on a grid times a safety factor of 2, and
  everything that rests on them is called estimated.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any, Literal, Protocol

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.harmonics import Harmonics

__all__ = ["Path", "SampledPath", "Slopes", "StraightPath", "TrigonometricPath", "description", "moving"]

Entries = NDArray[np.complex128]
Floats = NDArray[np.float64]
Norm = Callable[[Entries], float]
Sample = Callable[[Floats], Entries]
Side = Literal[-1, 1]
TURN = 2 * np.pi
REACHED = 1e-12  # relative: by so much a distance is taken shorter than its formula says, and until its bound holds
STILL = 1e-13


class Path(Protocol):
    """H(phi) and its derivatives as lists of matrix elements, shape (nnz,)."""

    @property
    def exact(self) -> bool:
        """Whether bounds built on this path are exact."""

    @property
    def corners(self) -> Floats:
        """Phases in [0, 2 pi) between which the path is smooth, in order; empty if it is smooth all round."""

    def at(self, phase: float) -> Entries:
        """Return H at `phase`."""

    def many(self, phases: Floats) -> NDArray[Any]:
        """Return H at each of `phases`, shape (n, nnz); as float64 where it is known to be real."""

    def derivative(self, phase: float, side: Side, order: int = 1) -> Entries:
        """Return the derivative of `order` 1 or 2 at `phase`, from above (+1) or below (-1)."""

    def slopes(self, norm: Norm) -> Slopes:
        """Return bounds on |H'|, |H''| and |H'''| in the given matrix norm."""

    def variation(self) -> Floats:
        """Return a bound on how far each element strays from a fixed value, shape (nnz,)."""

    def only(self, chosen: NDArray[np.int64]) -> Path:
        """Return the path of the chosen elements alone."""

    def spread(self, places: NDArray[np.int64], still: Entries) -> Path:
        """Return the path of more elements: those at `places` are these, all others stay what `still` says."""


@dataclass(frozen=True, eq=False)
class Slopes:
    """Upper bounds on how fast H changes.

    Attributes
    ----------
    nodes : (c+1,) float array
        0 = first ... last = 2 pi.
    left, right : (c,) float array
        |H'| at the two ends of each stretch between nodes; in between it is at most the straight line between them
        plus `excess`.
    excess : float
    second, third : float
        Bounds on |H''| and |H'''| between corners.
    """

    nodes: Floats
    left: Floats
    right: Floats
    excess: float
    second: float
    third: float

    @property
    def largest(self) -> float:
        """Bound on |H'| over the cycle."""
        return float(max(self.left.max(), self.right.max())) + self.excess

    def length(self, start: float, ends: Floats) -> Floats:
        """Return bounds on the path length of H from `start` to each of `ends` (radians)."""
        return np.abs(self._from_zero(np.asarray(ends, dtype=float)) - self._from_zero(np.asarray(start)))

    def reach(self, start: float, side: Side, limit: float) -> float:
        """Return the largest distance, up to half a turn, within which the bound on the path length stays <= `limit`.

        It is 0 if `limit` is not positive.
        """
        if not limit > 0:
            return 0.0
        end = self._phase_of(float(self._from_zero(np.asarray(start))) + side * limit)
        distance = min(np.pi, max(0.0, side * (end - start)) * (1 - REACHED))
        while distance > 0 and self.length(start, np.asarray(start + side * distance)) > limit:
            distance = distance * (1 - REACHED) if distance > REACHED else 0.0
        return float(distance)

    def _phase_of(self, length: float) -> float:
        """The phase at which `_from_zero` is `length`; infinite if H does not move."""
        marks = self._whole + self.excess * self.nodes
        if not marks[-1] > 0:
            return float(np.copysign(np.inf, length))
        laps, rest = np.divmod(length, marks[-1])
        cell = int(np.searchsorted(marks[1:-1], rest, side="right"))
        width = self.nodes[cell + 1] - self.nodes[cell]
        speed, need = self.left[cell] + self.excess, rest - marks[cell]
        # speed x + rise x^2 / 2 = need, solved without cancellation
        below = speed + np.sqrt(max(0.0, speed**2 + 2 * self._rise[cell] * need))
        return float(laps * TURN + self.nodes[cell] + (min(width, 2 * need / below) if below > 0 else width))

    @cached_property
    def _rise(self) -> Floats:
        return (self.right - self.left) / np.diff(self.nodes)

    @cached_property
    def _whole(self) -> Floats:
        return np.concatenate([[0.0], np.cumsum(np.diff(self.nodes) * (self.left + self.right) / 2)])

    def _from_zero(self, phases: Floats) -> Floats:
        laps, rest = np.divmod(phases, TURN)
        cell = np.searchsorted(self.nodes[1:-1], rest, side="right")
        inside = rest - self.nodes[cell]
        along = self._whole[cell] + inside * (self.left[cell] + self._rise[cell] * inside / 2)
        return np.asarray(laps * self._whole[-1] + along + self.excess * phases)


@dataclass(frozen=True, eq=False)
class TrigonometricPath:
    """H as a trigonometric polynomial in phi."""

    harmonics: Harmonics
    exact: bool = True
    corners: Floats = field(default_factory=lambda: np.empty(0))

    def at(self, phase: float) -> Entries:
        """Return H at `phase`."""
        return np.asarray(self.harmonics.at(phase))

    def many(self, phases: Floats) -> NDArray[Any]:
        """Return H at each of `phases`, shape (n, nnz); as float64 if it is real."""
        return self.harmonics.values(phases)

    def derivative(self, phase: float, side: Side = 1, order: int = 1) -> Entries:
        """Return the derivative of `order` at `phase`."""
        return self._derivatives[order - 1].at(phase)

    @cached_property
    def _derivatives(self) -> tuple[Harmonics, Harmonics]:
        first = self.harmonics.derivative()
        return first, first.derivative()

    def slopes(self, norm: Norm) -> Slopes:
        """Bound the derivatives from a grid.

        For a unit vector x, x^+ H' x is a trigonometric polynomial, so between grid points of distance h it stays
        within h^2/8 sup|H'''| of the straight line; and sup <= (largest on N equidistant points) / cos(pi K / N) for
        degree K (H. Ehlich, K. Zeller, Math. Z. 86, 41 (1964), citation from memory).
        """
        degree = max(1, self.harmonics.degree)
        count = 32 * degree
        nodes = TURN * np.arange(count + 1) / count
        if degree == 1:  # H'(phi + pi) = -H'(phi): half a turn says all
            half = [norm(self.derivative(p)) for p in nodes[: count // 2]]
            values = np.array([*half, *half, half[0]])
            second = third = float(values.max()) / np.cos(np.pi / count)
        else:
            values = np.array([norm(self.derivative(p)) for p in nodes[:-1]])
            values = np.append(values, values[0])
            coarse = nodes[:-1:4]
            second = max(norm(self.derivative(p, 1, 2)) for p in coarse) / np.cos(np.pi / 8)
            third = degree * second  # Bernstein's inequality
        return Slopes(nodes, values[:-1], values[1:], (TURN / count) ** 2 / 8 * third, second, third)

    def variation(self) -> Floats:
        """Return the sum of the moduli of all harmonics but the constant one."""
        size = np.abs(self.harmonics.coefficients)
        return np.asarray(size.sum(axis=0) - size[self.harmonics.degree])

    def only(self, chosen: NDArray[np.int64]) -> TrigonometricPath:
        """Return the path of the chosen elements alone."""
        return TrigonometricPath(Harmonics(self.harmonics.coefficients[:, chosen]))

    def spread(self, places: NDArray[np.int64], still: Entries) -> TrigonometricPath:
        """Return the path of more elements: those at `places` are these, all others stay what `still` says."""
        every = np.zeros((2 * self.harmonics.degree + 1, len(still)), dtype=complex)
        every[self.harmonics.degree] = still
        every[:, places] = self.harmonics.coefficients
        return TrigonometricPath(Harmonics(every))


@dataclass(frozen=True, eq=False)
class StraightPath:
    """H as straight lines between the corners of the cycle."""

    corners: Floats
    points: Entries
    exact: bool = True

    def at(self, phase: float) -> Entries:
        """Return H at `phase`."""
        piece, inside = self._piece(phase, 1)
        return np.asarray(self.points[piece] + inside * self._slope(piece))

    def many(self, phases: Floats) -> NDArray[Any]:
        """Return H at each of `phases`, shape (n, nnz); as float64 if it is real."""
        return _narrowed(np.array([self.at(phase) for phase in phases.tolist()]))

    def derivative(self, phase: float, side: Side, order: int = 1) -> Entries:
        """Return the slope on the given side of `phase`; second derivatives vanish."""
        piece, _ = self._piece(phase, side)
        return self._slope(piece) if order == 1 else np.zeros_like(self.points[0])

    def slopes(self, norm: Norm) -> Slopes:
        """Return the exact norms of the slopes of all pieces."""
        rates = np.array([norm(self._slope(piece)) for piece in range(len(self.corners))])
        starts = self.corners
        if starts[0] > 0:
            starts, rates = np.concatenate([[0.0], starts]), np.concatenate([rates[-1:], rates])
        return Slopes(np.append(starts, TURN), rates, rates, 0.0, 0.0, 0.0)

    def variation(self) -> Floats:
        """Return the largest distance of a corner's value from the first one's."""
        return np.asarray(np.abs(self.points - self.points[0]).max(axis=0))

    def only(self, chosen: NDArray[np.int64]) -> StraightPath:
        """Return the path of the chosen elements alone."""
        return StraightPath(self.corners, self.points[:, chosen])

    def spread(self, places: NDArray[np.int64], still: Entries) -> StraightPath:
        """Return the path of more elements: those at `places` are these, all others stay what `still` says."""
        return StraightPath(self.corners, _spread(self.points, places, still))

    def _piece(self, phase: float, side: Side) -> tuple[int, float]:
        place = phase % TURN
        index = int(np.searchsorted(self.corners, place, side="right" if side > 0 else "left")) - 1
        return index % len(self.corners), (place - self.corners[index]) % TURN

    def _slope(self, piece: int) -> Entries:
        ahead = (piece + 1) % len(self.corners)
        width = (self.corners[ahead] - self.corners[piece]) % TURN or TURN
        return np.asarray((self.points[ahead] - self.points[piece]) / width)


@dataclass(frozen=True, eq=False)
class SampledPath:
    """H as a function to be asked, its derivatives by differences between `nodes`."""

    sample: Sample
    corners: Floats
    nodes: Floats
    exact: bool = False

    STEP = 1e-4
    SAFETY = 2.0

    def at(self, phase: float) -> Entries:
        """Return H at `phase`."""
        return np.asarray(self.sample(np.array([phase]))[0])

    def many(self, phases: Floats) -> NDArray[Any]:
        """Return H at each of `phases`, shape (n, nnz); as float64 if it is real at all of them."""
        return _narrowed(self.sample(phases))

    def derivative(self, phase: float, side: Side, order: int = 1) -> Entries:
        """Return a one-sided difference quotient."""
        away: Floats = np.array([0.0, side * self.STEP, 2 * side * self.STEP])
        here, near, far = self.sample(phase + away)
        if order == 1:
            return np.asarray(side * (4 * near - far - 3 * here) / (2 * self.STEP))
        return np.asarray((here - 2 * near + far) / self.STEP**2)

    def slopes(self, norm: Norm) -> Slopes:
        """Estimate the bounds from difference quotients between the nodes."""
        steps: Floats = np.asarray(np.diff(self.nodes), dtype=float)
        first, second, third = (_quotients(self._values, steps, order) for order in (1, 2, 3))
        rates = self.SAFETY * np.array([norm(value) for value in first])
        curved, twisted = (self.SAFETY * max(norm(v) for v in values) for values in (second, third))
        return Slopes(self.nodes, rates, rates, 0.0, curved, twisted)

    def variation(self) -> Floats:
        """Return the largest distance of a node's value from the first one's."""
        return np.asarray(np.abs(self._values - self._values[0]).max(axis=0))

    def only(self, chosen: NDArray[np.int64]) -> SampledPath:
        """Return the path of the chosen elements alone."""
        return SampledPath(lambda phases: self.sample(phases)[:, chosen], self.corners, self.nodes)

    def spread(self, places: NDArray[np.int64], still: Entries) -> SampledPath:
        """Return the path of more elements: those at `places` are these, all others stay what `still` says."""
        return SampledPath(lambda phases: _spread(self.sample(phases), places, still), self.corners, self.nodes)

    @cached_property
    def _values(self) -> Entries:
        return np.asarray(self.sample(self.nodes))


def _spread(values: Entries, places: NDArray[np.int64], still: Entries) -> Entries:
    """Return `still` for each row of `values`, with these at `places`."""
    every: Entries = np.repeat(still[None], len(values), axis=0)
    every[:, places] = values
    return every


def _narrowed(values: Entries) -> NDArray[Any]:
    """The same as real numbers, if they are."""
    return values if values.imag.any() else np.asarray(values.real)


def _quotients(values: Entries, steps: Floats, order: int) -> list[Entries]:
    """Difference quotients of `order`, for steps that change slowly."""
    found: Entries = values
    for _ in range(order):
        found = np.asarray(np.diff(found, axis=0) / steps[: len(found) - 1, None], dtype=complex)
    return list(found)


def moving(path: Path) -> NDArray[np.bool_]:
    """Tell which elements change along a path by more than the rounding of their own size, shape (nnz,)."""
    return np.asarray(path.variation() > STILL * np.abs(path.at(0.0)))


def description(path: Path, samples: int = 0) -> Entries | None:
    """Return numbers that say all about a path, shape (s, nnz): its Fourier coefficients, or its corners.

    Of a sampled path no such numbers are known: its values at so many even phases, or None for no `samples`.
    """
    match path:
        case TrigonometricPath():
            return path.harmonics.coefficients
        case StraightPath():
            return path.points
    return np.asarray(path.many(TURN * np.arange(samples) / samples), dtype=complex) if samples else None
