"""Where the layers of a device repeat: the longest run of equal cells (arrays only).

Everything known about a layer, its own block and the one that couples it to the next, stands in one row of a table:
places, and for each place the part that stands still and the coefficients of the part that moves.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.blocks import Blocks
from scatterpump.solver.period import Run, longest_run

__all__ = ["LayerTable", "layer_table", "repeated_cells"]

Complex = NDArray[np.complex128]
Indices = NDArray[np.int64]
SAME = 1e-11  # of the largest element: what rounding of 2 pi x / p does to a wave after thousands of sites
LONGEST_CELL = 64
FEWEST_CELLS = 3


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


def repeated_cells(table: LayerTable) -> Run | None:
    """Return the longest run of at least three equal cells, or None."""
    rows = np.concatenate([table.places[..., None], table.values], axis=2)
    scale, count = float(np.abs(table.values).max(initial=0.0)), len(rows)
    rows[..., 0] *= scale  # places differ by far more than a rounding
    counted = np.ones(count, dtype=bool), np.zeros(count - 1, dtype=bool)
    hops = [np.zeros((1, 1), dtype=complex)] * (count - 1)  # they stand in the rows
    run = longest_run(list(rows), hops, counted, longest_cell=LONGEST_CELL, same=SAME)
    return run if run is not None and run.repeats >= FEWEST_CELLS else None
