"""One factorisation at one phase: r, the leak, and how far rounding may have moved r.  Nothing is proven."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.band import EPS, factor, row_sum_norm, spectral_norm
from scatterpump.solver.folded import FoldedDevice
from scatterpump.winding.look import ROUNDING

__all__ = ["Glance", "glance"]

Complex = NDArray[np.complex128]


@dataclass(frozen=True, eq=False)
class Glance:
    """What is seen at one phase.

    Attributes
    ----------
    phase : float
    reflection : (m, m) complex array
        r in the basis of the probe's broadening, in which an eigenvalue +1 marks a level at the Fermi level.
    leak : float
        Largest |t|^2 of any incoming state into any other lead.
    error : float
        Bound on what rounding of A may have changed in r: 20 eps |A| |W^+ G| |G W|.
    """

    phase: float
    reflection: Complex
    leak: float
    error: float


def glance(device: FoldedDevice, phase: float) -> Glance | None:
    """Look at `device` at `phase`; None if its matrix is singular to the last digit."""
    band = device.matrix(phase)
    lu = factor(band)
    if lu is None:
        return None
    right, left = lu.solve(device.probe), lu.solve(device.probe, adjoint=True)
    reflection = 1j * (device.probe.conj().T @ right) - np.eye(device.probe.shape[1])
    if not np.isfinite(reflection).all():
        return None
    leak = spectral_norm(device.drain.conj().T @ right) ** 2
    error = ROUNDING * EPS * row_sum_norm(band) * spectral_norm(left) * spectral_norm(right)
    return Glance(phase, reflection, leak, error)
