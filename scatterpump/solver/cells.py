"""Where the layers of a device repeat: the longest run of equal cells (arrays only).

Everything known about a layer, its own block and the one that couples it to the next, stands in one row of a table:
places, and for each place the part that stands still and the coefficients of the part that moves.  A run is found by
one number a layer, and then verified entry by entry.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.blocks import Blocks

__all__ = ["LayerTable", "Run", "layer_table", "longest_run"]

Complex = NDArray[np.complex128]
Indices = NDArray[np.int64]
SAME = 1e-11  # of the largest element: what rounding of 2 pi x / p does to a wave after thousands of sites
ALIKE = 1e-9
LONGEST_CELL = 64
FEWEST_CELLS = 3


@dataclass(frozen=True)
class Run:
    """Equal cells one after the other.

    Attributes
    ----------
    first : int
        First layer of the first cell.
    length : int
        Layers a cell.
    repeats : int
        Number of cells.
    """

    first: int
    length: int
    repeats: int


@dataclass(frozen=True, eq=False)
class LayerTable:
    """Elements of every layer.

    Attributes
    ----------
    places : (L, c) int array
        Where each element stands, -1 beyond the last one.
    values : (L, c, s) complex array
        What is known about it.
    """

    places: Indices
    values: Complex


def layer_table(blocks: Blocks, coefficients: Complex) -> LayerTable:
    """Sort all elements by layer.

    Parameters
    ----------
    blocks : Blocks
    coefficients : (s, elements) complex array
        What describes the moving elements along the cycle.
    """
    layers, count, widest = blocks.layers, len(blocks.layers.widths), int(blocks.layers.widths.max())
    inner = len(blocks.fixed[0]) - len(layers.rows)  # without the borders: no layer with a border equals another
    rows, columns, values = (part[:inner] for part in blocks.fixed)
    moving = np.flatnonzero(blocks.place >= 0)
    every = np.zeros((len(rows) + len(moving), 1 + len(coefficients)), dtype=complex)
    every[: len(rows), 0] = values
    every[len(rows) :, 1:] = coefficients.T[blocks.place[moving]]
    rows, columns = np.concatenate([rows, blocks.rows[moving]]), np.concatenate([columns, blocks.columns[moving]])
    near = np.minimum(layers.level[rows], layers.level[columns])
    step = layers.level[rows] - layers.level[columns] + 1
    kept = near >= 0
    inside = (step * widest + layers.place[rows]) * widest + layers.place[columns]
    keys, where = np.unique(near[kept] * 3 * widest**2 + inside[kept], return_inverse=True)
    summed = np.zeros((len(keys), every.shape[1]), dtype=complex)
    np.add.at(summed, where, every[kept])
    layer, place = np.divmod(keys, 3 * widest**2)
    starts = np.searchsorted(layer, np.arange(count + 1))
    column = np.arange(len(keys)) - starts[layer]
    shape = (count, int(column.max(initial=0)) + 2)
    places, table = np.full(shape, -1), np.zeros((*shape, every.shape[1]), dtype=complex)
    places[layer, column], table[layer, column] = place, summed
    bordered = np.minimum(layers.level[layers.rows], layers.level[layers.columns])
    places[bordered, -1] = -2 - bordered
    return LayerTable(places, table)


def longest_run(table: LayerTable) -> Run | None:
    """Return the run that covers most layers, with the shortest cell that does; None for fewer than three cells."""
    marks = _marks(table)
    best, most = None, 0
    for length in range(1, min(LONGEST_CELL, len(marks) // FEWEST_CELLS) + 1):
        alike = np.abs(marks[length:] - marks[:-length]) <= ALIKE * np.abs(marks).max(initial=1e-300)
        start, stop = _longest_stretch(alike)
        repeats = (stop - start + length) // length
        if repeats >= FEWEST_CELLS and repeats * length > most + LONGEST_CELL * (most > 0):
            best, most = Run(start, length, repeats), repeats * length
    return best if best is not None and _verified(table, best) else None


def _marks(table: LayerTable) -> Complex:
    """One number a layer, nearly equal for equal layers."""
    weights = 1 + np.arange(1, table.values[0].size + 1) * 0.6180339887498949 % 1
    where = 1 + table.places * 0.7548776662466927 % 1
    marks: NDArray[Any] = (table.values * where[..., None]).reshape(len(table.places), -1) @ weights
    lone = np.abs(marks).max(initial=1.0) * np.arange(len(marks))
    return np.where(table.places[:, -1] < -1, lone, marks)


def _longest_stretch(true: NDArray[np.bool_]) -> tuple[int, int]:
    """Start and end of the longest stretch of True."""
    edges = np.flatnonzero(np.diff(np.concatenate([[False], true, [False]]).astype(int)))
    starts, stops = edges[::2], edges[1::2]
    if not starts.size:
        return 0, 0
    longest = int((stops - starts).argmax())
    return int(starts[longest]), int(stops[longest])


def _verified(table: LayerTable, run: Run) -> bool:
    """Whether every layer of the run is that of its first cell, entry by entry."""
    layers = run.first + np.arange(run.length * run.repeats)
    model = run.first + (layers - run.first) % run.length
    scale = np.abs(table.values).max()
    same = np.abs(table.values[layers] - table.values[model]).max() <= SAME * scale
    return bool(same and (table.places[layers] == table.places[model]).all())
