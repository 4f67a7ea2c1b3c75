"""Self-energies and broadenings of a pump's leads at many energies at once.

A lead whose cell h and hopping V can be brought to diagonal form together is a bundle of single-channel wires, and each
of those has the closed form

    sigma = (z - sqrt(z^2 - 4 |v|^2)) / 2,       z = E - level,

with the root that decays, or runs outwards, away from the device (E. N. Economou, Green's Functions in Quantum Physics,
Springer 2006, citation from memory).  Leads of any other kind are left to kwant, one energy at a time.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import InputError
from scatterpump.pump import Pump
from scatterpump.solver.hamiltonian import driven_path
from scatterpump.solver.modes import with_modes

__all__ = ["Wire", "seen_from", "wires"]

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
TOGETHER = 1e-13  # of the norms of h and V: what rounding leaves off the diagonals
SKEW = (0.7548776662466927, 0.5698402909980532)  # of no simple ratio, so that degenerate levels are told apart


@dataclass(frozen=True, eq=False)
class Wire:
    """One lead.

    Attributes
    ----------
    orbitals : (m,) int array
        The device's orbitals that it is attached to.
    cell : (m', m') complex array
        h, of the lead's own cell.
    hopping : (m', m) complex array
        V, from a cell to the next one inwards.
    """

    orbitals: NDArray[np.int64]
    cell: Complex
    hopping: Complex

    def selfenergy(self, energies: Floats) -> tuple[Complex, Complex]:
        """Return Sigma on the orbitals, and W with W W^+ = i (Sigma - Sigma^+).

        Parameters
        ----------
        energies : (n,) float array

        Returns
        -------
        (n, m, m) complex array, (n, m, m) complex array
            Columns of W that belong to closed channels are zero.
        """
        bundle = _bundle(self.cell, self.hopping)
        if bundle is None:
            return self._by_kwant(energies)
        states, levels, hops = bundle
        sigma = _single(energies[:, None] - levels, hops)
        widths = states * np.sqrt(np.maximum(-2 * sigma.imag, 0.0))[:, None, :]
        return np.einsum("ia,na,ja->nij", states, sigma, states.conj()), widths

    def channels(self, energy: float) -> int:
        """Return the number of open modes at `energy`."""
        return int(self.selfenergy(np.array([energy]))[1].any(axis=1).sum())

    def _by_kwant(self, energies: Floats) -> tuple[Complex, Complex]:
        found = [self._solved_by_kwant(energy) for energy in energies.tolist()]
        sigmas, widths = (np.array(part) for part in zip(*found, strict=True))
        return sigmas, widths

    def _solved_by_kwant(self, energy: float) -> tuple[Complex, Complex]:
        from kwant.physics import modes

        try:
            propagating, stabilized = modes(self.cell - energy * np.eye(len(self.cell)), self.hopping)
        except Exception as cause:  # kwant meets modes without velocity at a band edge
            raise InputError(
                f"the modes of a lead cannot be computed at the energy {energy:g} ({cause})",
                allowed="energies away from every lead's band edges",
            ) from cause
        sigma = stabilized.selfenergy()
        strength, states = np.linalg.eigh(1j * (sigma - sigma.conj().T))
        strength[: len(strength) - len(propagating.momenta) // 2] = 0.0
        return sigma, states * np.sqrt(np.maximum(strength, 0.0))


def wires(pump: Pump) -> list[Wire]:
    """Return the leads of `pump` in the order of their numbers."""
    system, parameters = pump.finalized, pump.parameters(0.0)
    counts = system.hamiltonian_submatrix(params=parameters, sparse=True, return_norb=True)[1]
    offsets = np.concatenate([[0], np.cumsum(counts)])
    return [
        _wire(lead, sites, offsets, parameters)
        for lead, sites in zip(system.leads, system.lead_interfaces, strict=True)
    ]


def seen_from(pump: Pump, lead: int) -> Pump:
    """Return the same pump with `lead`, which is open, as its probe; path and modes are found once for all."""
    if lead == pump.probe:
        return pump
    driven_path(pump), with_modes(pump)
    other = pump.seen_from(lead)
    other.remembered["modes"] = pump.remembered["modes"]
    return other


def _wire(lead: Any, sites: Any, offsets: NDArray[np.int64], parameters: dict[str, Any]) -> Wire:
    own = {name: parameters[name] for name in lead.parameters}
    cell, hopping = lead.cell_hamiltonian(params=own), lead.inter_cell_hopping(params=own)
    orbitals = np.concatenate([np.arange(offsets[site], offsets[site + 1]) for site in sites])
    return Wire(orbitals[: hopping.shape[1]], np.asarray(cell, dtype=complex), np.asarray(hopping, dtype=complex))


def _single(z: Floats, hops: Floats) -> Complex:
    """Self-energy of single-channel wires; 2 v^2/(z + root) loses no digits far outside the band."""
    square = z**2 - 4 * hops**2
    root = np.where(square < 0, 1j, np.sign(z)) * np.sqrt(np.abs(square))
    return np.asarray(2 * hops**2 / np.where(z + root == 0, 1.0, z + root))


def _bundle(cell: Complex, hopping: Complex) -> tuple[Complex, Floats, Floats] | None:
    """States, levels and moduli of hoppings of the single-channel wires that make up the lead, or None."""
    if cell.shape != hopping.shape:
        return None
    both = hopping + hopping.conj().T, 1j * (hopping - hopping.conj().T)
    states = np.linalg.eigh(cell + SKEW[0] * both[0] + SKEW[1] * both[1])[1]
    inside, across = (states.conj().T @ matrix @ states for matrix in (cell, hopping))
    scale = TOGETHER * len(cell) * (np.linalg.norm(cell) + np.linalg.norm(hopping))
    if max(_off_diagonal(inside), _off_diagonal(across)) > scale:
        return None
    return states, np.diag(inside).real, np.abs(np.diag(across))


def _off_diagonal(matrix: Complex) -> float:
    return float(np.abs(matrix - np.diag(np.diag(matrix))).max(initial=0.0))
