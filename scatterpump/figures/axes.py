"""Axes that many figures share: the angle of the cycle, and colour bars with a unit."""

from __future__ import annotations

from typing import Any

import numpy as np

__all__ = ["CYCLE_TICKS", "colour_bar", "cycle_axis"]

CYCLE_TICKS = np.arange(5) * np.pi / 2
NAMES = ("0", "π/2", "π", "3π/2", "2π")


def cycle_axis(axis: Any, set_limits: Any) -> None:
    """Make `axis` (``ax.xaxis`` or ``ax.yaxis``) the angle phi over one cycle; `set_limits` is ax.set_xlim or so."""
    axis.set_ticks(CYCLE_TICKS, NAMES)
    axis.set_label_text("φ (rad)")
    set_limits(0.0, 2 * np.pi)


def colour_bar(drawn: Any, ax: Any, label: str, *, extend: str = "neither") -> Any:
    """Put a colour bar for `drawn` beside `ax`."""
    bar = ax.figure.colorbar(drawn, ax=ax, pad=0.02, aspect=24, extend=extend)
    bar.set_label(label, fontsize=8)
    bar.ax.tick_params(labelsize=7)
    bar.outline.set_visible(False)
    return bar
