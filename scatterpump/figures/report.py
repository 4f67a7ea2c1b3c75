"""A report on pages: verdict and findings; the pictures; the device and its file."""

from __future__ import annotations

from pathlib import Path
from textwrap import wrap
from typing import TYPE_CHECKING, Any

from scatterpump.errors import InputError
from scatterpump.figures.device import draw_device
from scatterpump.figures.sheet import draw_sheet
from scatterpump.figures.style import STYLE, WIDTH

if TYPE_CHECKING:
    from scatterpump.report import Report

__all__ = ["write_pages"]

PAGE = 10.2  # inches: it fits on A4 and on US letter paper
MARGIN, LINE, SIZE = 0.45, 0.138, 7.2  # inches, inches, points: 98 characters of a fixed width fit in a line
WIDEST = 102  # characters
SMALLEST = 0.7  # of that size
HEAD = 0.6  # inches for the title of a page


def write_pages(report: Report, path: Path) -> None:
    """Write `report` as a PDF file.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    from matplotlib import rc_context
    from matplotlib.backends.backend_pdf import PdfPages

    title = f"{report.verdict.name}: report"
    try:
        with rc_context(STYLE), PdfPages(path, metadata={"Title": title, "CreationDate": None}) as pages:
            pages.savefig(_verdict_page(report))
            if report.pictures.finished:
                pages.savefig(_pictures_page(report))
            pages.savefig(_device_page(report))
    except OSError as error:
        raise InputError(
            f"the report cannot be written: {error.strerror}", allowed="a writable place", where=str(path)
        ) from error


def _page(title: str) -> Any:
    from matplotlib.figure import Figure

    figure = Figure(figsize=(WIDTH, PAGE))
    figure.text(MARGIN / WIDTH, 1 - 0.42 / PAGE, title, fontsize=13)
    return figure


def _verdict_page(report: Report) -> Any:
    figure = _page(f"Report on a charge pump: {report.verdict.name}")
    _write(figure, report.text(), HEAD + LINE)
    return figure


def _pictures_page(report: Report) -> Any:
    from matplotlib.figure import Figure

    figure = Figure()
    draw_sheet(report.pictures.finished, figure, height=PAGE)
    return figure


def _device_page(report: Report) -> Any:
    from matplotlib.figure import Figure

    figure = Figure()
    draw_device(report.layout, figure)
    drawn = float(figure.get_size_inches()[1])
    _lengthen(figure, drawn, max(PAGE, drawn))
    if PAGE - drawn > 1.0:
        _write(figure, report.listing(), drawn + MARGIN)
    return figure


def _lengthen(figure: Any, drawn: float, height: float) -> None:
    """Make a page of a drawing at its top, at the same scale."""
    figure.set_size_inches(WIDTH, height)
    places = [panel.get_position().bounds for panel in figure.axes]  # first: twins move together
    for panel, (left, bottom, wide, tall) in zip(figure.axes, places, strict=True):
        panel.set_position((left, (height - drawn + bottom * drawn) / height, wide, tall * drawn / height))


def _write(figure: Any, lines: list[str], top: float) -> None:
    """Write lines from `top` inches on; many lines are smaller, and what does not fit is counted."""
    lines = [part for line in lines for part in _wrapped(line)]
    room = PAGE - MARGIN - top
    scale = min(1.0, max(SMALLEST, room / LINE / max(1, len(lines))))
    fits = int(room / (LINE * scale))
    if len(lines) > fits:
        lines = [*lines[: fits - 1], f"... and {len(lines) - fits + 1} more lines"]
    for number, line in enumerate(lines):
        place = 1 - (top + number * LINE * scale) / PAGE
        figure.text(MARGIN / WIDTH, place, line, family="monospace", fontsize=SIZE * scale, va="top", parse_math=False)


def _wrapped(line: str) -> list[str]:
    """Break what is too long for the page, keeping the spaces that make columns."""
    return wrap(line, WIDEST, subsequent_indent="    ", drop_whitespace=False) or [""]
