"""E - H with an absorbing port for every lead, as one sparse matrix whose values alone change from phase to phase.

    A_aug = [[E - H + i V V^+, V], [V^+, 0]],     V = [V_probe, V_1, V_2, ...],

whose Schur complement on the ports is -V^+ (E - H + i V V^+)^-1 V: all that the leads see of the device.  Every orbital
is within reach of an absorber, so a Hermitian device has no level at which this matrix were singular.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.blocks import Blocks
from scatterpump.solver.layers import Border

__all__ = ["Augmented", "augmented"]

Numbers = NDArray[Any]  # float64 where all is real, else complex128
Complex = NDArray[np.complex128]
Indices = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Augmented:
    """A_aug in compressed columns, the ports last.

    Attributes
    ----------
    indptr, indices : int arrays
    fixed : (nnz,) complex array
        Values without the elements of H that move.
    place, elements : int arrays
        Where in the values to take off which of the moving elements.
    ports : int
    """

    indptr: Indices
    indices: Indices
    fixed: Complex
    place: Indices
    elements: Indices
    ports: int

    @property
    def size(self) -> int:
        """Number of rows, the ports with them."""
        return len(self.indptr) - 1

    @property
    def columns(self) -> Indices:
        """Column of every value."""
        return np.repeat(np.arange(self.size), np.diff(self.indptr))

    def at(self, moving: Numbers) -> Complex:
        """Return the values for one phase, shape (nnz,), given the moving elements of H, shape (elements,)."""
        values = self.fixed.copy()
        values[self.place] -= moving[self.elements]
        return values

    @cached_property
    def is_symmetric(self) -> bool:
        """Whether the matrix equals its transpose as long as the moving elements are real."""
        from scipy.sparse import csc_matrix

        matrix = csc_matrix((self.fixed, self.indices, self.indptr), shape=(self.size, self.size))
        return bool((abs(matrix - matrix.T)).max() == 0.0)


def augmented(blocks: Blocks, borders: Sequence[Border]) -> Augmented:
    """Set A_aug up for a device with these leads, the probe first; orbitals that no path leads to are left out."""
    from scipy.sparse import csc_matrix

    inside = np.flatnonzero(blocks.layers.level[: blocks.orbitals] >= 0)
    number = np.full(blocks.orbitals, -1)
    number[inside] = np.arange(len(inside))
    moving = np.flatnonzero((blocks.place >= 0) & (number[blocks.rows] >= 0) & (number[blocks.columns] >= 0))
    down, across = number[blocks.rows[moving]], number[blocks.columns[moving]]
    rows, columns, values = _fixed(blocks, number)
    ports = len(inside)
    for border in borders:
        added = _port(number[border.orbitals], ports, border.hop)
        rows, columns, values = (np.concatenate(pair) for pair in zip((rows, columns, values), added, strict=True))
        ports += border.hop.shape[1]
    matrix = csc_matrix(
        (np.append(values, np.zeros(len(down))), (np.append(rows, down), np.append(columns, across))),
        shape=(ports, ports),
    )
    matrix.sum_duplicates()  # keeps the zeros at the moving elements' places
    keys = np.repeat(np.arange(ports), np.diff(matrix.indptr)) * ports + matrix.indices
    return Augmented(
        matrix.indptr,
        matrix.indices,
        matrix.data,
        np.searchsorted(keys, across * ports + down),
        blocks.place[moving],
        ports - len(inside),
    )


def _fixed(blocks: Blocks, number: Indices) -> tuple[Indices, Indices, Complex]:
    """E - H as far as it stands still, without the borders."""
    rows, columns, values = blocks.fixed
    kept = (rows < blocks.orbitals) & (columns < blocks.orbitals)
    rows, columns, values = rows[kept], columns[kept], values[kept]
    kept = (number[rows] >= 0) & (number[columns] >= 0)
    return number[rows[kept]], number[columns[kept]], values[kept]


def _port(orbitals: Indices, first: int, hop: Complex) -> tuple[Indices, Indices, Complex]:
    """i V V^+, V and V^+ of one lead, without their zeros."""
    ports = first + np.arange(hop.shape[1])
    parts = []
    for down, across, block in (
        (orbitals, orbitals, 1j * hop @ hop.conj().T),
        (orbitals, ports, hop),
        (ports, orbitals, hop.conj().T),
    ):
        row, column = np.nonzero(block)
        parts.append((down[row], across[column], block[row, column]))
    rows, columns, values = (np.concatenate(part) for part in zip(*parts, strict=True))
    return rows, columns, values
