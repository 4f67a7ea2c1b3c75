"""How figures look: few colours, legible in greyscale and to colour-blind readers; darker means more."""

from __future__ import annotations

from typing import Any

__all__ = ["ACCENT", "GREY", "INK", "PALE", "STYLE", "WIDTH", "cycle_map", "strength_map"]

WIDTH = 7.2  # inches, a text column and a half
INK, GREY, PALE = "#222222", "#8a8a8a", "#d4d4d4"
ACCENT = "#c2410c"  # always with dashes or hatches as well, so that grey paper keeps the difference
STYLE: Any = {
    "font.size": 9,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.edgecolor": GREY,
    "axes.labelcolor": INK,
    "axes.titlesize": 9,
    "axes.titlelocation": "left",
    "xtick.color": INK,
    "ytick.color": INK,
    "text.color": INK,
    "figure.dpi": 110,
    "savefig.dpi": 160,
    "svg.hashsalt": "scatterpump",  # the same figure is the same file
}


def strength_map() -> Any:
    """Return a colour map from pale (little) to dark (much), in order in greyscale as well."""
    from matplotlib import colormaps
    from matplotlib.colors import ListedColormap

    return ListedColormap(colormaps["cividis_r"]([0.12 + 0.88 * i / 255 for i in range(256)]))


def cycle_map() -> Any:
    """Return the colour map of phi from 0 (dark) to 2 pi (pale): where a cycle begins and ends stays visible."""
    from matplotlib import colormaps

    return colormaps["cividis"]
