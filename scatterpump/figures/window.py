"""Which part of a long device a drawing shows: all of it, or its two ends (arrays only)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["View", "flattened", "views"]

Floats = NDArray[np.float64]
LONG = 7.0  # length over width beyond which a drawing at scale is a thread
END = 2.6  # length over width of each end that is shown then
LEAST = 16.0  # margins shown of each end at least
OBLIQUE = np.array([0.45, 0.25])


@dataclass(frozen=True)
class View:
    """A window: left, right, bottom, top in lattice constants."""

    left: float
    right: float
    bottom: float
    top: float

    @property
    def width(self) -> float:
        """Length along x."""
        return self.right - self.left

    @property
    def height(self) -> float:
        """Length along y."""
        return self.top - self.bottom

    def holds(self, points: Floats) -> NDArray[np.bool_]:
        """Tell which `points` (n, 2) are inside."""
        x, y = points.T
        return np.asarray((x >= self.left) & (x <= self.right) & (y >= self.bottom) & (y <= self.top))


def flattened(positions: Floats) -> Floats:
    """Return points of the plane, shape (n, 2): a line on its axis, a solid in oblique view."""
    count, dimension = positions.shape
    if dimension == 1:
        return np.column_stack([positions[:, 0], np.zeros(count)])
    flat = positions[:, :2].copy()
    for extra in positions[:, 2:].T:
        flat += extra[:, None] * OBLIQUE
    return flat


def views(points: Floats, around: Floats, margin: float) -> tuple[View, ...]:
    """Return one window on all of `points` and `around` (n, 2), or two on the ends if it is long."""
    every = np.vstack([points, around])
    (left, bottom), (right, top) = every.min(axis=0) - margin, every.max(axis=0) + margin
    whole = View(float(left), float(right), float(bottom), float(top))
    end = max(END * whole.height, LEAST * margin)
    if whole.width <= max(LONG * whole.height, 3 * end):
        return (whole,)
    near, far = whole.left + end, whole.right - end
    heights = every[(every[:, 0] <= near) | (every[:, 0] >= far), 1]  # a lead in the middle needs no room here
    bottom, top = float(heights.min()) - margin, float(heights.max()) + margin
    return (View(whole.left, near, bottom, top), View(far, whole.right, bottom, top))
