"""Geometries as people bring them, in plain kwant: none is made by a builder of this package.

Potentials are those of a wave that slides away from the left as phi grows, so that the literature's integers apply.
"""

from __future__ import annotations

from math import cos, pi, sin
from typing import Any

import kwant
import numpy as np

from scatterpump.cycle import Cycle
from scatterpump.pump import Pump

PHI = Cycle.angle()
WAVE, PERIOD = 1.5, 3  # the lowest gap of this wave holds E = -1.211 and carries t = +1: see HARPER_GAPS
GAP = -1.211
WIRE_HOPPING = 2.0
HONEYCOMB = kwant.lattice.honeycomb(norbs=1)


def wave(x: float, phi: Any) -> Any:
    """Return the sliding potential."""
    return WAVE * np.cos(2 * pi * x / PERIOD - phi)


def wire(lattice: Any, direction: tuple[int, ...], *tags: tuple[int, ...], hopping: float = WIRE_HOPPING) -> Any:
    """Return a lead of parallel wires through `tags`, not tied to each other."""
    lead = kwant.Builder(kwant.TranslationalSymmetry(direction))
    one = np.eye(lattice.norbs)
    for tag in tags:
        lead[lattice(*tag)] = 0 * one
        lead[lattice(*tag), lattice(*np.add(tag, direction))] = -hopping * one
    return lead


def sliding_chain(sites: int) -> Any:
    """Return a chain along the wave, a neutral site before and behind it, without leads."""
    lattice, system = kwant.lattice.square(norbs=1), kwant.Builder()
    for x in range(sites):
        system[lattice(x, 0)] = lambda site, phi: wave(site.tag[0], phi)
    system[lattice(-1, 0)] = system[lattice(sites, 0)] = 0
    for x in range(-1, sites):
        system[lattice(x, 0), lattice(x + 1, 0)] = -1
    return lattice, system


def metallic_ring(around: int = 8, arm: int = 3) -> Pump:
    """Return a ring threaded by a flux, on two metallic arms: an interferometer, not a pump."""
    lattice, system = kwant.lattice.square(norbs=1), kwant.Builder()
    ring = kwant.lattice.chain(norbs=1, name="ring")
    system[(ring(i) for i in range(around))] = 0
    for i in range(around - 1):
        system[ring(i), ring(i + 1)] = -1
    system[ring(around - 1), ring(0)] = lambda to, fro, phi: -np.exp(1j * phi)
    for sign, place in ((-1, 0), (1, around // 2)):
        system[(lattice(sign * i, 0) for i in range(1, arm + 1))] = 0
        system[ring(place), lattice(sign, 0)] = -1
        for i in range(1, arm):
            system[lattice(sign * i, 0), lattice(sign * (i + 1), 0)] = -1
        system.attach_lead(wire(lattice, (sign, 0), (0, 0), hopping=1.0))
    return Pump(system, PHI, -0.3)


def side_attached(sites: int = 36, coupling: float = 0.4, level: float = 3.0, *, energy: float) -> Pump:
    """Return the chain with a dangling site of energy `level` at each of its sites."""
    lattice, system = sliding_chain(sites)
    for x in range(sites):
        system[lattice(x, 1)] = level
        system[lattice(x, 0), lattice(x, 1)] = -coupling
    for direction in (-1, 1):
        system.attach_lead(wire(lattice, (direction, 0), (0, 0)))
    return Pump(system, PHI, energy)


def three_leads(sites: int = 36, at: int = 18, *, probe: int = 0, drain: int = 1) -> Pump:
    """Return the chain with a third lead on one of its sites."""
    lattice, system = sliding_chain(sites)
    for direction in (-1, 1):
        system.attach_lead(wire(lattice, (direction, 0), (0, 0)))
    system.attach_lead(wire(lattice, (0, 1), (at, 0)))
    return Pump(system, PHI, GAP, probe=probe, drain=drain, lead_names=("left", "right", "top"))


def ribbon_with_side_probe(sites: int = 30, width: int = 2, *, probe: int = 2, drain: int = 0) -> Pump:
    """Return a ribbon along the wave, leads at its ends and one on the middle of its upper edge."""
    lattice, system = kwant.lattice.square(norbs=1), kwant.Builder()
    for y in range(width):
        for x in range(-1, sites + 1):
            inside = 0 <= x < sites
            system[lattice(x, y)] = (lambda site, phi: wave(site.tag[0], phi)) if inside else 0
    system[kwant.builder.HoppingKind((1, 0), lattice, lattice)] = -1
    system[kwant.builder.HoppingKind((0, 1), lattice, lattice)] = -0.2
    rows = [(0, y) for y in range(width)]
    for direction in (-1, 1):
        system.attach_lead(wire(lattice, (direction, 0), *rows))
    system.attach_lead(wire(lattice, (0, 1), (sites // 2, 0)))
    return Pump(system, PHI, GAP, probe=probe, drain=drain)


def two_orbitals(sites: int = 24, mass: float = 1.0, *, twist: int = 1) -> Pump:
    """Return the lattice Chern insulator with one momentum replaced by phi, two orbitals a site."""
    lattice, system = kwant.lattice.chain(norbs=2), kwant.Builder()
    x, y, z = (np.array(s) for s in ([[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]))

    def onsite(site: Any, phi: Any) -> Any:
        return np.sin(twist * phi) * y + (mass + np.cos(phi)) * z

    system[(lattice(i) for i in range(sites))] = onsite
    system[((lattice(i + 1), lattice(i)) for i in range(sites - 1))] = z / 2 + x / 2j
    for outside, inside, direction in ((-1, 0, -1), (sites, sites - 1, 1)):
        system[lattice(outside)] = 0 * z
        system[lattice(outside), lattice(inside)] = -np.eye(2)
        system.attach_lead(wire(lattice, (direction,), (0,)))
    return Pump(system, PHI, 0.1)


def two_orbital_bloch(k: float, phi: float, mass: float = 1.0) -> Any:
    """Return H(k, phi) of `two_orbitals`, written down from its definition."""
    return np.array(
        [
            [mass + cos(phi) + cos(k), -1j * sin(phi) - sin(k)],
            [1j * sin(phi) - sin(k), -mass - cos(phi) - cos(k)],
        ]
    )


def honeycomb_ribbon(cells: int = 8, *, energy: float) -> Pump:
    """Return a zigzag ribbon of the honeycomb lattice, two rows wide, under a wave of three of its unit cells."""
    system = kwant.Builder()
    fill_honeycomb(system, range(3 * cells), honeycomb_wave)
    fill_honeycomb(system, (-1, 3 * cells), 0)
    system[HONEYCOMB.neighbors()] = -1
    for direction in (-1, 1):
        lead = kwant.Builder(kwant.TranslationalSymmetry(HONEYCOMB.vec((direction, 0))))
        fill_honeycomb(lead, range(1), 0)
        lead[HONEYCOMB.neighbors()] = -4
        system.attach_lead(lead)
    return Pump(system, PHI, energy)


def honeycomb_cell() -> Any:
    """Return one period of that ribbon as kwant repeats it."""
    cell = kwant.Builder(kwant.TranslationalSymmetry(HONEYCOMB.vec((3, 0))))
    fill_honeycomb(cell, range(3), honeycomb_wave)
    cell[HONEYCOMB.neighbors()] = -1
    return cell


def fill_honeycomb(builder: Any, columns: Any, onsite: Any) -> None:
    """Add two rows of unit cells."""
    for lattice in HONEYCOMB.sublattices:
        builder[(lattice(i, row) for i in columns for row in range(2))] = onsite


def honeycomb_wave(site: Any, phi: Any) -> Any:
    """Return the sliding potential at a site's place."""
    return 3 * wave(site.pos[0], phi)


def with_moving_lead() -> Pump:
    """Return the chain with a probe whose level follows phi."""
    lattice, system = sliding_chain(12)
    lead = wire(lattice, (-1, 0), (0, 0))
    lead[lattice(0, 0)] = lambda site, phi: 0.1 * cos(phi)
    system.attach_lead(lead)
    system.attach_lead(wire(lattice, (1, 0), (0, 0)))
    return Pump(system, PHI, GAP)


def with_island(level: float = 0.0) -> Pump:
    """Return the chain with a dimer beside it that nothing connects to it, driven and with a level at `level`."""
    lattice, system = sliding_chain(36)
    system[lattice(5, 4)] = lambda site, phi: level + 0.3 * np.sin(phi)
    system[lattice(6, 4)] = level
    system[lattice(5, 4), lattice(6, 4)] = -0.2
    for direction in (-1, 1):
        system.attach_lead(wire(lattice, (direction, 0), (0, 0)))
    return Pump(system, PHI, GAP)
