"""Chern number of the filled bands on the (k, phi) torus, by the lattice method.

On a grid, F = Im log of the product of links round each plaquette, in the order (k, phi), and C = sum F / 2 pi: an
integer by construction, the right one once no plaquette comes near half a turn.  The links are the unitary parts of the
filled states' overlaps, as matrices: log is taken of every eigenvalue of their product.  With this orientation C is the
winding that an endless pump would show, C = +W.

References: T. Fukui, Y. Hatsugai, H. Suzuki, J. Phys. Soc. Jpn. 74, 1674 (2005).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from scatterpump.bulk.cell import BlochCell, bloch_cell
from scatterpump.errors import ClosedGapError
from scatterpump.pump import Pump

__all__ = ["chern_number", "chern_of", "plaquettes"]

FINEST = 512
SAFE_PLAQUETTE = 1.0


def chern_number(pump: Pump) -> int:
    """Return the Chern number of all bands below the Fermi level.

    The grid is doubled until no band gains more than 1 rad round any plaquette.

    Raises
    ------
    ClosedGapError
        If the number of bands below the Fermi level changes over the torus, or the plaquettes stay large.
    InputError
        If the pump has no cell, given or found.
    """
    return chern_of(bloch_cell(pump))


def chern_of(cell: BlochCell) -> int:
    """Return the Chern number of a cell, as `chern_number` does that of the cell of a pump."""
    size = 24
    while size <= FINEST:
        states = _filled_states(cell, size, 2 * size)
        if states.shape[-1] == 0:
            return 0
        flux = plaquettes(states)
        if np.abs(flux).max() < SAFE_PLAQUETTE:
            return round(float(flux.sum()) / (2 * np.pi))
        size *= 2
    raise ClosedGapError(cell.fermi_level, "the Berry flux cannot be resolved")


def plaquettes(states: NDArray[np.complex128]) -> NDArray[np.float64]:
    """Return the Berry phases of each plaquette, one for each filled band, shape (n_k, n_phi, filled).

    They are the angles of the eigenvalues of the product of links: their sum is the flux, up to whole turns, and none
    of them grows with the number of bands, as the flux does.

    Parameters
    ----------
    states : (n_k, n_phi, q, filled) complex array
        Orthonormal filled states on a grid that closes in both directions.
    """
    along_k = _links(states, np.roll(states, -1, axis=0))
    along_phi = _links(states, np.roll(states, -1, axis=1))
    there = along_k @ np.roll(along_phi, -1, axis=0)
    back = along_phi @ np.roll(along_k, -1, axis=1)
    phases: NDArray[np.float64] = np.angle(np.linalg.eigvals(back.conj().swapaxes(-1, -2) @ there))
    return phases


def _links(here: NDArray[np.complex128], there: NDArray[np.complex128]) -> NDArray[np.complex128]:
    """The unitary parts of the overlaps, shape (n_k, n_phi, filled, filled)."""
    left, _, right = np.linalg.svd(here.conj().swapaxes(-1, -2) @ there)
    return np.asarray(left @ right)


def _filled_states(cell: BlochCell, n_k: int, n_phi: int) -> NDArray[np.complex128]:
    momenta, phases = np.meshgrid(2 * np.pi * np.arange(n_k) / n_k, 2 * np.pi * np.arange(n_phi) / n_phi, indexing="ij")
    energies, states = np.linalg.eigh(cell.hamiltonian(momenta.ravel(), phases.ravel()))
    filled = (energies < cell.fermi_level).sum(axis=1)
    if filled.min() != filled.max():
        raise ClosedGapError(cell.fermi_level, f"between {filled.min()} and {filled.max()} bands lie below it")
    return states[:, :, : filled[0]].reshape(n_k, n_phi, *states.shape[1:2], int(filled[0]))
