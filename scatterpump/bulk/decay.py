"""How fast a state at the Fermi level dies out inside the pump.

In the gap every solution of H(k, phi) psi = E psi has a complex k.  The slowest one, beta = e^{ik} with |beta| < 1
largest, rules the leak of a pump of n cells: |t|^2 ~ |beta|^(2n).  A propagating solution has |beta| = 1: no length
helps.

References: W. Kohn, Phys. Rev. 115, 809 (1959) (citation from memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from scatterpump.bulk.cell import bloch_cell
from scatterpump.pump import Pump

__all__ = ["decay_per_cell", "slowest"]


def decay_per_cell(pump: Pump, *, phases: int = 64) -> float:
    """Return the largest |beta| per cell over `phases` equidistant phases, between 0 and 1."""
    angles = 2 * np.pi * np.arange(phases) / phases
    return max(slowest(h, hop, pump.fermi_level) for h, hop in bloch_cell(pump).blocks(angles))


def slowest(h: NDArray[np.complex128], hop: NDArray[np.complex128], energy: float) -> float:
    """Return the largest |beta| <= 1 of beta^2 V^+ + beta (h - E) + V = 0, in the closed unit disc."""
    from scipy.linalg import eig

    one, zero = np.eye(len(h)), np.zeros_like(h)
    left = np.block([[zero, one], [-hop, energy * one - h]])
    right = np.block([[one, zero], [zero, hop.conj().T]])
    up, down = np.abs(eig(left, right, right=False, homogeneous_eigvals=True))
    return float((np.minimum(up, down) / np.maximum(np.maximum(up, down), 1e-300)).max(initial=0.0))
