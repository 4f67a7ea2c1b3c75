"""The driven part of a device, with all that stands still folded into self-energies.

    A(phi) = E - H(phi) - Sigma_p - Sigma_d,     Gamma_p = i (Sigma_p - Sigma_p^+) = W W^+,     r = -1 + i W^+ A^-1 W.

Only orbitals whose row of H changes along the cycle matter to how r turns; stretches of still orbitals between them
and a lead are eliminated once. That multiplies r by a constant unitary matrix (if r_Q is what the still stretch
reflects when cut off, r = -r_Q r_folded), so windings and singular values stay as they are.  The basis of the
probe's channels is that of W; its overall phase is physical: an eigenvalue +1 of r_folded marks a level of the
device that is closed towards the probe.

Orbitals are ordered so that the matrix is a narrow band (reverse Cuthill-McKee); parts that no path connects to the
probe are dropped.

References: D. S. Fisher, P. A. Lee, Phys. Rev. B 23, 6851 (1981) (citation from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.pump import Pump
from scatterpump.solver.band import EPS, pack
from scatterpump.solver.hamiltonian import driven_path
from scatterpump.solver.modes import with_modes
from scatterpump.solver.path import Path, Side, moving

__all__ = ["FoldedDevice", "fold"]

Complex = NDArray[np.complex128]
Indices = NDArray[np.int64]
RESONANT = 1e4
DEPENDENT = 1e2 * EPS


@dataclass(frozen=True, eq=False)
class FoldedDevice:
    """E - H(phi) - Sigma as a banded matrix family.

    Attributes
    ----------
    size, half : int
        Number n of orbitals and half-bandwidth b.
    rows, columns : (nnz,) int array
        Places of the matrix elements of H.
    path : Path
        Those elements along the cycle.
    still : (2b+1, n) complex array
        Band of E - Sigma_p - Sigma_d.
    probe : (n, m) complex array
        W: columns of the probe's broadening, orthogonal to each other.
    drain : (n, m') complex array
        The same for all other leads together.
    distance : (n,) int array
        Number of hops from the probe's columns.
    samples : int
        Hamiltonians built to find all this.
    """

    size: int
    half: int
    rows: Indices
    columns: Indices
    path: Path
    still: Complex
    probe: Complex
    drain: Complex
    distance: Indices
    samples: int

    def matrix(self, phase: float) -> Complex:
        """Return the band of A at `phase`."""
        return np.asarray(self.still - self.band(self.path.at(phase)))

    def band(self, entries: Complex) -> Complex:
        """Return the band of a matrix with the pattern of H."""
        return pack(self.rows, self.columns, entries, self.size, self.half)

    def derivative(self, phase: float, side: Side, order: int = 1) -> Complex:
        """Return the band of dH/dphi (or of its derivative) at `phase`, on one side of it."""
        return self.band(self.path.derivative(phase, side, order))

    def with_broadening(self, width: float) -> tuple[FoldedDevice, NDArray[np.float64]]:
        """Return the device behind a good contact, and how far its broadening exceeds the actual one.

        Every open channel of the probe gets the broadening `width`, the level shift Re Sigma_p stays.

        Returns
        -------
        device : FoldedDevice
        excess : (m,) float array
            s_j = width / (broadening of channel j).
        """
        strength = np.linalg.norm(self.probe, axis=0) ** 2
        unit = self.probe / np.sqrt(strength)
        good = unit * np.sqrt(width)
        change = 0.5j * (good @ good.conj().T - self.probe @ self.probe.conj().T)
        rows, columns = np.nonzero(change)
        still = self.still + pack(rows, columns, change[rows, columns], self.size, self.half)
        device = FoldedDevice(
            self.size, self.half, self.rows, self.columns, self.path, still, good, self.drain, self.distance, 0
        )
        return device, width / strength


def fold(pump: Pump) -> FoldedDevice:
    """Fold the still parts and the leads of `pump` into self-energies.

    Raises
    ------
    ClosedProbeError, InputError, SolverError
        As `scatterpump.reflect`.
    """
    from scipy.sparse import csr_matrix

    system, (driven, path) = with_modes(pump), driven_path(pump)
    size, rows, columns = driven.size, driven.rows, driven.columns
    leads, widths = _leads(pump, system, driven.offsets)
    moves = np.zeros(size, dtype=bool)
    moves[rows[moving(path)]] = True
    structure = csr_matrix((np.ones(len(rows)), (rows, columns)), shape=(size, size))
    hamiltonian = csr_matrix((driven.checked(path, 0.0), (rows, columns)), shape=(size, size))
    alive, leads, widths = _eliminate(pump.fermi_level, structure, hamiltonian, leads, widths, moves)
    order = _order(structure, leads, alive, pump.probe)
    return _assemble(pump, path, rows, columns, leads, widths, order, driven.calls)


def _leads(pump: Pump, system: Any, offsets: Indices) -> tuple[dict[int, Any], dict[int, Complex]]:
    """Self-energy of every lead as a sparse matrix over all orbitals, and W, one column for each open channel."""
    from scipy.sparse import coo_matrix

    size = int(offsets[-1])
    sigmas, widths = {}, {}
    for number, (lead, interface) in enumerate(zip(system.leads, system.lead_interfaces, strict=True)):
        orbitals = np.concatenate([np.arange(offsets[site], offsets[site + 1]) for site in interface])
        propagating, stabilized = lead.modes(pump.fermi_level)
        sigma = stabilized.selfenergy()
        rows, columns = np.meshgrid(orbitals, orbitals, indexing="ij")
        sigmas[number] = coo_matrix((sigma.ravel(), (rows.ravel(), columns.ravel())), shape=(size, size)).tocsr()
        strength, states = np.linalg.eigh(1j * (sigma - sigma.conj().T))
        first = len(strength) - len(propagating.momenta) // 2
        broad = states[:, first:] * np.sqrt(np.maximum(strength[first:], 0.0))
        widths[number] = _placed(broad, orbitals, size)
    return sigmas, widths


def _placed(rows: Complex, orbitals: Indices, size: int) -> Complex:
    """Return an array of `size` rows with `rows` at `orbitals` and zero elsewhere."""
    result = np.zeros((size, rows.shape[1]), dtype=complex)
    result[orbitals] = rows
    return result


def _eliminate(
    energy: float,
    structure: Any,
    hamiltonian: Any,
    leads: dict[int, Any],
    widths: dict[int, Complex],
    moves: NDArray[np.bool_],
) -> tuple[Indices, dict[int, Any], dict[int, Complex]]:
    """Fold the still stretches that touch one lead only into its self-energy, if it touches nothing else.

    Returns the orbitals that are left, and the self-energies and broadenings of all leads.
    """
    from scipy.sparse.csgraph import connected_components

    folded, widths, gone = dict(leads), dict(widths), np.zeros(len(moves), dtype=bool)
    quiet = np.flatnonzero(~moves)
    if not moves.any() or not quiet.size:
        return np.flatnonzero(~gone), folded, widths
    _, piece = connected_components(structure[quiet][:, quiet], directed=False)
    seats = {number: np.unique(sigma.nonzero()[0]) for number, sigma in leads.items()}
    touching = {number: set(piece[np.isin(quiet, seat)]) for number, seat in seats.items()}
    for number, seat in seats.items():
        own = touching[number].difference(*(touching[other] for other in leads if other != number))
        inside = quiet[np.isin(piece, list(own))]
        if not np.isin(seat, inside).all():
            continue
        found = _folded(energy, hamiltonian, leads[number], widths[number], inside)
        if found is not None:
            folded[number], widths[number] = found
            gone[inside] = True
    return np.flatnonzero(~gone), folded, widths


def _folded(energy: float, hamiltonian: Any, sigma: Any, width: Complex, inside: Indices) -> tuple[Any, Complex] | None:
    """Self-energy C^+ g C and W of a lead as felt next to the stretch `inside`; None if it ends nowhere or resonates.

    C is the coupling and g = (E - H - Sigma)^-1 of the stretch.  Its broadening is C^+ g^+ W, small where little gets
    through, but with all its digits; the difference Sigma - Sigma^+ would lose them.
    """
    from scipy.sparse import csr_matrix, identity
    from scipy.sparse.linalg import splu

    outside = np.setdiff1d(np.unique(hamiltonian[inside].nonzero()[1]), inside)
    if outside.size == 0:
        return None
    block = energy * identity(len(inside)) - hamiltonian[inside][:, inside] - sigma[inside][:, inside]
    coupling = hamiltonian[inside][:, outside].toarray()
    try:
        reached = splu(block.tocsc()).solve(coupling.astype(complex))
    except RuntimeError:
        return None
    if not np.abs(reached).max() < RESONANT:  # or it is not a number
        return None
    broad = _orthogonal(reached.conj().T @ width[inside])
    shift = coupling.conj().T @ reached
    small = (shift + shift.conj().T) / 2 - 0.5j * (broad @ broad.conj().T)
    rows, columns = np.meshgrid(outside, outside, indexing="ij")
    folded = csr_matrix((small.ravel(), (rows.ravel(), columns.ravel())), shape=hamiltonian.shape)
    return folded, _placed(broad, outside, len(width))


def _orthogonal(columns: Complex) -> Complex:
    """Return orthogonal columns with the same W W^+, as many as are independent of each other beyond rounding."""
    states, sizes, _ = np.linalg.svd(columns, full_matrices=False)
    kept = sizes > DEPENDENT * sizes.max(initial=0.0)
    return np.asarray(states[:, kept] * sizes[kept])


def _order(structure: Any, leads: dict[int, Any], alive: Indices, probe: int) -> Indices:
    """Order of the orbitals: those connected to the probe, in a narrow band."""
    from scipy.sparse.csgraph import connected_components, reverse_cuthill_mckee

    pattern = sum((abs(s[alive][:, alive]) for s in leads.values()), structure[alive][:, alive])
    pattern = (pattern + pattern.T).tocsr()
    _, label = connected_components(pattern, directed=False)
    start = np.flatnonzero(np.isin(alive, np.unique(leads[probe].nonzero()[0])))
    kept = np.flatnonzero(np.isin(label, label[start]))
    order = reverse_cuthill_mckee(pattern[kept][:, kept].tocsr(), symmetric_mode=True)
    return np.asarray(alive[kept[order]], dtype=int)


def _assemble(
    pump: Pump,
    path: Path,
    rows: Indices,
    columns: Indices,
    leads: dict[int, Any],
    widths: dict[int, Complex],
    order: Indices,
    samples: int,
) -> FoldedDevice:
    size, place = len(order), np.full(leads[pump.probe].shape[0], -1)
    place[order] = np.arange(size)
    kept = np.flatnonzero((place[rows] >= 0) & (place[columns] >= 0))
    rows, columns = place[rows[kept]], place[columns[kept]]
    sigma = {number: matrix[order][:, order].tocoo() for number, matrix in leads.items()}
    places = [(rows, columns), *((s.row.astype(int), s.col.astype(int)) for s in sigma.values())]
    half = max(int(np.abs(r - c).max(initial=0)) for r, c in places)
    still = pack(np.arange(size), np.arange(size), np.full(size, pump.fermi_level, dtype=complex), size, half)
    for matrix in sigma.values():
        still -= pack(matrix.row, matrix.col, matrix.data, size, half)
    left = {number: _what_is_left(width[order]) for number, width in widths.items()}
    probe = left.pop(pump.probe)
    drain = np.hstack([np.zeros((size, 0), dtype=complex), *left.values()])
    distance = _distance(places, probe, size)
    return FoldedDevice(size, half, rows, columns, path.only(kept), still, probe, drain, distance, samples)


def _what_is_left(width: Complex) -> Complex:
    """W of a lead on the orbitals that were kept: no columns if nothing connects it to the probe."""
    touched = np.flatnonzero(np.abs(width).max(axis=1, initial=0.0))
    return _placed(_orthogonal(width[touched]), touched, len(width))


def _distance(places: list[tuple[Indices, Indices]], probe: Complex, size: int) -> Indices:
    """Hops from the probe's columns to every orbital, on the union of all patterns."""
    from scipy.sparse import coo_matrix
    from scipy.sparse.csgraph import dijkstra

    start = np.flatnonzero(np.abs(probe).max(axis=1))
    rows = np.concatenate([np.full(len(start), size), *(r for r, _ in places)])
    columns = np.concatenate([start, *(c for _, c in places)])
    graph = coo_matrix((np.ones(len(rows)), (rows, columns)), shape=(size + 1, size + 1)).tocsr()
    hops = dijkstra(graph + graph.T, directed=False, unweighted=True, indices=size)[:size] - 1
    return np.asarray(hops, dtype=int)
