"""Several pictures on one sheet, in two columns."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from scatterpump.figures.catalogue import Picture
from scatterpump.figures.style import WIDTH

__all__ = ["draw_sheet"]

TALL = 2.55  # inches of a row
SINGLE = (5.0, 3.4)  # inches of a picture alone


def draw_sheet(drawings: Sequence[tuple[Picture, Any]], figure: Any, *, height: float | None = None) -> None:
    """Draw pictures and their results into an empty figure; `height` in inches, by default as tall as they need."""
    count = len(drawings)
    columns = min(count, 2)
    rows = -(-count // columns)
    figure.set_size_inches(*(SINGLE if count == 1 and height is None else (WIDTH, height or TALL * rows)))
    figure.set_layout_engine("constrained", w_pad=0.06, h_pad=0.07, wspace=0.02)
    for place, (picture, result) in enumerate(drawings):
        picture.draw(result, figure.add_subplot(rows, columns, place + 1))
