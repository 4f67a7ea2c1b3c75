"""What H does along the cycle, sampled: how large every element is, how far it strays, and how it steps.

Nothing is proven here: the phases are even ones and the corners of the cycle, from 0 to 2 pi, both included.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from scatterpump.pump import Pump
from scatterpump.solver.hamiltonian import DrivenHamiltonian, driven_path

__all__ = ["NOTHING", "Motion", "watch"]

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
Indices = NDArray[np.int64]
TURN = 2 * np.pi
EVEN = 64
MOST_CORNERS = 128
FOR_MEAN = 16
MEMORY = 2**22  # complex numbers held at a time
NOTHING = 1e-15  # of the largest element: less than double precision can tell from 0


@dataclass(frozen=True, eq=False)
class Motion:
    """The matrix elements of H along the cycle.

    Attributes
    ----------
    driven : DrivenHamiltonian
        Where the elements are, and how to ask for more of them.
    phases : (n,) float array
        0 ... 2 pi.
    largest : (nnz,) float array
        Largest modulus of every element.
    change : (nnz,) float array
        Largest distance of every element from its mean over the cycle: the amplitude of a wave.
    longest_step, mean_step : (nnz,) float array
        Change of every element from one phase to the next.
    longest_at : (nnz,) int array
        Number of the phase after which the longest step comes.
    closure : (nnz,) float array
        |H(2 pi) - H(0)|.
    skew : (nnz,) float array
        Largest |H_ij - H_ji*|.
    """

    driven: DrivenHamiltonian
    phases: Floats
    largest: Floats
    change: Floats
    longest_step: Floats
    mean_step: Floats
    longest_at: Indices
    closure: Floats
    skew: Floats

    @property
    def scale(self) -> float:
        """The largest element met."""
        return float(self.largest.max(initial=0.0))

    @property
    def is_there(self) -> NDArray[np.bool_]:
        """Which elements differ from 0 at some phase, shape (nnz,)."""
        return np.asarray(self.largest > NOTHING * self.scale)

    @property
    def moves(self) -> NDArray[np.bool_]:
        """Which elements change by more than rounding, shape (nnz,)."""
        return np.asarray(self.change > NOTHING * np.maximum(self.scale, 1e3 * self.largest))

    @cached_property
    def site_of(self) -> Indices:
        """Site of every orbital."""
        return np.repeat(np.arange(len(self.driven.offsets) - 1), np.diff(self.driven.offsets))

    @cached_property
    def parts(self) -> Indices:
        """Number of the connected part that every orbital belongs to, joined by elements that are there."""
        from scipy.sparse import coo_matrix
        from scipy.sparse.csgraph import connected_components

        there, size = self.is_there, self.driven.size
        places = (self.driven.rows[there], self.driven.columns[there])
        graph = coo_matrix((np.ones(int(there.sum())), places), shape=(size, size))
        return np.asarray(connected_components(graph, directed=False)[1], dtype=np.int64)

    def at_sites(self, values: Floats, sites: int) -> Floats:
        """Return the largest of `values` (nnz,) within every site's own block."""
        own = self.site_of[self.driven.rows] == self.site_of[self.driven.columns]
        found = np.zeros(sites)
        np.maximum.at(found, self.site_of[self.driven.rows[own]], values[own])
        return found

    def at_bonds(self, values: Floats, bonds: Indices) -> Floats:
        """Return the largest of `values` (nnz,) within the block of every bond, shape (bonds,)."""
        a, b = (self.site_of[places] for places in (self.driven.rows, self.driven.columns))
        count = len(self.driven.offsets)
        keys = np.minimum(a, b) * count + np.maximum(a, b)
        known = bonds[:, 0] * count + bonds[:, 1]
        order = np.argsort(known)
        hops = np.flatnonzero(a != b)
        found = np.zeros(len(bonds))
        np.maximum.at(found, order[np.searchsorted(known[order], keys[hops])], values[hops])
        return found


def watch(pump: Pump) -> Motion:
    """Sample H along the cycle of `pump`.

    Raises
    ------
    SolverError
        If a value function fails or H is not finite; it says where.
    """
    driven, _ = driven_path(pump)
    phases = _phases(pump)
    transposed = _transposed(driven)
    chunk = max(3, MEMORY // max(1, len(driven.rows)))
    first = before = driven.at(0.0)
    mean = driven.many(TURN * np.arange(FOR_MEAN) / FOR_MEAN).mean(axis=0)
    largest, change, skew = np.abs(first), np.abs(first - mean), np.abs(first - first[transposed].conj())
    longest, path, at = np.zeros(len(first)), np.zeros(len(first)), np.zeros(len(first), dtype=np.int64)
    for start in range(1, len(phases), chunk):
        values = driven.many(phases[start : start + chunk])
        largest = np.maximum(largest, np.abs(values).max(axis=0))
        change = np.maximum(change, np.abs(values - mean).max(axis=0))
        skew = np.maximum(skew, np.abs(values - values[:, transposed].conj()).max(axis=0))
        steps = np.abs(np.diff(values, axis=0, prepend=before[None]))
        at = np.where(steps.max(axis=0) > longest, start - 1 + steps.argmax(axis=0), at)
        longest, path = np.maximum(longest, steps.max(axis=0)), path + steps.sum(axis=0)
        before = values[-1]
    return Motion(driven, phases, largest, change, longest, path / (len(phases) - 1), at, np.abs(before - first), skew)


def _phases(pump: Pump) -> Floats:
    corners = np.array(pump.cycle.corners)
    some = corners[:: -(-len(corners) // MOST_CORNERS)] if len(corners) else corners
    every = np.unique(np.concatenate([np.linspace(0.0, TURN, EVEN + 1), some]))
    return every[(every >= 0) & (every <= TURN)]


def _transposed(driven: DrivenHamiltonian) -> Indices:
    """Number of the element on the other side of the diagonal, for each element."""
    keys, turned = driven.rows * driven.size + driven.columns, driven.columns * driven.size + driven.rows
    order = np.argsort(keys)
    return np.asarray(order[np.searchsorted(keys[order], turned)], dtype=np.int64)
