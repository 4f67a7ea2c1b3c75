"""Leakage against length: the pump prolonged by more and more of its own cells."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterpump.bulk.cell import known_cell
from scatterpump.bulk.decay import decay_per_cell
from scatterpump.pump import Pump
from scatterpump.solver.reflect import reflect

__all__ = ["Lengths", "leakage_by_length"]

Floats = NDArray[np.float64]
Indices = NDArray[np.int64]
TURN = 2 * np.pi
PHASES = 48
CELLS = (0, 1, 2, 3, 4, 6, 8, 10, 12, 16, 20)


@dataclass(frozen=True, eq=False)
class Lengths:
    """What leaks out of ever longer pumps.

    Attributes
    ----------
    name : str
    cells : (n,) int array
        Cells added to the device as it is.
    leakage : (n,) float array
        Largest |t|^2 met along the cycle.
    decay : float or None
        |beta| of the slowest wave, per cell of the interior: leakage falls like beta^(2 cells); None where no cell is
        known.
    """

    name: str
    cells: Indices
    leakage: Floats
    decay: float | None


def leakage_by_length(pump: Pump, cells: tuple[int, ...] = CELLS, *, phases: int = PHASES) -> Lengths:
    """Sample the leakage of `pump` prolonged by each of `cells`.

    Raises
    ------
    InputError
        If no cell repeats inside the pump, or there is no drain.
    """
    points = TURN * np.arange(phases) / phases
    leaks = [float(reflect(pump, points, engine="layered", repeat=n).leakage.max()) for n in cells]
    decay = None if known_cell(pump) is None else decay_per_cell(pump)
    return Lengths(pump.name, np.array(cells, dtype=np.int64), np.array(leaks), decay)
