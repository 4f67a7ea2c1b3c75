"""The map of integers from a gathered sweep, with everything unproven hatched."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import InputError
from scatterpump.figures.axes import colour_bar
from scatterpump.figures.style import INK, cycle_map

__all__ = ["integer_map"]

Floats = NDArray[np.float64]


def integer_map(data: Any, ax: Any) -> Any:
    """Draw the proven integers of a sweep over two axes.

    Parameters
    ----------
    data : xarray.Dataset
        As `gather_sweep` makes it, with the variable ``integer`` over two dimensions, nan where there is none, and
        ``proven`` if it was kept: 1 where the proof covers every phi.
    ax : matplotlib axes

    Raises
    ------
    InputError
        If there are no integers, or over more or fewer than two dimensions.
    """
    from matplotlib.colors import BoundaryNorm, ListedColormap

    integers, (down, across) = _table(data)
    x, y = _coordinate(data, across), _coordinate(data, down)
    grid = (_edges(x[0]), _edges(y[0]))
    known = np.unique(integers[np.isfinite(integers)]).astype(int)
    if known.size:
        values = np.arange(known.min(), known.max() + 1)
        colours = ListedColormap(cycle_map()(np.linspace(0.25, 1.0, len(values))))
        norm = BoundaryNorm(np.append(values, values[-1] + 1) - 0.5, len(values))
        drawn = ax.pcolormesh(*grid, np.ma.masked_invalid(integers), cmap=colours, norm=norm, rasterized=True)
        bar = colour_bar(drawn, ax, "charges a cycle (1)")
        bar.set_ticks(values, labels=[f"{value:+d}" if value else "0" for value in values])
    open_ones = np.ma.masked_where(_is_proven(data, integers), np.ones_like(integers))
    if open_ones.count():
        clear = ListedColormap(["#00000000"])
        ax.pcolor(*grid, open_ones, cmap=clear, hatch="////", edgecolor=INK, linewidth=0.0)
    ax.set(xlim=(grid[0][0], grid[0][-1]), ylim=(grid[1][0], grid[1][-1]))
    for axis, (places, label, names) in ((ax.xaxis, x), (ax.yaxis, y)):
        axis.set_label_text(label)
        if names:
            axis.set_ticks(places, names)
    ax.set_title("proven integers; hatched where there is no proof")
    return ax


def _table(data: Any) -> tuple[Floats, tuple[str, str]]:
    try:
        integers = data["integer"]
    except KeyError:
        raise InputError("the sweep holds no integers", allowed='a sweep that keeps "integer"') from None
    if len(integers.dims) != 2:
        raise InputError(
            f"the integers lie over {', '.join(map(str, integers.dims)) or 'no axis'}",
            allowed="two axes; select points of the others first, as with data.isel(seed=0)",
        )
    down, across = integers.dims
    return np.asarray(integers.values, dtype=float), (str(down), str(across))


def _is_proven(data: Any, integers: Floats) -> NDArray[np.bool_]:
    there = np.isfinite(integers)
    try:
        return np.asarray(there & (np.asarray(data["proven"].values, dtype=float) == 1))
    except KeyError:
        return np.asarray(there)  # an integer is only ever kept where it is proven


def _coordinate(data: Any, name: str) -> tuple[Floats, str, list[str]]:
    """Places along one axis, its label with the unit, and names of the places where they are no numbers."""
    values, attributes = np.asarray(data[name].values), data[name].attrs
    label = f"{attributes.get('long_name', name)} ({attributes.get('units', '1')})"
    if values.dtype.kind in "iuf":
        return values.astype(float), label, []
    return np.arange(len(values), dtype=float), label, [str(value) for value in values]


def _edges(centres: Floats) -> Floats:
    """Edges of the cells about `centres`."""
    if len(centres) == 1:
        return np.array([centres[0] - 0.5, centres[0] + 0.5])
    middles = (centres[1:] + centres[:-1]) / 2
    return np.concatenate([[2 * centres[0] - middles[0]], middles, [2 * centres[-1] - middles[-1]]])
