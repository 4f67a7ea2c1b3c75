"""E - H(phi) and the borders of the leads as blocks between layers, for many phases at once (arrays only).

A block has a fixed part (the energy, the borders) from which elements of H are taken off; what does not change with
phi is formed once. Where every layer is one unknown the blocks are numbers, and three bands hold them all.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.layers import Layers

__all__ = ["Block", "Blocks"]

Complex = NDArray[np.complex128]
Indices = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Block:
    """One block.

    Attributes
    ----------
    fixed : (w, w') complex array
    elements, rows, columns : int arrays
        Which elements of H belong to it, and where.
    moves : bool
        Whether any of them changes with phi.
    """

    fixed: Complex
    elements: Indices
    rows: Indices
    columns: Indices
    moves: bool

    def at(self, entries: Complex) -> Complex:
        """Return the block for each row of `entries` (n, nnz), or once if it does not move."""
        chosen = entries if self.moves else entries[:1]
        result = np.repeat(self.fixed[None], len(chosen), axis=0)
        result[:, self.rows, self.columns] -= chosen[:, self.elements]
        return result


@dataclass(frozen=True, eq=False)
class Blocks:
    """All blocks of a layered problem.

    Attributes
    ----------
    layers : Layers
    energy : float
    rows, columns : (nnz,) int array
        Places of H's elements.
    moves : (nnz,) bool array
        Which of them change with phi.
    orbitals : int
        Number of orbitals; the borders' mode amplitudes are numbered after them.
    """

    layers: Layers
    energy: float
    rows: Indices
    columns: Indices
    moves: NDArray[np.bool_]
    orbitals: int

    @cached_property
    def diagonal(self) -> tuple[Block, ...]:
        """A_nn."""
        return self._blocks(0)

    @cached_property
    def lower(self) -> tuple[Block, ...]:
        """A_n+1,n."""
        return self._blocks(1)

    @cached_property
    def upper(self) -> tuple[Block, ...]:
        """A_n,n+1."""
        return self._blocks(-1)

    def band(self, step: int, entries: Complex) -> Complex:
        """Return all blocks of one `step` (0 diagonal, 1 lower, -1 upper) as numbers, shape (L, n) or (L, 1)."""
        level, count = self.layers.level, len(self.layers.widths)
        near, fits = self._near(self.rows, self.columns, step)
        elements = np.flatnonzero(fits)
        fixed = np.zeros(count, dtype=complex)
        border, inside = self._near(self.layers.rows, self.layers.columns, step)
        fixed[border[inside]] += self.layers.values[inside]
        if step == 0:
            here = level[: self.orbitals]
            fixed[here[here >= 0]] += self.energy
        chosen = entries if self.moves[elements].any() else entries[:1]
        result = np.repeat(fixed[:, None], len(chosen), axis=1)
        result[near[elements]] -= chosen[:, elements].T
        return result[: count - abs(step)]

    def _near(self, rows: Indices, columns: Indices, step: int) -> tuple[Indices, NDArray[np.bool_]]:
        """The nearer layer of each element, and whether its row lies `step` layers beyond its column."""
        level = self.layers.level
        near = np.minimum(level[rows], level[columns])
        return near, (level[rows] - level[columns] == step) & (near >= 0)

    def _blocks(self, step: int) -> tuple[Block, ...]:
        level, place, widths = self.layers.level, self.layers.place, self.layers.widths
        count = len(widths)
        elements, border = (
            _grouped(np.where(fits, near, count), count)
            for near, fits in (
                self._near(self.rows, self.columns, step),
                self._near(self.layers.rows, self.layers.columns, step),
            )
        )
        here = level[: self.orbitals]
        orbitals = _grouped(np.where(here >= 0, here, count), count)
        found = []
        for n in range(count - abs(step)):
            tall, wide = (n + 1, n) if step == 1 else (n, n - step)
            fixed = np.zeros((widths[tall], widths[wide]), dtype=complex)
            if step == 0:
                fixed[place[orbitals[n]], place[orbitals[n]]] = self.energy
            fixed[place[self.layers.rows[border[n]]], place[self.layers.columns[border[n]]]] += self.layers.values[
                border[n]
            ]
            mine = elements[n]
            moves = bool(self.moves[mine].any())
            found.append(Block(fixed, mine, place[self.rows[mine]], place[self.columns[mine]], moves))
        return tuple(found)


def _grouped(labels: Indices, count: int) -> list[Indices]:
    """Positions of every label 0 ... count-1; larger labels are left out."""
    order = np.argsort(labels, kind="stable")
    edges = np.searchsorted(labels[order], np.arange(count + 1))
    return [order[edges[i] : edges[i + 1]] for i in range(count)]
