"""Which energies a picture of a pump shows: the gap that its Fermi level lies in, and some of the bands about it."""

from __future__ import annotations

from math import isfinite

import numpy as np
from numpy.typing import NDArray

from scatterpump.portrait.spectrum import Spectrum

__all__ = ["energy_window"]

BEYOND = 0.45  # of the gap's width on either side
SHARE = 0.25  # of all levels known, where there is no gap


def energy_window(spectrum: Spectrum) -> tuple[float, float]:
    """Return the lowest and highest energy to show."""
    gap, level = spectrum.gap, spectrum.fermi_level
    known = np.concatenate([part.ravel() for part in (spectrum.bottom, spectrum.top, spectrum.levels)])
    low, high = float(known.min(initial=level)), float(known.max(initial=level))
    if gap is None or not gap.is_open:
        reach = SHARE * max(high - low, 1e-9)
        return level - reach, level + reach
    bottom = gap.lower_edge.upper if isfinite(gap.lower_edge.upper) else _free(spectrum.levels, low, -1)
    top = gap.upper_edge.lower if isfinite(gap.upper_edge.lower) else _free(spectrum.levels, high, 1)
    margin = BEYOND * max(top - bottom, level - bottom, top - level)
    return bottom - margin, top + margin


def _free(levels: NDArray[np.float64], end: float, side: int) -> float:
    """A little beyond the last level, where a gap has no further edge."""
    return end + side * 0.05 * max(float(np.ptp(levels)), 1e-9)
