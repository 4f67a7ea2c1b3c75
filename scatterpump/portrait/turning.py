"""How det r and its eigenvalues go round along the cycle, sampled finely enough for the eye.

Even phases would step over a narrow level without a trace; where a proof knows of a crossing, phases gather there as
its resonance does, phi + width tan(u).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterpump.pump import Pump
from scatterpump.solver.reflect import reflect
from scatterpump.winding.result import Winding
from scatterpump.winding.unwrap import steps

__all__ = ["Turning", "turning"]

Floats = NDArray[np.float64]
TURN = 2 * np.pi
EVEN = 241
AROUND = 41  # phases at each crossing: steps of a few degrees of the eigenphase that passes
WIDEST = 0.2  # radians: wider crossings are seen by the even phases


@dataclass(frozen=True, eq=False)
class Turning:
    """Samples of r along a cycle, and the proof that belongs to them.

    Attributes
    ----------
    name : str
    phases : (n,) float array
        From 0 to 2 pi, both included, in order; radians.
    turned : (n,) float array
        How far det r has turned since phi = 0, in radians.
    modulus : (n,) float array
        |det r|.
    eigenphases : (n, m) float array
        Arguments of the eigenvalues of r, in order, in [-pi, pi).  Where they stand depends on the arbitrary phases
        of the lead's modes; how they move does not.
    winding : Winding
    """

    name: str
    phases: Floats
    turned: Floats
    modulus: Floats
    eigenphases: Floats
    winding: Winding

    @property
    def agrees(self) -> bool:
        """False if the samples go round another number of times than is proven: they miss a level too narrow to see."""
        number = self.winding.number
        return number is None or round(float(self.turned[-1]) / TURN) == number

    def at(self, phases: Floats) -> Floats:
        """Return how far det r has turned at `phases` (radians), between samples along a straight line."""
        return np.asarray(np.interp(phases, self.phases, self.turned))


def turning(pump: Pump, winding: Winding) -> Turning:
    """Sample r along the cycle of `pump`, closely where `winding` knows of crossings."""
    phases = _phases(winding)
    r = reflect(pump, phases, transmission=False).reflection
    turned = np.concatenate([[0.0], np.cumsum(steps(r).turned)])
    angles = np.sort((np.angle(np.linalg.eigvals(r)) + np.pi) % TURN - np.pi, axis=1)
    return Turning(pump.name, phases, turned, np.abs(np.linalg.det(r)), angles, winding)


def _phases(winding: Winding) -> Floats:
    parts = [np.linspace(0.0, TURN, EVEN)]
    spread = np.tan(np.linspace(-1.5, 1.5, AROUND))
    parts += [crossing.phase + min(crossing.width, WIDEST) * spread for crossing in winding.crossings]
    every = np.unique(np.concatenate(parts))
    return np.asarray(every[(every >= 0) & (every <= TURN)])
