"""Band edges and edge levels against phi.

Edge levels are those of the driven part closed towards its leads: eigenvalues of H(phi) + Re Sigma, where Sigma holds
the leads and the still stretches before them, taken at the Fermi level.  A level of the probe's end passes the Fermi
level just where the proof finds a crossing, up to what leaks; at other energies it is where it were if Sigma stayed.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterpump.bulk.cell import BlochCell, known_cell
from scatterpump.bulk.gap import BulkGap
from scatterpump.measure import Measure
from scatterpump.pump import Pump
from scatterpump.solver.folded import FoldedDevice, fold
from scatterpump.solver.layers import distances

__all__ = ["Spectrum", "spectrum"]

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
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
    unit : str
        What stands behind an energy: "meV", or "pump's unit" where that is another one, or none.
    """

    name: str
    fermi_level: float
    phases: Floats
    bottom: Floats
    top: Floats
    levels: Floats
    nearness: Floats
    gap: BulkGap | None
    unit: str

    @property
    def is_between_bands(self) -> NDArray[np.bool_]:
        """Which levels lie outside every band, shape (n, l); all of them where there are no bands."""
        level = self.levels[:, :, None]
        return np.asarray(~((level >= self.bottom[:, None]) & (level <= self.top[:, None])).any(axis=2))


def spectrum(pump: Pump, gap: BulkGap | None = None, *, phases: int = PHASES) -> Spectrum:
    """Sample bands and levels of `pump` at even phases; `gap` is what is known of its gap."""
    from threadpoolctl import threadpool_limits

    points = np.linspace(0.0, TURN, phases)
    cell, none = known_cell(pump), np.empty((phases, 0))
    bottom, top = (none, none) if cell is None else _bands(cell, points)
    with threadpool_limits(1):  # many small matrices: threads would only get in each other's way
        levels, nearness = _levels(fold(pump), pump.fermi_level, points)
    return Spectrum(
        pump.name, pump.fermi_level, points, bottom, top, levels, nearness, gap, Measure(pump.units).on_axes
    )


def _bands(cell: BlochCell, phases: Floats) -> tuple[Floats, Floats]:
    """Lowest and highest energy of each band over even k, shape (n, q) each."""
    momenta = TURN * np.arange(MOMENTA) / MOMENTA
    h, hop = np.moveaxis(cell.blocks(phases), 1, 0)
    turned = hop[:, None] * np.exp(-1j * momenta)[:, None, None]
    energies = np.linalg.eigvalsh(h[:, None] + turned + turned.conj().swapaxes(2, 3))
    return energies.min(axis=1), energies.max(axis=1)


def _levels(device: FoldedDevice, level: float, phases: Floats) -> tuple[Floats, Floats]:
    """Levels (n, l) of the closed device in order, and their shares of weight near the probe."""
    near = _near_probe(device)
    found = [_closed(device.matrix(float(phase)), level) for phase in phases]
    return np.array([energies for energies, _ in found]), np.array([near @ np.abs(x) ** 2 for _, x in found])


def _near_probe(device: FoldedDevice) -> Floats:
    """1 for orbitals nearer to the probe than to any other lead, else 0, shape (size,); counted in hops."""
    seats = np.flatnonzero(np.abs(device.drain).max(axis=1, initial=0.0))
    far = distances(device.rows, device.columns, device.size, seats)
    if not seats.size:
        far = np.full(device.size, device.distance.max(initial=0) / 2)
    return np.where(device.distance < far, 1.0, 0.0)


def _closed(band: Complex, level: float) -> tuple[Floats, Complex]:
    """Levels next to `level` of the Hermitian part of a band of E - H - Sigma, in order, and their states."""
    from scipy.linalg import eigh
    from scipy.sparse import dia_matrix
    from scipy.sparse.linalg import eigsh

    half, size = len(band) // 2, band.shape[1]
    open_one = dia_matrix((band, np.arange(half, -half - 1, -1)), shape=(size, size)).tocsc()
    offset = (open_one + open_one.conj().T) / 2
    if size <= DENSE:
        dense = -offset.toarray()
        energies, states = eigh(dense if dense.imag.any() else dense.real, driver="evd")
        return np.asarray(energies + level), np.asarray(states)
    start = np.cos(np.arange(size))  # the same start each time: the same figure each time
    energies, states = eigsh(-offset, k=NEAREST, sigma=0.0, v0=start)
    order = np.argsort(energies)
    return np.asarray(energies[order] + level), np.asarray(states[:, order])
