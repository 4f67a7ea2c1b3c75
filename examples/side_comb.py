"""A wire with a pocket beside every site and a third lead, as plain kwant; side_comb.toml refers to it."""

from __future__ import annotations

from math import pi
from typing import Any

import kwant
import numpy as np

PERIOD = 3
POCKET_LEVEL = 3.0
LEAD_HOPPING = 2.0


def comb(sites: int, depth: float, pocket: float, gauge_at: int) -> kwant.Builder:
    """Return the wire along x, its pockets at y = 1, leads at both ends and a weakly coupled one at `gauge_at`."""
    lattice, system = kwant.lattice.square(norbs=1), kwant.Builder()

    def sliding(site: Any, phi: Any) -> Any:
        return depth * np.cos(2 * pi * site.tag[0] / PERIOD - phi)

    for x in range(sites):
        system[lattice(x, 0)] = sliding
        system[lattice(x, 1)] = POCKET_LEVEL
        system[lattice(x, 0), lattice(x, 1)] = -pocket
    for x in range(sites - 1):
        system[lattice(x + 1, 0), lattice(x, 0)] = -1
    system[lattice(gauge_at, -1)] = 0
    system[lattice(gauge_at, -1), lattice(gauge_at, 0)] = -0.1
    for direction, start in (((-1, 0), (0, 0)), ((1, 0), (0, 0)), ((0, -1), (gauge_at, 0))):
        system.attach_lead(wire(lattice, direction, start))
    return system


def wire(lattice: Any, direction: tuple[int, int], start: tuple[int, int]) -> kwant.Builder:
    """Return a uniform wire that runs off from `start`."""
    lead = kwant.Builder(kwant.TranslationalSymmetry(direction))
    lead[lattice(*start)] = 0
    lead[lattice(start[0] + direction[0], start[1] + direction[1]), lattice(*start)] = -LEAD_HOPPING
    return lead
