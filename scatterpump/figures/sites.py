"""The map of a device at scale: sites and bonds, darker where more changes along the cycle, and the leads."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.anatomy.layout import Layout, LeadView
from scatterpump.figures.style import GREY, INK, PALE
from scatterpump.figures.window import View, flattened

__all__ = ["draw_sites"]

Floats = NDArray[np.float64]
CROWDED = 1200  # sites in a window beyond which outlines and resting bonds only blur it
SMALLEST, LARGEST = 0.8, 11.0  # points
ASIDE = 0.25  # of the width: leads nearer to an end of the map are named there


def draw_sites(panel: Any, layout: Layout, window: View, inches: float, unit: float, colours: Any) -> None:
    """Draw what `window` shows of `layout`, `inches` wide; `unit` is a typical bond length."""
    points = flattened(layout.positions)
    panel.set_xlim(window.left, window.right)
    panel.set_ylim(window.bottom, window.top)
    if layout.positions.shape[1] == 1:
        panel.set_yticks([])
        panel.spines["left"].set_visible(False)
    inside = window.holds(points)
    crowded = int(inside.sum()) > CROWDED
    size = float(np.clip(0.42 * unit * inches * 72 / window.width, SMALLEST, LARGEST))  # under half a bond
    _bonds(panel, layout, points, inside, size, colours, crowded=crowded)
    _sites(panel, layout, points, inside, size, colours, crowded=crowded)
    places = [(_draw_lead(panel, lead, points, window, size), lead) for lead in layout.leads]
    _label(panel, [(along, lead) for along, lead in places if along is not None])


def _bonds(
    panel: Any, layout: Layout, points: Floats, inside: Any, size: float, colours: Any, *, crowded: bool
) -> None:
    from matplotlib.collections import LineCollection

    kept = inside[layout.bonds].any(axis=1) if len(layout.bonds) else np.zeros(0, dtype=bool)
    change = np.zeros(len(layout.bonds)) if layout.bond_change is None else layout.bond_change
    moving, still = kept & (change > 0), kept & (change == 0)
    lines = [_curve(points[a], points[b], flat=layout.positions.shape[1] == 1) for a, b in layout.bonds]
    chosen = [line for line, wanted in zip(lines, still, strict=True) if wanted]
    panel.add_collection(LineCollection(chosen, colors=PALE, linewidths=0.4 if crowded else 1.0, zorder=1))
    chosen = [line for line, wanted in zip(lines, moving, strict=True) if wanted]
    shades = colours[0](colours[1](change[moving]))
    panel.add_collection(LineCollection(chosen, colors=shades, linewidths=max(0.8, 0.35 * size), zorder=2))


def _curve(start: Floats, end: Floats, *, flat: bool) -> Floats:
    """Return the line of a bond; on a chain a bond beyond the next site is an arc, so that it can be seen."""
    length = abs(float(end[0] - start[0]))
    if not flat or length <= 1.0 + 1e-9:
        return np.array([start, end])
    along = np.linspace(0.0, 1.0, 13)[:, None]
    rise = np.column_stack([0 * along, 0.6 * np.sqrt(length) * np.sin(np.pi * along)])
    return np.asarray(start + along * (end - start) + rise)


def _sites(
    panel: Any, layout: Layout, points: Floats, inside: Any, size: float, colours: Any, *, crowded: bool
) -> None:
    change = np.zeros(len(points)) if layout.site_change is None else layout.site_change
    still, moving = inside & (change == 0), inside & (change > 0)
    edge = 0.0 if crowded else min(0.9, 0.15 * size)
    resting = PALE if crowded else "white"
    panel.scatter(*points[still].T, s=size**2, c=resting, edgecolors=GREY, linewidths=edge, zorder=3)
    shades = colours[0](colours[1](change[moving]))
    panel.scatter(*points[moving].T, s=size**2, c=shades, edgecolors=INK, linewidths=edge, zorder=4)
    if layout.layer is not None and (lost := inside & (layout.layer < 0)).any():
        panel.scatter(*points[lost].T, s=1.3 * size**2, c=INK, marker="x", linewidths=1.0, zorder=5)
        panel.plot([], [], "x", color=INK, label="reached by no path from the probe")
        panel.legend(loc="upper right", fontsize=7, frameon=False)


def _draw_lead(panel: Any, lead: LeadView, points: Floats, window: View, size: float) -> float | None:
    """Draw what `window` shows of a lead, and return its place along x as a share of the window; None if nothing."""
    marker = {"probe": "s", "drain": "D"}.get(lead.role, "^")
    for fade, cell in zip((0.75, 0.45, 0.2), lead.cells, strict=False):
        flat = flattened(cell)
        flat = flat[window.holds(flat)]
        panel.scatter(*flat.T, s=0.8 * size**2, c=INK, marker=marker, alpha=fade, linewidths=0, zorder=3)
    seat = points[lead.sites]
    seat = seat[window.holds(seat)]
    if not len(seat):
        return None
    panel.scatter(*seat.T, s=1.9 * size**2, facecolors="none", edgecolors=INK, marker=marker, linewidths=0.9, zorder=5)
    centre = flattened(lead.cells[1]).mean(axis=0) if len(lead.cells) > 1 else seat.mean(axis=0)
    return float(np.clip((centre[0] - window.left) / window.width, 0.0, 1.0))


def _label(panel: Any, places: list[tuple[float, LeadView]]) -> None:
    """Write above the map what its leads are: those on the left, in the middle and on the right, each on one line."""
    for side, low, high in (("left", 0.0, ASIDE), ("center", ASIDE, 1 - ASIDE), ("right", 1 - ASIDE, 1.1)):
        here = [(along, lead) for along, lead in places if low <= along < high]
        if here:
            middle = sum(along for along, _ in here) / len(here)
            place = {"left": 0.0, "center": middle, "right": 1.0}[side]
            text = "; ".join(_named(lead) for _, lead in here)
            panel.text(place, 1.02, text, transform=panel.transAxes, ha=side, va="bottom", fontsize=8)


def _named(lead: LeadView) -> str:
    role = f"lead {lead.number}" if lead.role == "lead" else lead.role
    name = role if not lead.name else lead.name if lead.role == "lead" else f"{lead.name} ({role})"
    modes = "modes unknown" if lead.modes is None else f"{lead.modes} mode" + "s" * (lead.modes != 1)
    return f"{name}, {modes}"
