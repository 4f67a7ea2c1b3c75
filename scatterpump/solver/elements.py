"""Blocks as lists of their elements, layer by layer: what the compiled sweep reads (arrays only)."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

__all__ = ["Elements", "listed", "listed_all", "tabled"]

Numbers = NDArray[Any]  # float64 where all is real, else complex128
Complex = NDArray[np.complex128]
Indices = NDArray[np.int64]
NONE = np.zeros(0, dtype=np.int64)


ENTRY = np.dtype([("row", "i8"), ("column", "i8"), ("place", "i8"), ("real", "f8"), ("imag", "f8")])
PARTS = ("diagonal", "lower", "upper", "wanted")
LAYER = np.dtype(
    [("width", "i8"), *((name + end, "i8") for name in PARTS for end in ("", "_end")), ("picks", "?"), ("plain", "?")]
)


class Elements(NamedTuple):
    """Elements of the blocks of one diagonal; several in one place add up.

    Attributes
    ----------
    starts : (blocks + 1,) int array
        Where the elements of each block begin.
    entries : record array
        For every element its row and column in the block, the number of the moving element that is taken off or -1
        for none, and its value's real and imaginary part.
    picks : (blocks,) bool array
        Whether the block has at most one element in each line that counts: rows of upper, columns of lower blocks.
    """

    starts: Indices
    entries: NDArray[Any]
    picks: NDArray[np.bool_]

    @property
    def varied(self) -> NDArray[np.bool_]:
        """Whether each block has any element that moves or is not real, shape (blocks,)."""
        odd = np.flatnonzero((self.entries["place"] >= 0) | (self.entries["imag"] != 0))
        return np.asarray(np.diff(np.searchsorted(odd, self.starts)) > 0)

    def beyond(self, first: int) -> Elements:
        """The blocks from number `first` on."""
        return self._replace(starts=self.starts[first:], picks=self.picks[first:])


def listed(
    number: Indices, rows: Indices, columns: Indices, values: Complex, places: Indices, *, count: int, lines: Indices
) -> Elements:
    """Sort elements by the `number` of their block, of which there are `count`; `lines` is rows or columns."""
    order = np.argsort(number, kind="stable")
    picks = np.ones(count, dtype=bool)
    if len(lines):
        key = number * (int(lines.max()) + 1) + lines
        kinds, times = np.unique(key, return_counts=True)
        picks[kinds[times > 1] // (int(lines.max()) + 1)] = False
    starts = np.searchsorted(number[order], np.arange(count + 1))
    entries = np.empty(len(order), dtype=ENTRY)
    for name, column in zip(ENTRY.names or (), (rows, columns, places, values.real, values.imag), strict=True):
        entries[name] = column[order]
    return Elements(starts, entries, picks)


def tabled(widths: Indices, parts: Sequence[Elements]) -> tuple[NDArray[Any], NDArray[Any]]:
    """Put the diagonal, lower, upper and wanted elements of all layers into one list, and where they are into another.

    Returns
    -------
    layers : record array
        For every layer its width, where each part's elements begin and end, whether both couplings pick elements, and
        whether they are real and stand still as well.
    entries : record array
        As in `Elements`.
    """
    layers, used = np.zeros(len(widths), dtype=LAYER), 0
    layers["width"] = widths
    for name, part in zip(PARTS, parts, strict=True):
        count = len(part.starts) - 1
        layers[name][:count], layers[name + "_end"][:count] = used + part.starts[:-1], used + part.starts[1:]
        used += len(part.entries)
    layers["picks"][:-1] = parts[1].picks & parts[2].picks
    layers["plain"][:-1] = layers["picks"][:-1] & ~parts[1].varied & ~parts[2].varied
    return layers, np.concatenate([part.entries for part in parts])


def listed_all(diagonals: Sequence[Sequence[Numbers]], count: int) -> tuple[list[Elements], Numbers]:
    """Elements of stacks of blocks, for each of several diagonals (the main one, lower, upper, ...), and what moves.

    A stack that holds one block, or that repeats one, stands still; of the others every element moves.
    """
    found, moving, used = [], [np.zeros((count, 0))], 0
    for blocks, axis in zip(diagonals, (0, 1, 0, 0), strict=False):
        parts: list[tuple[Any, ...]] = [(NONE, NONE, NONE, np.zeros(0, dtype=complex), NONE)]
        for n, block in enumerate(blocks):
            if len(block) == 1 or block.strides[0] == 0:
                rows, columns = block[0].nonzero()
                parts.append((np.full(len(rows), n), rows, columns, block[0][rows, columns], np.full(len(rows), -1)))
            else:
                rows, columns = (each.ravel() for each in np.indices(block.shape[1:]))
                places = used + np.arange(len(rows))
                moving.append(-block.reshape(count, -1))
                parts.append((np.full(len(rows), n), rows, columns, np.zeros(len(rows)), places))
                used += len(rows)
        together = [np.concatenate(each) for each in zip(*parts, strict=True)]
        found.append(listed(*together, count=len(blocks), lines=together[1 + axis]))
    return found, np.concatenate(moving, axis=1)
