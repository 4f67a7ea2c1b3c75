"""Leakage against length."""

from __future__ import annotations

from typing import Any

import numpy as np

from scatterpump.figures.style import GREY, INK
from scatterpump.portrait.length import Lengths

__all__ = ["leakage_by_length"]


def leakage_by_length(lengths: Lengths, ax: Any) -> Any:
    """Draw the largest share of electrons that leaks against the cells added, and how fast the slowest wave dies."""
    ax.semilogy(lengths.cells, lengths.leakage, "o", color=INK, markersize=4, label="largest along the cycle")
    if lengths.decay is not None and 0 < lengths.decay < 1 and lengths.leakage[0] > 0:
        along = np.linspace(lengths.cells[0], lengths.cells[-1], 101)
        fall = lengths.leakage[0] * lengths.decay ** (2 * (along - lengths.cells[0]))
        ax.semilogy(along, fall, "--", color=GREY, linewidth=1.1, label=f"slowest wave, |β| = {lengths.decay:.3g}")
    ax.set(xlabel="cells added to the device (1)", ylabel="leakage |t|² (1)", title="leakage against length")
    ax.legend(fontsize=7, frameon=False)
    return ax
