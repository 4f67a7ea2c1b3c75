"""A device layer by layer from the probe: how wide each layer is, and how much changes in it."""

from __future__ import annotations

from typing import Any

import numpy as np

from scatterpump.anatomy.layout import Layout
from scatterpump.figures.style import INK, PALE
from scatterpump.measure import Measure

__all__ = ["draw_layers"]


def draw_layers(panel: Any, layout: Layout) -> None:
    """Unknowns in each layer as a grey band, and the largest change of a site or bond in it."""
    assert layout.widths is not None
    layers = np.arange(len(layout.widths))
    panel.fill_between(layers, layout.widths, step="mid", color=PALE, linewidth=0)
    panel.set(xlabel="layer, counted from the probe", ylim=(0, 1.25 * layout.widths.max()))
    panel.set_xlim(-0.5, len(layers) - 0.5)
    panel.set_ylabel("unknowns (grey)")
    panel.yaxis.get_major_locator().set_params(integer=True)
    panel.xaxis.get_major_locator().set_params(integer=True)
    if layout.layer is None or layout.site_change is None or layout.bond_change is None:
        return
    by_layer = np.zeros((2, len(layers)))
    known = layout.layer >= 0
    np.maximum.at(by_layer[0], layout.layer[known], layout.site_change[known])
    if len(layout.bonds):
        start = layout.layer[layout.bonds].min(axis=1)
        np.maximum.at(by_layer[1], start[start >= 0], layout.bond_change[start >= 0])
    other = panel.twinx()
    other.spines["right"].set_visible(True)
    for values, dashes, label in zip(by_layer, ("-", ":"), ("sites", "bonds"), strict=True):
        other.step(layers, values, dashes, where="mid", color=INK, linewidth=1.1, label=label)
    other.set_ylim(0, 1.25 * (by_layer.max() or 1.0))
    other.set_ylabel(f"change ({Measure(layout.units).on_axes})")
    other.legend(loc="upper right", ncols=2, fontsize=7, frameon=False)
