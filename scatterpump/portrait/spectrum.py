"""Band edges and edge levels against phi.

Edge levels are those of the device closed towards its leads: eigenvalues of H(phi) + Re Sigma, with the leads'
self-energies taken at the Fermi level.  Where one of them passes the Fermi level is a crossing of the proof, up to what
leaks; away from it they move as the self-energies of real leads would let them, to first order in the distance.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.bulk.cell import BlochCell, bloch_cell
from scatterpump.bulk.gap import BulkGap
from scatterpump.errors import NoBulkError
from scatterpump.pump import Pump
from scatterpump.solver.hamiltonian import driven_path
from scatterpump.solver.layers import distances
from scatterpump.solver.modes import with_modes

__all__ = ["Spectrum", "spectrum"]

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
Indices = NDArray[np.int64]
TURN = 2 * np.pi
PHASES = 121
MOMENTA = 64
NEAREST = 12  # levels about the Fermi level, where a device is too large for all of them
DENSE = 400  # orbitals up to which all levels are quickly found


@dataclass(frozen=True, eq=False)
class Spectrum:
    """Energies against phi, in the pump's unit.

    Attributes
    ----------
    name : str
    fermi_level : float
    phases : (n,) float array
        Radians, 0 to 2 pi.
    bottom, top : (n, q) float arrays
        Edges of the interior's q bands over all sampled k; no bands (q = 0) where no cell repeats.
    levels : (n, l) float array
        Levels of the closed device nearest to the Fermi level, in order.
    nearness : (n, l) float array
        Share of each level's weight on orbitals that are nearer to the probe than to any other lead.
    gap : BulkGap or None
        The proven window of Fermi levels.
    """

    name: str
    fermi_level: float
    phases: Floats
    bottom: Floats
    top: Floats
    levels: Floats
    nearness: Floats
    gap: BulkGap | None

    @property
    def is_between_bands(self) -> NDArray[np.bool_]:
        """Which levels lie outside every band, shape (n, l); all of them where there are no bands."""
        level = self.levels[:, :, None]
        return np.asarray(~((level >= self.bottom[:, None]) & (level <= self.top[:, None])).any(axis=2))


def spectrum(pump: Pump, gap: BulkGap | None = None, *, phases: int = PHASES) -> Spectrum:
    """Sample bands and levels of `pump` at even phases; `gap` is what is known of its gap."""
    points = np.linspace(0.0, TURN, phases)
    try:
        bottom, top = _bands(bloch_cell(pump), points)
    except NoBulkError:
        bottom = top = np.empty((phases, 0))
    levels, nearness = _levels(pump, points)
    return Spectrum(pump.name, pump.fermi_level, points, bottom, top, levels, nearness, gap)


def _bands(cell: BlochCell, phases: Floats) -> tuple[Floats, Floats]:
    """Lowest and highest energy of each band over even k, shape (n, q) each."""
    momenta = TURN * np.arange(MOMENTA) / MOMENTA
    h, hop = np.moveaxis(cell.blocks(phases), 1, 0)
    turned = hop[:, None] * np.exp(-1j * momenta)[:, None, None]
    energies = np.linalg.eigvalsh(h[:, None] + turned + turned.conj().swapaxes(2, 3))
    return energies.min(axis=1), energies.max(axis=1)


def _levels(pump: Pump, phases: Floats) -> tuple[Floats, Floats]:
    driven, _ = driven_path(pump)
    shift, seats = _shifts(pump, driven.offsets)
    near = _near_probe(driven, seats, pump.probe)
    found = [_closed(driven, elements, shift, pump.fermi_level) for elements in driven.many(phases)]
    levels = np.array([energies for energies, _ in found])
    return levels, np.array([near @ np.abs(states) ** 2 for _, states in found])


def _shifts(pump: Pump, offsets: Indices) -> tuple[Any, list[Indices]]:
    """Re Sigma of all leads at the Fermi level, and the orbitals each lead holds on to."""
    from scipy.sparse import coo_matrix

    system, size = with_modes(pump), int(offsets[-1])
    total, seats = coo_matrix((size, size), dtype=complex).tocsr(), []
    for lead, interface in zip(system.leads, system.lead_interfaces, strict=True):
        sigma = lead.modes(pump.fermi_level)[1].selfenergy()
        orbitals = np.concatenate([np.arange(offsets[site], offsets[site + 1]) for site in interface])
        rows, columns = np.meshgrid(orbitals, orbitals, indexing="ij")
        values = ((sigma + sigma.conj().T) / 2).ravel()
        total = total + coo_matrix((values, (rows.ravel(), columns.ravel())), shape=(size, size)).tocsr()
        seats.append(orbitals)
    return total, seats


def _near_probe(driven: Any, seats: list[Indices], probe: int) -> Floats:
    """1 for orbitals nearer to the probe than to any other lead, else 0, shape (size,); counted in hops."""
    hops = [distances(driven.rows, driven.columns, driven.size, seat) for seat in seats]
    others = [hop for number, hop in enumerate(hops) if number != probe]
    far = np.min(others, axis=0) if others else np.full(driven.size, hops[probe].max() / 2)
    return np.where(hops[probe] < far, 1.0, 0.0)


def _closed(driven: Any, elements: Complex, shift: Any, level: float) -> tuple[Floats, Complex]:
    """Levels of H + Re Sigma nearest to `level`, in order, and their states."""
    from scipy.linalg import eigh
    from scipy.sparse import csr_matrix
    from scipy.sparse.linalg import eigsh

    matrix = csr_matrix((elements, (driven.rows, driven.columns)), shape=shift.shape) + shift
    if driven.size <= DENSE:
        energies, states = eigh(matrix.toarray(), driver="evd")
        return np.asarray(energies), np.asarray(states)
    start = np.cos(np.arange(driven.size))  # the same start each time: the same figure each time
    energies, states = eigsh(matrix.tocsc(), k=NEAREST, sigma=level, v0=start)
    order = np.argsort(energies)
    return np.asarray(energies[order]), np.asarray(states[:, order])
