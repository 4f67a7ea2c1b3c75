"""Orbitals in layers by their distance from the probe: what makes E - H block tridiagonal, whatever the geometry.

All leads but the probe are bordered in as further unknowns, the amplitudes of their outgoing and evanescent modes,
exactly as kwant does:

    (E - H) psi - V u_out s = V u_in,      -V^+ psi + l_out s = -l_in,

so no drain self-energy is ever formed.  The amplitudes are counted in units of the square root of the lead's hopping,
and the second equation is multiplied by it, so that all elements are energies.  Two orbitals whose distances differ by
more than one are not coupled; the first layer is the probe's interface, in the order of the probe's own unknowns.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.hamiltonian import DrivenHamiltonian

__all__ = ["Border", "Layers", "bordered", "distances", "layer", "lead_border"]

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
Indices = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Border:
    """The modes of one lead in kwant's stabilised form, and the orbitals they couple to.

    Attributes
    ----------
    orbitals : (k,) int array
    hop : (k, k') complex array
        V, the hopping from the device into the lead.
    out, out_bare : (k', m') complex array
        u_out and l_out: outgoing modes first, then evanescent ones.
    into, into_bare : (k', m) complex array
        u_in and l_in.
    channels : int
        Number m of open modes.

    All but `orbitals` and `hop` may have a leading axis: one set of modes for each of n energies.
    """

    orbitals: Indices
    hop: Complex
    out: Complex
    out_bare: Complex
    into: Complex
    into_bare: Complex
    channels: int

    def matches(self, other: Border) -> bool:
        """Whether another energy's border has as many modes of each kind, behind the same hopping."""
        return (
            self.channels == other.channels
            and self.out.shape == other.out.shape
            and np.array_equal(self.hop, other.hop)
        )


def lead_border(lead: Any, interface: Any, offsets: Indices, energy: float) -> Border | None:
    """Return the border of a lead with precalculated modes, or None if nothing hops into it."""
    modes = lead.modes(energy)[1]
    if modes.vecs.shape[1] == 0:
        return None
    orbitals = np.concatenate([np.arange(offsets[i], offsets[i + 1]) for i in interface])[: len(modes.sqrt_hop)]
    m = modes.nmodes
    return Border(
        orbitals,
        np.asarray(modes.sqrt_hop, dtype=complex),
        modes.vecs[:, m:],
        modes.vecslmbdainv[:, m:],
        modes.vecs[:, :m],
        modes.vecslmbdainv[:, :m],
        m,
    )


@dataclass(frozen=True, eq=False)
class Layers:
    """Unknowns in layers.

    Attributes
    ----------
    level, place : (N,) int array
        Layer of every unknown, -1 if no path leads to it, and its number within the layer.
    widths : (L,) int array
        Number of unknowns in each layer.
    rows, columns : int arrays
        Places of the borders' elements, counted like orbitals with the modes' amplitudes after them.
    values : complex array
        Those elements, with the sign of E - H.
    outgoing : int array
        Unknowns that are amplitudes of open outgoing modes, lead by lead.
    weights : float array
        The amplitude that one of each is.
    """

    level: Indices
    place: Indices
    widths: Indices
    rows: Indices
    columns: Indices
    values: Complex
    outgoing: Indices
    weights: Floats


def layer(driven: DrivenHamiltonian, probe: Border, others: list[Border]) -> Layers:
    """Sort orbitals and mode amplitudes into layers, beginning at the probe's interface."""
    rows, columns, values, outgoing, weights, size = bordered(driven.size, others)
    level = distances(
        np.concatenate([driven.rows, rows]), np.concatenate([driven.columns, columns]), size, probe.orbitals
    )
    order = np.argsort(level, kind="stable")
    order = order[level[order] >= 0]
    widths = np.bincount(level[order])
    place = np.full(size, -1)
    place[order] = np.arange(len(order)) - np.repeat(np.cumsum(widths) - widths, widths)
    place[probe.orbitals] = np.arange(len(probe.orbitals))
    return Layers(level, place, widths, rows, columns, values, outgoing, weights)


def bordered(size: int, others: list[Border]) -> tuple[Indices, Indices, Complex, Indices, Floats, int]:
    """Elements of all borders, the unknowns that are open outgoing modes, their weights, and the number of unknowns."""
    rows, columns, values, outgoing, weights = ([np.zeros(0, dtype=int)] for _ in range(5))
    for border in others:
        count = border.out.shape[1]
        modes, unit = size + np.arange(count), np.abs(border.hop).max()
        blocks = (
            (border.orbitals, modes, -unit * border.hop @ border.out),
            (modes[: border.hop.shape[1]], border.orbitals, -unit * border.hop.conj().T),
            (modes[: len(border.out_bare)], modes, unit**2 * border.out_bare),
        )
        for down, across, block in blocks:
            rows.append(np.repeat(down, len(across)))
            columns.append(np.tile(across, len(down)))
            values.append(block.ravel())
        outgoing.append(modes[: border.channels])
        weights.append(np.full(border.channels, unit))
        size += count
    return (
        np.concatenate(rows),
        np.concatenate(columns),
        np.concatenate(values).astype(complex),
        np.concatenate(outgoing),
        np.concatenate(weights),
        size,
    )


def distances(rows: Indices, columns: Indices, size: int, start: Indices) -> Indices:
    """Hops from `start` to every unknown, -1 where no path leads."""
    from scipy.sparse import coo_matrix
    from scipy.sparse.csgraph import dijkstra

    rows = np.concatenate([rows, np.full(len(start), size)])
    columns = np.concatenate([columns, start])
    graph = coo_matrix((np.ones(len(rows)), (rows, columns)), shape=(size + 1, size + 1)).tocsr()
    hops = dijkstra(graph + graph.T, directed=False, unweighted=True, indices=size)[:size] - 1
    return np.where(np.isfinite(hops), hops, -1).astype(int)
