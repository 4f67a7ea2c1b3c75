"""E - H(phi) and the borders of the leads as blocks between layers, for many phases at once (arrays only).

A block has a fixed part (the energy, the borders, the elements of H that stand still) from which the elements that
change with phi are taken off.  Where every layer is one unknown the blocks are numbers in three bands.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.elements import Elements, listed
from scatterpump.solver.layers import Layers

__all__ = ["Band", "Block", "Blocks", "Picks", "Stack", "picked"]

Numbers = NDArray[Any]  # float64 where all is real, else complex128
Complex = NDArray[np.complex128]
Indices = NDArray[np.int64]
Picks = tuple[Indices, Numbers]


def picked(coupling: Numbers) -> Picks | None:
    """For every row of one still block (1, w, w') the column of its only element and that element, else None."""
    if len(coupling) != 1 or (np.count_nonzero(coupling[0], axis=1) > 1).any():
        return None
    place = np.abs(coupling[0]).argmax(axis=1)
    return place, coupling[0][np.arange(len(place)), place]


@dataclass(frozen=True, eq=False)
class Block:
    """One block.

    Attributes
    ----------
    fixed : (w, w') array
        Real if all its elements are.
    elements, rows, columns : int arrays
        Which of the moving elements of H belong to it, and where.
    """

    fixed: Numbers
    elements: Indices
    rows: Indices
    columns: Indices

    @property
    def moves(self) -> bool:
        """Whether any element changes with phi."""
        return bool(self.elements.size)

    @cached_property
    def picks(self) -> Picks | None:
        """For every row the column of its only element and that element; None if rows have more, or change."""
        return None if self.moves else picked(self.fixed[None])

    @cached_property
    def picks_down(self) -> Picks | None:
        """For every column the row of its only element and that element; None if columns have more, or change."""
        return None if self.moves else picked(self.fixed.T[None])

    def at(self, moving: Numbers) -> Numbers:
        """Return the block for each row of `moving` (n, elements), shape (n, w, w'), or (1, w, w') if it is still."""
        if not self.moves:
            return self.fixed[None]
        result = np.empty((len(moving), *self.fixed.shape), dtype=np.result_type(self.fixed, moving))
        result[:] = self.fixed
        result[:, self.rows, self.columns] -= moving[:, self.elements]
        return result


@dataclass(frozen=True, eq=False)
class Band(Sequence[Any]):
    """Blocks of one row each: a number, or shape (n,) where it moves, formed when it is asked for.

    Attributes
    ----------
    fixed : list of float or complex
    place : list of int
        Which of the moving elements is taken off, -1 for none.
    moving : (elements, n) array
    """

    fixed: list[Any]
    place: list[int]
    moving: Numbers

    def __len__(self) -> int:
        return len(self.fixed)

    def __getitem__(self, n: Any) -> Any:
        place = self.place[n]
        return self.fixed[n] if place < 0 else self.fixed[n] - self.moving[place]

    @property
    def is_still(self) -> bool:
        """Whether no block moves."""
        return max(self.place, default=-1) < 0

    def beyond(self, first: int) -> Band:
        """The blocks from number `first` on."""
        return Band(self.fixed[first:], self.place[first:], self.moving)

    def rows(self, first: int, end: int) -> Numbers:
        """Blocks `first` to `end` - 1 together, shape (end - first, n)."""
        place, fixed = np.array(self.place[first:end]), np.array(self.fixed[first:end])
        kind = np.result_type(fixed, self.moving)
        if (place < 0).all():
            return np.repeat(fixed.astype(kind)[:, None], self.moving.shape[1], axis=1)
        rows = self.moving[place].astype(kind, copy=False)
        rows[place < 0] = 0.0
        return np.asarray(np.subtract(fixed[:, None], rows, out=rows))


@dataclass(frozen=True, eq=False)
class Stack(Sequence[Numbers]):
    """Blocks of one diagonal from a layer on, each formed for all phases when it is asked for.

    Attributes
    ----------
    blocks : Blocks
    step : int
        0 for A_nn, 1 for A_n+1,n, -1 for A_n,n+1.
    first : int
        The layer of the first block.
    moving : (n, elements) array
    """

    blocks: Blocks
    step: int
    first: int
    moving: Numbers

    def __len__(self) -> int:
        return len(self.blocks.layers.widths) - abs(self.step) - self.first

    def __getitem__(self, n: Any) -> Any:
        block = self.blocks.block(self.step, self.first + range(len(self))[n]).at(self.moving)
        return block if self.step else np.broadcast_to(block, (len(self.moving), *block.shape[1:]))

    def picks(self, n: int) -> Picks | None:
        """Which element each row of block n picks, or for the lower blocks each column; None if any has more."""
        block = self.blocks.block(self.step, self.first + n)
        return block.picks_down if self.step == 1 else block.picks

    @property
    def elements(self) -> Elements:
        """The same blocks as lists of elements."""
        return self.blocks.elements(self.step).beyond(self.first)


@dataclass(frozen=True, eq=False)
class Blocks:
    """All blocks of a layered problem.

    Attributes
    ----------
    layers : Layers
    energy : float
    rows, columns : (nnz,) int array
        Places of H's elements.
    still : (nnz,) complex array
        Their values, 0 for those that move.
    place : (nnz,) int array
        Number of each element among those that move, -1 for those that do not.
    orbitals : int
        Number of orbitals; the borders' mode amplitudes are numbered after them.
    """

    layers: Layers
    energy: float
    rows: Indices
    columns: Indices
    still: Complex
    place: Indices
    orbitals: int

    def diagonal(self, n: int) -> Block:
        """A_nn."""
        return self.block(0, n)

    def lower(self, n: int) -> Block:
        """A_n+1,n."""
        return self.block(1, n)

    def upper(self, n: int) -> Block:
        """A_n,n+1."""
        return self.block(-1, n)

    @cached_property
    def fixed(self) -> tuple[Indices, Indices, Complex]:
        """Rows, columns and values of the part of E - H and the borders that stands still."""
        here = np.arange(self.orbitals)
        quiet = self.place < 0
        return (
            np.concatenate([here, self.rows[quiet], self.layers.rows]),
            np.concatenate([here, self.columns[quiet], self.layers.columns]),
            np.concatenate([np.full(len(here), self.energy, dtype=complex), -self.still[quiet], self.layers.values]),
        )

    @cached_property
    def real_below(self) -> int:
        """The first so many layers have real fixed parts, and real couplings between them."""
        rows, columns, values = self.fixed
        near = np.minimum(self.layers.level[rows], self.layers.level[columns])
        return int(near[(values.imag != 0) & (near >= 0)].min(initial=len(self.layers.widths)))

    def band(self, step: int, moving: Numbers) -> Band:
        """Return all blocks of one `step` (0 diagonal, 1 lower, -1 upper) where every layer is one unknown."""
        count = len(self.layers.widths)
        rows, columns, values = self.fixed
        near, fits = self._near(rows, columns, step)
        fixed = np.zeros(count, dtype=complex)
        np.add.at(fixed, near[fits], values[fits])
        near, fits = self._near(self.rows, self.columns, step)
        chosen = np.flatnonzero(fits & (self.place >= 0))
        place = np.full(count, -1)
        place[near[chosen]] = self.place[chosen]
        numbers = [value if value.imag else value.real for value in fixed[: count - abs(step)].tolist()]
        return Band(numbers, place.tolist(), moving.T)

    def _near(self, rows: Indices, columns: Indices, step: int) -> tuple[Indices, NDArray[np.bool_]]:
        """The nearer layer of each element, and whether its row lies `step` layers beyond its column."""
        level = self.layers.level
        near = np.minimum(level[rows], level[columns])
        return near, (level[rows] - level[columns] == step) & (near >= 0)

    def elements(self, step: int) -> Elements:
        """All blocks of one `step` as lists of elements."""
        if step not in self._listed:
            count = len(self.layers.widths) - abs(step)
            rows, columns, values = self.fixed
            near, fits = self._near(rows, columns, step)
            still = near[fits], rows[fits], columns[fits], values[fits], np.full(int(fits.sum()), -1)
            near, fits = self._near(self.rows, self.columns, step)
            fits &= self.place >= 0
            moving = near[fits], self.rows[fits], self.columns[fits], np.zeros(int(fits.sum())), self.place[fits]
            number, rows, columns, values, place = map(np.concatenate, zip(still, moving, strict=True))
            rows, columns = self.layers.place[rows], self.layers.place[columns]
            lines = columns if step == 1 else rows
            self._listed[step] = listed(number, rows, columns, values, place, count=count, lines=lines)
        return self._listed[step]

    @cached_property
    def _listed(self) -> dict[int, Elements]:
        return {}

    def block(self, step: int, n: int) -> Block:
        """The block of layer n, `step` (0, 1, -1) as in `Stack`."""
        if (step, n) not in self._made:
            self._made[step, n] = self._formed(step, n)
        return self._made[step, n]

    @cached_property
    def _made(self) -> dict[tuple[int, int], Block]:
        return {}

    @cached_property
    def _groups(self) -> dict[int, tuple[list[Indices], list[Indices]]]:
        """For every step the fixed and the moving elements of each block."""
        rows, columns, _ = self.fixed
        count, found = len(self.layers.widths), {}
        for step in (0, 1, -1):
            near, fits = self._near(rows, columns, step)
            quiet = _grouped(np.where(fits, near, count), count)
            near, fits = self._near(self.rows, self.columns, step)
            found[step] = quiet, _grouped(np.where(fits & (self.place >= 0), near, count), count)
        return found

    def _formed(self, step: int, n: int) -> Block:
        place, widths = self.layers.place, self.layers.widths
        rows, columns, values = self.fixed
        quiet, moving = (groups[n] for groups in self._groups[step])
        tall, wide = (n + 1, n) if step == 1 else (n, n - step)
        fixed = np.zeros((widths[tall], widths[wide]), dtype=complex)
        np.add.at(fixed, (place[rows[quiet]], place[columns[quiet]]), values[quiet])
        return Block(_narrowed(fixed), self.place[moving], place[self.rows[moving]], place[self.columns[moving]])


def _narrowed(values: Complex) -> Numbers:
    """The same as real numbers, if they are."""
    return values if values.imag.any() else np.ascontiguousarray(values.real)


def _grouped(labels: Indices, count: int) -> list[Indices]:
    """Positions of every label 0 ... count-1; larger labels are left out."""
    order = np.argsort(labels, kind="stable")
    edges = np.searchsorted(labels[order], np.arange(count + 1))
    return [order[edges[i] : edges[i + 1]] for i in range(count)]
