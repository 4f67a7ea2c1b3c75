"""Panels below each other, their sizes in inches: what is at scale stays at scale."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from scatterpump.figures.style import WIDTH

__all__ = ["BESIDE", "INNER", "Row", "stack"]

LEFT, RIGHT, TOP, BETWEEN, BOTTOM, BESIDE = 0.62, 0.62, 0.6, 0.62, 0.55, 0.14  # inches of margin
INNER = WIDTH - LEFT - RIGHT
Row = tuple[float, Sequence[float]]


def stack(figure: Any, rows: Sequence[Row]) -> list[list[Any]]:
    """Return axes in rows from top to bottom.

    Parameters
    ----------
    figure : matplotlib figure
    rows : sequence of (height, widths)
        In inches; a row narrower than the page is centred.
    """
    height = TOP + sum(row[0] for row in rows) + BETWEEN * (len(rows) - 1) + BOTTOM
    figure.set_size_inches(WIDTH, height)
    made, top = [], height - TOP
    for tall, widths in rows:
        whole = sum(widths) + BESIDE * (len(widths) - 1)
        left, panels = LEFT + (INNER - whole) / 2, []
        for wide in widths:
            place = (left / WIDTH, (top - tall) / height, wide / WIDTH, tall / height)
            panels.append(figure.add_axes(place))
            left += wide + BESIDE
        made.append(panels)
        top -= tall + BETWEEN
    return made
