"""The cycle in the plane of its two parameters, over the distance of the bands from the Fermi level there.

The plane is walked in rows: one parameter goes to and fro as centre + radius cos u while the other rests, which is a
cycle like any other, so that the interior's Bloch Hamiltonian is known along it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterpump.bulk.cell import BlochCell, known_cell
from scatterpump.cycle import Cycle
from scatterpump.errors import InputError
from scatterpump.measure import Measure
from scatterpump.pump import Pump

__all__ = ["ParameterPlane", "parameter_plane"]

Floats = NDArray[np.float64]
TURN = 2 * np.pi
PHASES, ACROSS, UP, MOMENTA = 241, 49, 37, 48
MARGIN = 0.35  # of the loop's extent on either side


@dataclass(frozen=True, eq=False)
class ParameterPlane:
    """A cycle of two parameters, and how open the pump is about it.

    Attributes
    ----------
    name : str
    names : (x, y)
        The two parameters.
    phases : (n,) float array
        Radians, 0 to 2 pi.
    path : (n, 2) float array
        Their values along the cycle.
    x, y : (a,), (b,) float arrays
        The grid; empty where no cell repeats inside the pump.
    distance : (b, a) float array
        Distance of the Fermi level from the nearest band over sampled k, in the pump's unit.
    is_closed : (b, a) bool array
        Where a band reaches across the Fermi level.
    unit : str
        What stands behind an energy: "meV", or "pump's unit" where that is another one, or none.
    """

    name: str
    names: tuple[str, str]
    phases: Floats
    path: Floats
    x: Floats
    y: Floats
    distance: Floats
    is_closed: NDArray[np.bool_]
    unit: str


def parameter_plane(pump: Pump) -> ParameterPlane:
    """Sample the plane of the two parameters that the cycle of `pump` sets.

    Raises
    ------
    InputError
        If the cycle does not set exactly two parameters.
    """
    names = pump.cycle.names
    if len(names) != 2:
        raise InputError(
            f"the cycle sets {len(names)} parameter{'s' * (len(names) != 1)} ({', '.join(names)})",
            allowed="a cycle of exactly two parameters, for a picture of their plane",
        )
    phases = np.linspace(0.0, TURN, PHASES)
    path = np.array([[float(pump.cycle.at(float(phase))[name]) for name in names] for phase in phases])
    low, high = path.min(axis=0), path.max(axis=0)
    margin = MARGIN * np.where(high > low, high - low, max(float((high - low).max()), 1.0))
    (left, bottom), (right, top) = low - margin, high + margin
    turns = np.linspace(-np.pi, 0.0, ACROSS)
    x, y = (left + right) / 2 + (right - left) / 2 * np.cos(turns), np.linspace(bottom, top, UP)
    cell = known_cell(pump)
    if cell is None:
        x, y, rows = np.empty(0), np.empty(0), []
    else:
        rows = [_row(cell, (names[0], left, right), (names[1], float(value)), turns) for value in y]
    distance = np.array([row[0] for row in rows]).reshape(len(y), len(x))
    closed = np.array([row[1] for row in rows], dtype=bool).reshape(len(y), len(x))
    unit = Measure(pump.units).on_axes
    return ParameterPlane(pump.name, (names[0], names[1]), phases, path, x, y, distance, closed, unit)


def _row(
    cell: BlochCell, moving: tuple[str, float, float], resting: tuple[str, float], turns: Floats
) -> tuple[Floats, NDArray[np.bool_]]:
    """Distance from the bands, and whether one reaches across, along one row of the plane."""
    name, low, high = moving
    cycle = Cycle.ellipse(x=(name, (low + high) / 2, (high - low) / 2), y=(*resting, 0.0))
    momenta = TURN * np.arange(MOMENTA) / MOMENTA
    h, hop = np.moveaxis(cell.along(cycle).blocks(turns), 1, 0)
    turned = hop[:, None] * np.exp(-1j * momenta)[:, None, None]
    energies = np.linalg.eigvalsh(h[:, None] + turned + turned.conj().swapaxes(2, 3)) - cell.fermi_level
    filled = (energies < 0).sum(axis=2)
    return np.abs(energies).min(axis=(1, 2)), np.asarray(filled.min(axis=1) != filled.max(axis=1))
