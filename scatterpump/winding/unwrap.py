"""How far det r turns between neighbouring samples: matrices in, turns out.

From r_i to r_j the determinant turns by the sum of the eigenphases of r_i^-1 r_j, each in (-pi, pi).  That is the true
change whenever every single eigenphase moved by less than half a turn; the phase of the determinant alone would
already fail when two channels move by a quarter of a turn each.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Steps", "steps", "turn"]


@dataclass(frozen=True, eq=False)
class Steps:
    """Steps between n neighbouring samples.

    Attributes
    ----------
    turned : (n-1,) float array
        Change of arg det r over each step, in radians.
    largest : (n-1,) float array
        Largest single eigenphase of each step, in radians, at most pi.
    """

    turned: NDArray[np.float64]
    largest: NDArray[np.float64]

    @property
    def turns(self) -> float:
        """Sum of all steps in full turns."""
        return float(self.turned.sum() / (2 * np.pi))


def turn(before: NDArray[np.complex128], after: NDArray[np.complex128]) -> float:
    """Return by how much det r turns from `before` to `after`, (m, m) each, in radians: the sum of eigenphases."""
    return float(np.angle(np.linalg.eigvals(np.linalg.solve(before, after))).sum())


def steps(reflection: NDArray[np.complex128]) -> Steps:
    """Compare each sample with the next.

    Parameters
    ----------
    reflection : (n, m, m) complex array
        Invertible matrices r at successive phases, in one basis.  They need not be unitary.
    """
    ratio = np.linalg.solve(reflection[:-1], reflection[1:])
    phases = np.angle(np.linalg.eigvals(ratio))
    return Steps(phases.sum(axis=1), np.abs(phases).max(axis=1))
