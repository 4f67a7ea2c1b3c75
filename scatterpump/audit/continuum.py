"""Check on the lattice where it stands for a continuum: the wave must be long against the step.

On a lattice of step a, E = 2t (1 - cos ka) with t = hbar^2/(2 m a^2) stays below the parabola hbar^2 k^2/(2m) by the
share (ka)^2/12 (series expansion; the usual finite-difference Laplacian).
"""

from __future__ import annotations

from math import acos, inf, pi, sqrt

import numpy as np

from scatterpump.audit.check import Outcome, check, graded
from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import Place

__all__ = ["continuum_resolved"]

NANOMETRE = 1e-9  # metres
COARSE = (0.01, 0.1)  # error of the kinetic energy: as good as effective masses are known; no longer a parabola


@check(
    "continuum resolved",
    unit="1",
    because="A lattice that stands for a continuum has its dispersion only where the wavelength is long against the "
    "step; the energy of a wave of wave number k comes out too low by the share (ka)^2/12.",
    caution=f"(ka)^2/12 exceeds {COARSE[0]:g} where the kinetic energy is largest",
    alarm=f"(ka)^2/12 exceeds {COARSE[1]:g} there, or the Fermi level lies beyond the lattice's band",
    remedy="Make the step smaller.",
)
def continuum_resolved(evidence: Evidence) -> Outcome | None:
    """Is the wavelength at the Fermi level long against the lattice's step?"""
    continuum = evidence.pump.continuum
    if continuum is None:
        return None
    kinetic, site = _deepest(evidence)
    share = kinetic / (4 * continuum.hopping)
    angle = acos(1 - 2 * share) if 0 <= share <= 1 else 0.0 if share < 0 else inf
    error = angle**2 / 12
    length = f"{2 * pi / angle:.3g} steps" if 0 < angle < inf else "longer than any step" if angle == 0 else "too short"
    text = f"The shortest wavelength at the Fermi level is {length}"
    if angle == inf:
        text += f": the kinetic energy {kinetic:.3g} is more than the band of the lattice, {4 * continuum.hopping:.3g}"
    elif error > COARSE[0]:
        needed = continuum.step * sqrt(COARSE[0] / error)
        text += f", so energies are wrong by {100 * error:.2g} %; a step of {needed / NANOMETRE:.2g} nm would do"
    return graded(error, COARSE, text + ".", text + ".", Place(site=site))


def _deepest(evidence: Evidence) -> tuple[float, tuple[float, ...]]:
    """Largest kinetic energy at the Fermi level, counted from H_ii - sum_j |H_ij|, and where."""
    motion = evidence.motion
    driven, own = motion.driven, motion.driven.rows == motion.driven.columns
    lowest = np.full(driven.size, inf)
    for phase in motion.phases[:-1:8]:
        values = driven.at(float(phase))
        bottom = np.zeros(driven.size)
        np.add.at(bottom, driven.rows, np.where(own, values.real, -np.abs(values)))
        lowest = np.minimum(lowest, bottom)
    deepest = int(lowest.argmin())
    return evidence.pump.fermi_level - float(lowest[deepest]), evidence.geometry.at(int(motion.site_of[deepest]))
