"""The charge that a cycle of finite frequency carries: scattering between energies a whole number of quanta apart.

With H(t) = sum_k H_k exp(ik omega t) the amplitudes at the energies e_n = e + n hbar omega obey

    (e_n - Sigma(e_n)) psi_n - sum_k H_k psi_n+k = W_n,

one sparse system for all rungs n = -N ... N-1 of the ladder.  |S_mb(e_i, e_j)|^2 follows from it, and the charge that
enters from lead m in one cycle is (M. Moskalets, M. Buettiker, Phys. Rev. B 66, 205320 (2002))

    Q_m = -(1/hbar omega) integral de  sum_b,n |S_mb(e_n, e)|^2 [f(e) - f(e_n)]
        = integral de w(e) q_m(e),            w(e) = [f(e - hbar omega) - f(e)] / hbar omega,
    q_m(e) = sum_b ( sum_{i < 0 <= j} - sum_{j < 0 <= i} ) |S_mb(e_i, e_j)|^2,

f being the Fermi function of all leads: q_m counts what crosses from the rungs below e to those from e on.  In the slow
limit w becomes -f' and q_m Brouwer's charge at e.

A ladder cut off at N is unitary for every N, so that unitarity checks the solution and not the cut; the cut is checked
by doubling N.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.operation.corner import corner
from scatterpump.operation.wires import Wire, wires
from scatterpump.pump import Pump
from scatterpump.solver.hamiltonian import DrivenHamiltonian, driven_path

__all__ = ["MOST_SIDEBANDS", "Drive", "Ladder", "LadderCharge", "crossing_charge", "drive_of"]

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
Indices = NDArray[np.int64]
TURN = 2 * np.pi
SAMPLES = 1024  # phases at which H is asked for; twice the most rungs of a ladder
MOST_SIDEBANDS = SAMPLES // 4
NEGLIGIBLE = 1e-14


@dataclass(frozen=True, eq=False)
class LadderCharge:
    """What crosses one energy of a ladder.

    Attributes
    ----------
    leads : (l,) float array
        q_m, the charge that enters from each lead.
    unitarity : float
        Largest deviation of a column's sum of |S|^2 from 1.
    """

    leads: Floats
    unitarity: float


@dataclass(frozen=True, eq=False)
class Ladder:
    """A driven device with 2N rungs.

    Attributes
    ----------
    sidebands : int
        N.
    size : int
        Orbitals of the device.
    drive : sparse matrix
        sum_k H_k between rungs; unknowns are sorted by orbital, then by rung.
    leads : list of Wire
    """

    sidebands: int
    size: int
    drive: Any
    leads: list[Wire]

    def charge(self, energy: float, frequency: float) -> LadderCharge:
        """Solve the ladder whose rung 0 lies at `energy`, with rungs `frequency` (hbar omega) apart."""
        from scipy.sparse import diags

        rungs: Indices = np.arange(-self.sidebands, self.sidebands)
        energies: Floats = np.asarray(energy + frequency * rungs, dtype=float)
        folded, widths, owner, rung = self._leads(energies)
        matrix = diags(np.tile(energies, self.size)) - self.drive - folded
        passed = np.abs(1j * corner(matrix, widths) - np.eye(widths.shape[1])) ** 2
        unitarity = np.abs(passed.sum(axis=0) - 1).max(initial=0.0)
        return LadderCharge(crossing_charge(passed, owner, rungs[rung] >= 0, len(self.leads)), float(unitarity))

    def _leads(self, energies: Floats) -> tuple[Any, Any, Indices, Indices]:
        """Sum of Sigma, and W with the lead and the rung of each of its columns."""
        from scipy.sparse import hstack

        count, total = len(energies), self.size * len(energies)
        rung = np.arange(count)[:, None, None]
        sigmas, widths, owner, rungs = [], [], [], []
        for number, lead in enumerate(self.leads):
            sigma, width = lead.selfenergy(energies)
            place, modes = lead.orbitals * count, np.arange(width.shape[2])
            rows, columns, channels = np.broadcast_arrays(
                place[:, None] + rung, place + rung, modes + len(modes) * rung
            )
            is_open = width.any(axis=1).ravel()
            sigmas.append(_sparse(sigma, rows, columns, (total, total)))
            widths.append(_sparse(width, rows, channels, (total, len(is_open)))[:, is_open])
            owner.append(np.full(is_open.sum(), number))
            rungs.append(np.repeat(np.arange(count), len(modes))[is_open])
        return sum(sigmas), hstack(widths, format="csc"), np.concatenate(owner), np.concatenate(rungs)


@dataclass(frozen=True, eq=False)
class Drive:
    """H(phi) of a pump as harmonics, from which ladders are built.

    Attributes
    ----------
    size : int
        Orbitals of the device.
    rows, columns : (nnz,) int array
        Places of the elements of H, in an order in which neighbours are near each other.
    harmonics : (n, nnz) complex array
        H_k for k = 0 ... n/2 - 1, -n/2 ... -1.
    leads : list of Wire
    """

    size: int
    rows: Indices
    columns: Indices
    harmonics: Complex
    leads: list[Wire]

    def ladder(self, sidebands: int) -> Ladder:
        """Return the ladder with rungs -sidebands ... sidebands - 1."""
        from scipy.sparse import csc_matrix, eye, kron

        count, shape = 2 * sidebands, (self.size, self.size)
        drive = csc_matrix((self.size * count,) * 2, dtype=complex)
        for k in range(1 - count, count):
            if self.harmonics[k].any():
                harmonic = csc_matrix((self.harmonics[k], (self.rows, self.columns)), shape=shape)
                harmonic.eliminate_zeros()
                drive = drive + kron(harmonic, eye(count, k=k), format="csc")
        return Ladder(sidebands, self.size, drive, self.leads)


def drive_of(pump: Pump) -> Drive:
    """Find the harmonics of H along the cycle of `pump`."""
    driven, path = driven_path(pump)
    place = _narrow_band(driven)
    values = np.fft.fft(path.many(TURN * np.arange(SAMPLES) / SAMPLES), axis=0) / SAMPLES
    values[np.abs(values) < NEGLIGIBLE * np.abs(values).max(axis=0)] = 0.0
    leads = [replace(wire, orbitals=place[wire.orbitals]) for wire in wires(pump)]
    return Drive(driven.size, place[driven.rows], place[driven.columns], values, leads)


def crossing_charge(passed: Floats, owner: Indices, upper: NDArray[np.bool_], leads: int) -> Floats:
    """Return q_m of every lead from probabilities.

    Parameters
    ----------
    passed : (c, c) float array
        |S|^2 from the channel of a column into that of a row.
    owner : (c,) int array
        Lead of every channel.
    upper : (c,) bool array
        Whether its energy is rung 0 or above.
    """
    fallen = passed[:, upper].sum(axis=1) * ~upper
    risen = passed[:, ~upper].sum(axis=1) * upper
    return np.asarray(np.bincount(owner, weights=fallen - risen, minlength=leads))


def _narrow_band(driven: DrivenHamiltonian) -> Indices:
    """Number of every orbital in an order in which neighbours are near each other, so that the band is narrow."""
    from scipy.sparse import csr_matrix
    from scipy.sparse.csgraph import reverse_cuthill_mckee

    ones, shape = np.ones(len(driven.rows)), (driven.size, driven.size)
    order = reverse_cuthill_mckee(csr_matrix((ones, (driven.rows, driven.columns)), shape=shape), symmetric_mode=True)
    return np.asarray(np.argsort(order), dtype=np.int64)


def _sparse(values: Complex, rows: Indices, columns: Indices, shape: tuple[int, int]) -> Any:
    from scipy.sparse import coo_matrix

    return coo_matrix((values.ravel(), (rows.ravel(), columns.ravel())), shape=shape).tocsc()
