"""A drawing of the device as the solver sees it: sites, bonds, leads, layers, and what changes with phi.

Top: the device at scale, a long one by its two ends; darker means a larger change along the cycle.  Below: all of it,
layer by layer from the probe.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.anatomy.layout import Layout
from scatterpump.figures.layers import draw_layers
from scatterpump.figures.page import BESIDE, INNER, Row, stack
from scatterpump.figures.sites import draw_sites
from scatterpump.figures.style import strength_map
from scatterpump.figures.window import View, flattened, views
from scatterpump.measure import Measure

__all__ = ["draw_device"]

Floats = NDArray[np.float64]
TALLEST, FLAT = 4.6, 0.45  # inches
PROFILE, BAR, BAR_WIDTH = 1.4, 0.09, 3.4  # inches
MARGIN = 1.2  # bond lengths


def draw_device(layout: Layout, figure: Any) -> None:
    """Draw `layout` into an empty matplotlib figure."""
    from matplotlib.colors import Normalize

    unit, windows = _framed(layout)
    largest = max(_largest(layout.site_change), _largest(layout.bond_change))
    colours = strength_map(), Normalize(0.0, largest or 1.0)
    first = _map_row(layout, windows)
    rows = [
        first,
        *([(PROFILE, [INNER])] if layout.widths is not None else []),
        *([(BAR, [BAR_WIDTH])] if largest else []),
    ]
    panels = stack(figure, rows)
    for panel, window, inches in zip(panels[0], windows, first[1], strict=True):
        draw_sites(panel, layout, window, inches, unit, colours)
        panel.set_xlabel("x (lattice constants)")
    for panel in panels[0][1:]:
        panel.set_yticks([])
        panel.spines["left"].set_visible(False)
    if layout.positions.shape[1] > 1:
        panels[0][0].set_ylabel("y (lattice constants)")
    panels[0][0].set_title(_title(layout, windows), pad=18)
    if layout.widths is not None:
        draw_layers(panels[1][0], layout)
    if largest:
        _legend(panels[-1][0], colours, Measure(layout.units).on_axes)


def _framed(layout: Layout) -> tuple[float, tuple[View, ...]]:
    """A typical bond length, and the windows to draw."""
    points = flattened(layout.positions)
    around = np.vstack([np.empty((0, 2)), *(flattened(cell) for lead in layout.leads for cell in lead.cells)])
    unit = 1.0
    if len(layout.bonds):
        length = np.linalg.norm(points[layout.bonds[:, 0]] - points[layout.bonds[:, 1]], axis=1)
        unit = float(np.median(length)) or 1.0
    return unit, views(points, around, MARGIN * unit)


def _map_row(layout: Layout, windows: tuple[View, ...]) -> Row:
    """Height and widths of the maps, at one scale in x and y unless the device is a line."""
    room = INNER - BESIDE * (len(windows) - 1)
    scale = room / sum(window.width for window in windows)
    if layout.positions.shape[1] == 1:
        return FLAT, [scale * window.width for window in windows]
    scale = min(scale, TALLEST / windows[0].height)
    return scale * windows[0].height, [scale * window.width for window in windows]


def _legend(panel: Any, colours: Any, unit: str) -> None:
    from matplotlib.cm import ScalarMappable

    bar = panel.figure.colorbar(ScalarMappable(colours[1], colours[0]), cax=panel, orientation="horizontal")
    bar.set_label(f"change of a site or bond: largest distance from its mean over the cycle ({unit})", fontsize=8)
    bar.outline.set_visible(False)


def _title(layout: Layout, windows: tuple[View, ...]) -> str:
    points = flattened(layout.positions)
    text = f"{layout.name}: {len(points)} sites, {len(layout.bonds)} bonds"
    if len(windows) > 1:
        shown = int(sum(window.holds(points).sum() for window in windows))
        text += f"; its two ends, {shown} sites, are shown{_hidden(layout, points, windows)}"
    if layout.site_change is None:
        return text + "; what changes along the cycle is unknown"
    still = not _largest(layout.site_change) and not _largest(layout.bond_change)
    return text + ("; nothing changes along the cycle" if still else "")


def _hidden(layout: Layout, points: Floats, windows: tuple[View, ...]) -> str:
    """Name the leads that no window shows."""
    seats = [(lead, points[lead.sites]) for lead in layout.leads]
    hidden = [
        lead.name or f"lead {lead.number}" for lead, seat in seats if not any(w.holds(seat).any() for w in windows)
    ]
    return f", not {' and '.join(hidden)}" if hidden else ""


def _largest(values: Floats | None) -> float:
    return 0.0 if values is None else float(values.max(initial=0.0))
