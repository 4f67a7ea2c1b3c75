"""One cell of the pump's interior as a Bloch Hamiltonian.

    H(k, phi) = h(phi) + V(phi) e^{-ik} + V(phi)^+ e^{ik},     psi(next cell) = e^{ik} psi,

where V hops from a cell to the next one, away from the probe.  k in radians per cell, energies in the pump's unit.
The cell is the one that the pump was given, or else the one that repeats in the device itself (`found`).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.bulk.found import FoundCell, find_cell
from scatterpump.errors import NoBulkError, SolverError
from scatterpump.pump import Pump
from scatterpump.solver.harmonics import Harmonics, fit

__all__ = ["BlochCell", "bloch_cell", "interior"]

Matrices = NDArray[np.complex128]
Sample = Callable[[Any], Matrices]
REMEMBERED = "bloch cell"


@dataclass(frozen=True, eq=False)
class BlochCell:
    """h(phi) and V(phi) of one cell, and the Fermi level.

    Attributes
    ----------
    pump : Pump
        The pump whose interior this is.
    sample : callable
        Phases (n,) to (h, V) at each of them, shape (n, 2, q, q).
    harmonics : Harmonics or None
        Fourier coefficients of the stack (h, V), shape (2K+1, 2, q, q), or None if phi enters otherwise.
    origin : str
        Where the cell comes from, in words.
    """

    pump: Pump
    sample: Sample
    harmonics: Harmonics | None
    origin: str

    @property
    def fermi_level(self) -> float:
        """Energy to which gaps are measured."""
        return self.pump.fermi_level

    @property
    def bands(self) -> int:
        """Number q of bands."""
        return int(self.blocks(np.zeros(1)).shape[-1])

    def blocks(self, phases: Any) -> Matrices:
        """Return (h, V) at each of `phases`, shape (n, 2, q, q)."""
        points = np.asarray(phases, dtype=float)
        return self.sample(points) if self.harmonics is None else self.harmonics.at(points)

    def hamiltonian(self, momenta: Any, phases: Any) -> Matrices:
        """Return H(k, phi) at pairs of `momenta` and `phases` (radians, shape (n,) each), shape (n, q, q)."""
        h, hop = np.moveaxis(self.blocks(phases), 1, 0)
        turned = hop * np.exp(-1j * np.asarray(momenta))[:, None, None]
        return np.asarray(h + turned + turned.conj().swapaxes(1, 2))


def bloch_cell(pump: Pump) -> BlochCell:
    """Return the Bloch Hamiltonian of the pump's interior.

    Raises
    ------
    NoBulkError
        If it has none: no cell was given, and none repeats along the device.
    """
    if REMEMBERED not in pump.remembered:
        try:
            pump.remembered[REMEMBERED] = _found(pump) if pump.bulk is None else _given(pump)
        except NoBulkError as error:
            pump.remembered[REMEMBERED] = error
    kept = pump.remembered[REMEMBERED]
    if isinstance(kept, NoBulkError):
        raise kept
    assert isinstance(kept, BlochCell)  # nothing else is remembered under this name
    return kept


def interior(pump: Pump) -> str:
    """Return in words which cell the gap and the Chern number of `pump` belong to, or why there is none."""
    try:
        return bloch_cell(pump).origin
    except NoBulkError as error:
        return error.problem


def _given(pump: Pump) -> BlochCell:
    cell = pump.finalized_bulk

    def sample(phases: Any) -> Matrices:
        return np.array([_at(cell, phase, pump.parameters(phase)) for phase in np.asarray(phases).tolist()])

    return BlochCell(pump, sample, fit(sample), "the cell that the pump was given")


def _at(cell: Any, phase: float, parameters: dict[str, Any]) -> Matrices:
    """(h, V) of a kwant cell, shape (2, q, q)."""
    try:
        h = np.asarray(cell.cell_hamiltonian(params=parameters), dtype=complex)
        narrow = np.asarray(cell.inter_cell_hopping(params=parameters), dtype=complex)
    except Exception as cause:  # a user's value function may raise anything
        raise SolverError(phase, parameters, cause) from cause
    if not (np.isfinite(h).all() and np.isfinite(narrow).all()):
        raise SolverError(phase, parameters, ValueError("the bulk cell has elements that are not finite"))
    hop = np.zeros_like(h)
    hop[:, : narrow.shape[1]] = narrow
    return np.stack([h, hop])


def _found(pump: Pump) -> BlochCell:
    cell: FoundCell = find_cell(pump)
    return BlochCell(pump, cell.sample, cell.harmonics, cell.origin)
