"""The charge of a fast cycle: Floquet scattering, with sidebands added until nothing changes any more."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterpump.operation.floquet import Ladder, ladder
from scatterpump.operation.thermal import Average, Levels, average, edges, weight
from scatterpump.pump import Pump

__all__ = ["DrivenCharge", "driven_charge"]

Floats = NDArray[np.float64]
ABSOLUTE = 1e-9
RELATIVE = 1e-2  # of the deviation
FIRST_SIDEBANDS = 8
MOST_UNKNOWNS = 30_000  # orbitals times rungs: some seconds for each energy


@dataclass(frozen=True, eq=False)
class DrivenCharge:
    """What a finite frequency makes of a slow charge.

    Attributes
    ----------
    shift : (l,) float array
        Charge from each lead, less the reference.
    error : float
        Estimated from panels and their halves, from what passes by way of the outer rungs, and from unitarity.
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
    """
    sidebands, evaluations = FIRST_SIDEBANDS, 0
    while True:
        rungs = ladder(pump, sidebands)
        found, unitarity, solved = _averaged(rungs, pump.fermi_level, reference, (temperature, frequency), absolute, relative)
        evaluations += solved
        shift, reach = found.shift[0, :-1], float(found.shift[0, -1])
        settled = reach <= max(absolute, relative * float(np.abs(shift).max()))
        if settled or 4 * sidebands * rungs.size > MOST_UNKNOWNS:
            error = float(found.errors[0, :-1].max()) + reach + unitarity
            return DrivenCharge(shift, error, sidebands, evaluations)
        sidebands *= 2


def _averaged(
    rungs: Ladder, level: float, reference: Floats, at: tuple[float, float], absolute: float, relative: float
) -> tuple[Average, float, int]:
    """Average over energy of the shifts and, in the last place, of what passes by way of the outer rungs."""
    unitarity = [0.0]

    def charge_at(energy: float) -> Floats:
        found = rungs.charge(level + energy, at[1])
        unitarity.append(found.unitarity)
        return np.append(found.leads, found.reach)

    levels = Levels(charge_at, np.append(reference, 0.0))
    allowed = np.append(np.full(len(reference), absolute), np.inf)
    found = average(levels, lambda energies: weight(energies, *at)[None], edges(*at), absolute=allowed, relative=relative)
    return found, max(unitarity), len(levels.known)
