"""One cell of the pump's interior as a Bloch Hamiltonian.

    H(k, phi) = h(phi) + V(phi) e^{-ik} + V(phi)^+ e^{ik},     psi(next cell) = e^{ik} psi,

where V hops from a cell to the next one, away from the probe.  k in radians per cell, energies in the pump's unit.
The cell is the one that the pump was given, or else the one that repeats in the device itself (`found`).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.bulk.found import FoundCell, find_cell
from scatterpump.cycle import Cycle
from scatterpump.errors import NoBulkError, SolverError
from scatterpump.pump import Pump
from scatterpump.solver.hamiltonian import driven_path
from scatterpump.solver.harmonics import Harmonics, fit

__all__ = ["BlochCell", "bloch_cell", "interior", "known_cell"]

Matrices = NDArray[np.complex128]
Sample = Callable[[Any], Matrices]
CIRCLE = 64  # equally spaced phases of a mean over the cycle: exact for waves of up to 63 harmonics
ROOM = 2**26  # bytes of samples to keep: some 2000 phases of a cell of 30 orbitals
GIVEN = "the cell that the pump was given"


@dataclass(frozen=True, eq=False)
class BlochCell:
    """h(phi) and V(phi) of one cell, and the Fermi level.

    Attributes
    ----------
    pump : Pump
        The pump whose interior this is.
    sample : callable
        Phases (n,) to (h, V) at each of them, shape (n, 2, q, q).
    found : FoundCell or None
        Where the cell is in the device; None if the pump was given it, or if it is `driven` another way.
    """

    pump: Pump
    sample: Sample
    found: FoundCell | None
    _kept: dict[bytes, Matrices] = field(default_factory=dict, init=False, repr=False)

    @property
    def origin(self) -> str:
        """Where the cell comes from, in words."""
        return GIVEN if self.found is None else self.found.origin

    @cached_property
    def harmonics(self) -> Harmonics | None:
        """Fourier coefficients of the stack (h, V), shape (2K+1, 2, q, q), or None if phi enters otherwise."""
        return fit(self.sample) if self.found is None else self.found.harmonics

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
        if self.harmonics is not None:
            return self.harmonics.at(points)
        every, places = np.unique(points, return_inverse=True)  # grids ask for each phase at many momenta
        return np.asarray(self._sampled(every)[places])

    def _sampled(self, phases: NDArray[np.float64]) -> Matrices:
        """Return (h, V) at each of `phases`, kept while there is room: all factors of a drive use the same."""
        key = phases.tobytes()
        if key in self._kept:
            return self._kept[key]
        found = self.sample(phases)
        if found.nbytes + sum(kept.nbytes for kept in self._kept.values()) <= ROOM:
            self._kept[key] = found
        return found

    def hamiltonian(self, momenta: Any, phases: Any) -> Matrices:
        """Return H(k, phi) at pairs of `momenta` and `phases` (radians, shape (n,) each), shape (n, q, q)."""
        h, hop = np.moveaxis(self.blocks(phases), 1, 0)
        turned = hop * np.exp(-1j * np.asarray(momenta))[:, None, None]
        return np.asarray(h + turned + turned.conj().swapaxes(1, 2))

    def driven(self, factor: float) -> BlochCell:
        """Return the cell with all that moves in it multiplied by `factor`, about its mean over the cycle."""
        mean = self.blocks(2 * np.pi * np.arange(CIRCLE) / CIRCLE).mean(axis=0)
        return BlochCell(self.pump, lambda phases: mean + factor * (self.blocks(phases) - mean), None)

    def along(self, cycle: Cycle) -> BlochCell:
        """Return the same cell driven round another cycle; one that was found is not looked for again."""
        pump = self.pump.on(cycle)
        if self.found is None:
            return _given(pump)
        found = replace(self.found, path=driven_path(pump)[1])
        return BlochCell(pump, found.sample, found)


def bloch_cell(pump: Pump) -> BlochCell:
    """Return the Bloch Hamiltonian of the pump's interior.

    Raises
    ------
    NoBulkError
        If it has none: no cell was given, and none repeats along the device.
    """
    cell: BlochCell = pump.once("bloch cell", lambda: _found(pump) if pump.bulk is None else _given(pump))
    return cell


def known_cell(pump: Pump) -> BlochCell | None:
    """Return the cell that `pump` was given, or else the one that is found in its device, or None: all rooms ask here.

    A given cell is taken as it is, without a look at its elements; one that was not given is looked for once.
    """
    try:
        return bloch_cell(pump)
    except NoBulkError:
        return None


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

    return BlochCell(pump, sample, None)


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
    cell = find_cell(pump)
    return BlochCell(pump, cell.sample, cell)
