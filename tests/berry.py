"""The charge that filled bands carry in a cycle, by a route of its own: the motion of their centres of charge.

References: R. D. King-Smith, D. Vanderbilt, Phys. Rev. B 47, 1651 (1993) (citation from memory).
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np


def carried(bloch: Callable[[float, float], Any], filled: int, *, momenta: int = 24, phases: int = 40) -> float:
    """Return how far the centre of the `filled` lowest bands of H(k, phi) moves in a cycle, in cells along +x.

    `bloch` has psi(next cell) = e^{ik} psi.  The centre is -1/(2 pi) times the phase of the overlaps' product round k.
    """
    angles = []
    for phi in 2 * np.pi * np.arange(phases + 1) / phases:
        bands = np.linalg.eigh([bloch(k, phi) for k in 2 * np.pi * np.arange(momenta) / momenta])[1][:, :, :filled]
        overlaps = np.linalg.det(bands.conj().swapaxes(1, 2) @ np.roll(bands, -1, axis=0))
        angles.append(np.angle(overlaps).sum())
    turned = np.unwrap(angles)
    return float(turned[0] - turned[-1]) / (2 * np.pi)


def bloch_of(cell: Any) -> Callable[[float, float], Any]:
    """Return H(k, phi) of a kwant Builder with one translational symmetry and the parameter phi."""
    finalized = cell.finalized()

    def bloch(k: float, phi: float) -> Any:
        here = finalized.cell_hamiltonian(params={"phi": phi})
        narrow = finalized.inter_cell_hopping(params={"phi": phi})
        hop = np.zeros_like(here)
        hop[:, : narrow.shape[1]] = narrow * np.exp(-1j * k)
        return here + hop + hop.conj().T

    return bloch
