"""The charge of a fast cycle: Floquet scattering, with sidebands added until nothing changes any more."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterpump.operation.floquet import MOST_SIDEBANDS, Ladder, drive_of
from scatterpump.operation.thermal import Levels, average, edges, weight
from scatterpump.pump import Pump

__all__ = ["FIRST_SIDEBANDS", "DrivenCharge", "driven_charge"]

Floats = NDArray[np.float64]
ABSOLUTE = 1e-9
RELATIVE = 1e-2  # of the shift
FIRST_SIDEBANDS = 8
PANELS = 48  # of four energies; in a long device averages over many levels end here, and the error says so
MOST_UNKNOWNS = 30_000  # orbitals times rungs: some seconds for each energy


@dataclass(frozen=True, eq=False)
class DrivenCharge:
    """What a finite frequency makes of a slow charge.

    Attributes
    ----------
    shift : (l,) float array
        Charge from each lead, less the reference.
    error : float
        Estimated from panels and their halves, from what more sidebands change, and from unitarity.
    sidebands, evaluations : int
        Rungs on either side of the Fermi level, and ladders solved.
    """

    shift: Floats
    error: float
    sidebands: int
    evaluations: int


def driven_charge(
    pump: Pump,
    reference: Floats,
    frequency: float,
    temperature: float = 0.0,
    *,
    absolute: float = ABSOLUTE,
    relative: float = RELATIVE,
    sidebands: int = FIRST_SIDEBANDS,
    panels: int = PANELS,
) -> DrivenCharge:
    """Return by how much the charges from each lead differ from `reference` at a finite frequency.

    Parameters
    ----------
    pump : Pump
    reference : (l,) float array
        The cold and slow charges.
    frequency, temperature : float
        hbar omega and k_B T, as energies.
    absolute, relative : float
        Error to be allowed, and the same as a share of the shift; the larger one counts.
    sidebands : int
        How many to begin with.
    panels : int
        Most panels of four energies to measure.
    """
    rungs, cut, evaluations = _settled(pump, reference, frequency, temperature, absolute, relative, sidebands)
    unitarity = [0.0]

    def charge_at(energy: float) -> Floats:
        found = rungs.charge(pump.fermi_level + energy, frequency)
        unitarity.append(found.unitarity)
        return found.leads

    levels = Levels(charge_at, reference)
    found = average(
        levels,
        lambda energies: weight(energies, temperature, frequency)[None],
        edges(temperature, frequency),
        absolute=np.full(len(reference), absolute),
        relative=relative,
        budget=panels,
    )
    error = float(found.errors.max()) + cut + max(unitarity)
    return DrivenCharge(found.shift[0], error, rungs.sidebands, evaluations + len(levels.known))


def _settled(
    pump: Pump,
    reference: Floats,
    frequency: float,
    temperature: float,
    absolute: float,
    relative: float,
    sidebands: int,
) -> tuple[Ladder, float, int]:
    """A ladder at which more rungs change nothing at a few energies, by how much they still do, and ladders solved."""
    energies = pump.fermi_level + np.array([-2 * temperature, 0.3 * frequency, frequency + 2 * temperature])
    drive = drive_of(pump)
    rungs = drive.ladder(sidebands)
    found, solved = _charges(rungs, energies, frequency), len(energies)
    while True:
        more = drive.ladder(rungs.sidebands * 3 // 2)
        better, solved = _charges(more, energies, frequency), solved + len(energies)
        cut, scale = float(np.abs(better - found).max()), float(np.abs(better - reference).max())
        if cut <= max(absolute, relative * scale):
            return rungs, cut, solved
        next_up = more.sidebands * 3 // 2
        if next_up > MOST_SIDEBANDS or 2 * next_up * more.size > MOST_UNKNOWNS:
            return more, cut, solved
        rungs, found = more, better


def _charges(rungs: Ladder, energies: Floats, frequency: float) -> Floats:
    return np.array([rungs.charge(energy, frequency).leads for energy in energies.tolist()])
