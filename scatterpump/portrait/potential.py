"""The potential that the cycle moves: mean on-site energy at each place along the device, over phi."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterpump.anatomy.geometry import geometry
from scatterpump.measure import Measure
from scatterpump.pump import Pump
from scatterpump.solver.hamiltonian import driven_path

__all__ = ["Potential", "potential"]

Floats = NDArray[np.float64]
TURN = 2 * np.pi
PHASES = 121
SAME = 1e-6  # lattice constants: places that differ by less are one


@dataclass(frozen=True, eq=False)
class Potential:
    """On-site energies along a device.

    Attributes
    ----------
    name : str
    phases : (n,) float array
        Radians, 0 to 2 pi.
    places : (p,) float array
        x of the sites, each once, ascending; lattice constants.
    energies : (n, p) float array
        Mean on-site energy of all orbitals there, in the pump's unit.
    unit : str
        What stands behind an energy: "meV", or "pump's unit" where that is another one, or none.
    """

    name: str
    phases: Floats
    places: Floats
    energies: Floats
    unit: str


def potential(pump: Pump, *, phases: int = PHASES) -> Potential:
    """Sample the on-site energies of `pump` at even phases."""
    points, (driven, _) = np.linspace(0.0, TURN, phases), driven_path(pump)
    own = np.flatnonzero(driven.rows == driven.columns)
    site = np.searchsorted(driven.offsets, driven.rows[own], side="right") - 1
    x = np.round(geometry(pump).positions[site, 0] / SAME) * SAME
    places, group = np.unique(x, return_inverse=True)
    values = driven.many(points)[:, own].real
    summed = np.zeros((phases, len(places)))
    np.add.at(summed.T, group, values.T)
    return Potential(pump.name, points, places, summed / np.bincount(group), Measure(pump.units).on_axes)
