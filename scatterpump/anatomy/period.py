"""How long one cell of the interior is."""

from __future__ import annotations

import numpy as np

from scatterpump.anatomy.geometry import geometry
from scatterpump.bulk.cell import BlochCell, known_cell
from scatterpump.bulk.found import FoundCell
from scatterpump.pump import Pump
from scatterpump.solver.hamiltonian import driven_path

__all__ = ["cell_length"]

SAME_STEP = 1e-6  # of a lattice constant: positions are sums of lattice vectors, good to rounding


def cell_length(pump: Pump) -> float | None:
    """Return the distance from a cell of the interior to the next one, in lattice constants.

    None without a cell, given or found, or where its sites have no positions that repeat with it: matrix elements may
    repeat along a device whose shape does not.

    Raises
    ------
    SolverError
        If the Hamiltonian fails where a cell is looked for.
    """
    cell = known_cell(pump)
    if cell is None:
        return None
    return _given(cell) if cell.found is None else _found(pump, cell.found)


def _given(cell: BlochCell) -> float | None:
    try:
        return float(np.linalg.norm(np.array(cell.pump.finalized_bulk.symmetry.periods, dtype=float)[0]))
    except Exception:  # a cell without a symmetry of its own: nothing that the drawing needs
        return None


def _found(pump: Pump, cell: FoundCell) -> float | None:
    """From every cell to the next, the same for each orbital."""
    offsets = driven_path(pump)[0].offsets
    places = geometry(pump).positions[np.searchsorted(offsets, cell.orbitals, side="right") - 1]
    steps = np.diff(places, axis=0)
    return float(np.linalg.norm(steps[0, 0])) if np.ptp(steps, axis=(0, 1)).max() < SAME_STEP else None
