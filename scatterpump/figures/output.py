"""Where a figure goes: into a file, or onto a screen."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path
from typing import Any

from scatterpump.errors import InputError
from scatterpump.figures.style import STYLE

__all__ = ["FORMATS", "check_ending", "has_display", "save", "show"]

FORMATS = (".png", ".pdf", ".svg")
WITHOUT_WINDOWS = {"agg", "cairo", "pdf", "pgf", "ps", "svg", "template"}  # what pyplot falls back to
Draw = Callable[[Any], None]


def save(draw: Draw, path: str | Path) -> None:
    """Let `draw` fill a matplotlib figure, and write it to `path` in the format of its ending.

    Raises
    ------
    InputError
        If the ending is none of .png, .pdf and .svg, or the file cannot be written.
    """
    target = check_ending(path)
    from matplotlib import rc_context
    from matplotlib.figure import Figure

    with rc_context(STYLE):
        figure = Figure()
        draw(figure)
        try:
            figure.savefig(target, metadata={"Date": None} if target.suffix.lower() == ".svg" else None)
        except OSError as error:
            raise InputError(
                f"the drawing cannot be written: {error.strerror}", allowed="a writable place", where=str(path)
            ) from error


def check_ending(path: str | Path) -> Path:
    """Return `path` if its ending names a format, and raise an `InputError` if not: before any long work."""
    target = Path(path)
    if target.suffix.lower() not in FORMATS:
        raise InputError(
            f"the ending {target.suffix!r} is no format of a drawing", allowed=", ".join(FORMATS), where=str(path)
        )
    return target


def show(draw: Draw) -> None:
    """Let `draw` fill a figure in a window, and return when it is closed.

    Raises
    ------
    InputError
        If there is no display to open it on.
    """
    if not has_display():
        raise InputError("there is no display to open a window on", allowed="-o FILE with .png, .pdf or .svg")
    from matplotlib import pyplot, rc_context

    with rc_context(STYLE):
        draw(pyplot.figure())
        pyplot.show()


def has_display() -> bool:
    """Tell whether matplotlib can open windows here."""
    if os.name == "posix" and not (os.environ.get("DISPLAY") or os.environ.get("WAYLAND_DISPLAY")):
        return False
    from matplotlib import pyplot

    return pyplot.get_backend().lower() not in WITHOUT_WINDOWS
