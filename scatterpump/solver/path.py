"""H along the cycle, as the list of its nonzero matrix elements, with bounds on how fast it changes.

What is known about H(phi) decides how much of a proof is exact:

* ``trigonometric``: a few Fourier coefficients, found by sampling and verified at other angles; all bounds are exact.
* ``straight``: linear in phi between corners of the cycle, verified inside every piece; exact.
* ``sampled``: neither; rates of change are largest difference quotients on a grid times a safety factor of 2, and everything that rests
  on them is called estimated.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Literal, Protocol

import numpy as np
from numpy.typing import NDArray

from scatterpump.cycle import Cycle
from scatterpump.solver.harmonics import Harmonics, fit

__all__ = ["Path", "SampledPath", "StraightPath", "TrigonometricPath", "follow"]

Entries = NDArray[np.complex128]
Side = Literal[-1, 1]
TURN = 2 * np.pi
STRAIGHT_TOLERANCE = 1e-10


class Path(Protocol):
    """H(phi) and its derivatives as lists of matrix elements, shape (nnz,)."""

    @property
    def exact(self) -> bool:
        """Whether bounds built on this path are exact."""

    @property
    def corners(self) -> NDArray[np.float64]:
        """Phases in [0, 2 pi) between which the path is smooth, in order; empty if it is smooth all round."""

    def at(self, phase: float) -> Entries:
        """Return H at `phase`."""

    def derivative(self, phase: float, side: Side, order: int = 1) -> Entries:
        """Return the derivative of `order` 1 or 2 at `phase`, from above (+1) or below (-1)."""

    def slopes(self, norm: Callable[[Entries], float]) -> Slopes:
        """Return bounds on |H'|, |H''| and |H'''| in the given matrix norm."""


@dataclass(frozen=True, eq=False)
class Slopes:
    """Upper bounds on how fast H changes.

    Attributes
    ----------
    nodes : (c+1,) float array
        0 = first ... last = 2 pi.
    left, right : (c,) float array
        |H'| at the two ends of each stretch between nodes; in between it is at most the straight line between them plus `excess`.
    excess : float
    second, third : float
        Bounds on |H''| and |H'''| between corners.
    """

    nodes: NDArray[np.float64]
    left: NDArray[np.float64]
    right: NDArray[np.float64]
    excess: float
    second: float
    third: float

    @property
    def largest(self) -> float:
        """Bound on |H'| over the cycle."""
        return float(max(self.left.max(), self.right.max())) + self.excess

    def length(self, start: float, ends: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return bounds on the path length of H from `start` to each of `ends` (radians, within a turn of it)."""
        return np.abs(self._from_zero(np.asarray(ends, dtype=float)) - self._from_zero(np.asarray(start)))

    def _from_zero(self, phases: NDArray[np.float64]) -> NDArray[np.float64]:
        step = np.diff(self.nodes)
        whole = np.concatenate([[0.0], np.cumsum(step * (self.left + self.right) / 2)])
        laps, rest = np.divmod(phases, TURN)
        cell = np.clip(np.searchsorted(self.nodes, rest, side="right") - 1, 0, len(step) - 1)
        inside = rest - self.nodes[cell]
        rise = (self.right - self.left)[cell] / step[cell]
        along = whole[cell] + inside * (self.left[cell] + rise * inside / 2)
        return np.asarray(laps * whole[-1] + along + self.excess * phases)


@dataclass(frozen=True, eq=False)
class TrigonometricPath:
    """H as a trigonometric polynomial in phi."""

    harmonics: Harmonics
    exact: bool = True
    corners: NDArray[np.float64] = field(default_factory=lambda: np.empty(0))

    def at(self, phase: float) -> Entries:
        """Return H at `phase`."""
        return np.asarray(self.harmonics.at(phase))

    def derivative(self, phase: float, side: Side = 1, order: int = 1) -> Entries:
        """Return the derivative of `order` at `phase`."""
        found = self.harmonics
        for _ in range(order):
            found = found.derivative()
        return found.at(phase)

    def slopes(self, norm: Callable[[Entries], float]) -> Slopes:
        """Bound the derivatives from a grid.

        For a unit vector x, x^+ H' x is a trigonometric polynomial, so between grid points of distance h it stays within h^2/8 sup|H'''| of
        the straight line; and sup <= (largest on N equidistant points) / cos(pi K / N) for degree K (H. Ehlich, K. Zeller,
        Math. Z. 86, 41 (1964), citation from memory).
        """
        degree = max(1, self.harmonics.degree)
        count = 32 * degree
        nodes = TURN * np.arange(count + 1) / count
        if degree == 1:  # H'(phi + pi) = -H'(phi): half a turn says all
            half = [norm(self.derivative(p)) for p in nodes[: count // 2]]
            values = np.array([*half, *half, half[0]])
            largest = float(values.max()) / np.cos(np.pi / count)
            second = third = largest
        else:
            values = np.array([norm(self.derivative(p)) for p in nodes[:-1]])
            values = np.append(values, values[0])
            coarse = nodes[:-1:4]
            second = max(norm(self.derivative(p, 1, 2)) for p in coarse) / np.cos(np.pi / 8)
            third = degree * second  # Bernstein's inequality
        return Slopes(nodes, values[:-1], values[1:], (TURN / count) ** 2 / 8 * third, second, third)


@dataclass(frozen=True, eq=False)
class StraightPath:
    """H as straight lines between the corners of the cycle."""

    corners: NDArray[np.float64]
    points: NDArray[np.complex128]
    exact: bool = True

    def at(self, phase: float) -> Entries:
        """Return H at `phase`."""
        piece, inside = self._piece(phase, 1)
        return np.asarray(self.points[piece] + inside * self._slope(piece))

    def derivative(self, phase: float, side: Side, order: int = 1) -> Entries:
        """Return the slope on the given side of `phase`; second derivatives vanish."""
        piece, _ = self._piece(phase, side)
        return self._slope(piece) if order == 1 else np.zeros_like(self.points[0])

    def slopes(self, norm: Callable[[Entries], float]) -> Slopes:
        """Return the exact norms of the slopes of all pieces."""
        rates = np.array([norm(self._slope(piece)) for piece in range(len(self.corners))])
        starts = self.corners
        if starts[0] > 0:
            starts, rates = np.concatenate([[0.0], starts]), np.concatenate([rates[-1:], rates])
        return Slopes(np.append(starts, TURN), rates, rates, 0.0, 0.0, 0.0)

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
    """H as a function to be asked, its derivatives by differences."""

    sample: Callable[[float], Entries]
    corners: NDArray[np.float64]
    exact: bool = False

    STEP = 1e-4
    SAFETY = 2.0
    GRID = 256

    def at(self, phase: float) -> Entries:
        """Return H at `phase`."""
        return self.sample(phase)

    def derivative(self, phase: float, side: Side, order: int = 1) -> Entries:
        """Return a one-sided difference quotient of second order (first derivative) or first order (second derivative)."""
        here, near, far = (self.sample(phase + side * self.STEP * k) for k in range(3))
        if order == 1:
            return side * (4 * near - far - 3 * here) / (2 * self.STEP)
        return (here - 2 * near + far) / self.STEP**2

    def slopes(self, norm: Callable[[Entries], float]) -> Slopes:
        """Estimate the bounds from difference quotients on a grid that includes the corners."""
        nodes = np.unique(np.concatenate([np.linspace(0.0, TURN, self.GRID + 1), self.corners]))
        values = [self.sample(float(node)) for node in nodes]
        first = [(b - a) / h for a, b, h in zip(values, values[1:], np.diff(nodes), strict=False)]
        second = [(b - a) / h for a, b, h in zip(first, first[1:], np.diff(nodes), strict=False)]
        third = [(b - a) / h for a, b, h in zip(second, second[1:], np.diff(nodes), strict=False)]
        rates = self.SAFETY * np.array([norm(value) for value in first])
        curved, twisted = (self.SAFETY * max(norm(v) for v in values) for values in (second, third))
        return Slopes(nodes, rates, rates, 0.0, curved, twisted)


def follow(sample: Callable[[float], Entries], cycle: Cycle) -> Path:
    """Find out what kind of path H takes along `cycle`, from samples of its matrix elements."""
    corners = np.array(cycle.corners)
    if cycle.straight and corners.size:
        points = np.array([sample(float(corner)) for corner in corners])
        straight = StraightPath(corners, points)
        scale = max(1e-300, float(np.abs(points).max(initial=0.0)))
        inside = corners + 0.37 * np.diff(np.append(corners, corners[0] + TURN))
        if all(np.abs(straight.at(p) - sample(p)).max(initial=0.0) <= STRAIGHT_TOLERANCE * scale for p in inside.tolist()):
            return straight
        return SampledPath(sample, corners)
    harmonics = None if corners.size else fit(sample)
    return SampledPath(sample, corners) if harmonics is None else TrigonometricPath(harmonics)
