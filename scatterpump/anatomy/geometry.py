"""Where the sites of a pump are, which are bonded, and where its leads hold on.

All of it follows from the system alone, whatever the values of its matrix elements.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.pump import Pump

__all__ = ["Geometry", "geometry"]

Floats = NDArray[np.float64]
Indices = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Geometry:
    """Sites, bonds and leads.

    Attributes
    ----------
    positions : (sites, d) float array
        In lattice constants; the sites' numbers where they have no positions of a common dimension.
    bonds : (bonds, 2) int array
        Pairs of sites, each once.
    interfaces : tuple of int arrays
        For every lead the sites that it is attached to.
    """

    positions: Floats
    bonds: Indices
    interfaces: tuple[Indices, ...]

    def at(self, site: int) -> tuple[float, ...]:
        """Return the position of a site."""
        return tuple(float(x) for x in self.positions[site])


def geometry(pump: Pump) -> Geometry:
    """Return the geometry of `pump`."""
    system = pump.finalized
    count = int(system.graph.num_nodes)
    pairs = np.array([(i, j) for i, j in system.graph], dtype=np.int64).reshape(-1, 2)
    bonds = np.unique(np.sort(pairs, axis=1), axis=0)
    interfaces = tuple(np.array(interface, dtype=np.int64) for interface in system.lead_interfaces)
    return Geometry(_positions(system, count), bonds, interfaces)


def _positions(system: Any, count: int) -> Floats:
    try:
        found = np.array([np.atleast_1d(system.pos(i)) for i in range(count)], dtype=float)
    except Exception:  # a site family without positions, or of several dimensions: nothing that forbids solving
        found = np.empty((0, 0))
    usable = found.ndim == 2 and found.shape[0] == count and found.shape[1] > 0 and bool(np.isfinite(found).all())
    return found if usable else np.arange(count, dtype=float)[:, None]
