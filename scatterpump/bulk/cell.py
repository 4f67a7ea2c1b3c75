"""One cell of the pump's interior as a Bloch Hamiltonian.

    H(k, phi) = h(phi) + V(phi) e^{-ik} + V(phi)^+ e^{ik},     psi(next cell) = e^{ik} psi,

where V hops from a cell to the next one, away from the probe.  k in radians per cell, energies in the pump's unit.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import InputError, SolverError
from scatterpump.pump import Pump
from scatterpump.solver.harmonics import Harmonics, fit

__all__ = ["BlochCell", "bloch_cell"]

Matrices = NDArray[np.complex128]


@dataclass(frozen=True, eq=False)
class BlochCell:
    """h(phi) and V(phi) of one cell, and the Fermi level.

    Attributes
    ----------
    pump : Pump
        The pump whose ``bulk`` this is.
    """

    pump: Pump

    @property
    def fermi_level(self) -> float:
        """Energy to which gaps are measured."""
        return self.pump.fermi_level

    @cached_property
    def harmonics(self) -> Harmonics | None:
        """Fourier coefficients of the stack (h, V), shape (2K+1, 2, q, q), or None if phi enters otherwise."""
        return fit(lambda phases: np.array([self._sample(float(phase)) for phase in phases]))

    @property
    def bands(self) -> int:
        """Number q of bands."""
        return int(self._sample(0.0).shape[-1])

    def blocks(self, phases: Any) -> Matrices:
        """Return (h, V) at each of `phases`, shape (n, 2, q, q)."""
        if self.harmonics is not None:
            return self.harmonics.at(phases)
        return np.array([self._sample(float(phase)) for phase in np.asarray(phases)])

    def hamiltonian(self, momenta: Any, phases: Any) -> Matrices:
        """Return H(k, phi) at pairs of `momenta` and `phases` (radians, shape (n,) each), shape (n, q, q)."""
        h, hop = np.moveaxis(self.blocks(phases), 1, 0)
        turned = hop * np.exp(-1j * np.asarray(momenta))[:, None, None]
        return np.asarray(h + turned + turned.conj().swapaxes(1, 2))

    def _sample(self, phase: float) -> Matrices:
        cell, parameters = self.pump.finalized_bulk, self.pump.parameters(phase)
        try:
            h = np.asarray(cell.cell_hamiltonian(params=parameters), dtype=complex)
            narrow = np.asarray(cell.inter_cell_hopping(params=parameters), dtype=complex)
        except Exception as cause:  # a user's value function may raise anything
            raise SolverError(phase, parameters, cause) from cause
        hop = np.zeros_like(h)
        hop[:, : narrow.shape[1]] = narrow
        return np.stack([h, hop])


def bloch_cell(pump: Pump) -> BlochCell:
    """Return the Bloch Hamiltonian of the pump's interior.

    Raises
    ------
    InputError
        If the pump has none: its modulation does not repeat within the device, or no cell was given.
    """
    if pump.bulk is None:
        raise InputError(
            "the pump has no bulk cell",
            allowed="a modulation that repeats within the device, or "
            "Pump(..., bulk=cell) with one cell of the interior as a kwant Builder with translational symmetry",
        )
    return BlochCell(pump)
