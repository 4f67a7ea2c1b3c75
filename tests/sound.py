"""Devices that nothing is wrong with, and a workbench on which to break one rule at a time."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import kwant
import numpy as np
from devices import HARPER_GAPS, RICE_MELE_LOOPS, WIDE, harper, loop, rice_mele
from scipy.constants import electron_mass

from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Disorder, Lead, Wave
from scatterpump.cycle import Cycle
from scatterpump.pump import Continuum, Pump

LATTICE = kwant.lattice.square(norbs=1)
TABLE = {"delta": [0.5, 0.0, -0.5, 0.0, 0.5], "stagger": [0.0, 0.5, 0.0, -0.5, 0.0]}
Edit = Callable[[kwant.Builder], None]


def sign(site: Any) -> int:
    return 1 - 2 * (int(site.tag[0]) % 2)


def stagger(site: Any, phi: Any) -> Any:
    return 0.5 * sign(site) * np.sin(phi)


def dimer(right: Any, left: Any, phi: Any) -> Any:
    lower = left if left.tag[0] < right.tag[0] else right
    return -(1 + 0.5 * sign(lower) * np.cos(phi))


def wire(direction: tuple[int, int], sites: list[tuple[int, int]], *, level: Any = 0.0, hopping: float = 2.0) -> Any:
    """Return a lead of parallel wires, coupled to each other by 0.3."""
    lead = kwant.Builder(kwant.TranslationalSymmetry(direction))
    lead[(LATTICE(*site) for site in sites)] = level
    lead[kwant.HoppingKind(direction, LATTICE)] = -hopping
    across = (0, 1) if direction[0] else (1, 0)
    lead[kwant.HoppingKind(across, LATTICE)] = -0.3
    return lead


def bench(
    *,
    cells: int = 20,
    rows: int = 1,
    between: float = 0.1,
    edit: Edit | None = None,
    probe: Any = None,
    drain: Any = None,
    energy: float = 0.1,
    value: Any = stagger,
    bond: Any = dimer,
    **pump: Any,
) -> Pump:
    """Return parallel dimerised chains as somebody's own kwant system; `edit` changes it before leads are attached.

    M. J. Rice, E. J. Mele, Phys. Rev. Lett. 49, 1455 (1982) (citation from memory): one charge a cycle and row.
    """
    length = 2 * cells
    system = kwant.Builder()
    system[(LATTICE(x, y) for x in range(length) for y in range(rows))] = value
    system[kwant.HoppingKind((1, 0), LATTICE)] = bond
    if rows > 1 and between:
        system[kwant.HoppingKind((0, 1), LATTICE)] = -between
    if edit is not None:
        edit(system)
    system.attach_lead(probe or wire((-1, 0), [(0, y) for y in range(rows)]))
    system.attach_lead(drain or wire((1, 0), [(0, y) for y in range(rows)]))
    return Pump(system, Cycle.angle(), energy, **pump)


def on(x: int, y: int, value: Any) -> Edit:
    """Return an edit that gives one site a value of its own."""

    def edit(system: kwant.Builder) -> None:
        system[LATTICE(x, y)] = value

    return edit


def side_sites(system: kwant.Builder) -> None:
    for x in range(4, 36, 8):
        system[LATTICE(x, 1)] = 3.0
        system[LATTICE(x, 1), LATTICE(x, 0)] = -0.4


def column(system: kwant.Builder) -> None:
    """Let five wires meet the chain's first site over a still column."""
    system[(LATTICE(-1, y) for y in range(5))] = 0.0
    system[((LATTICE(-1, y), LATTICE(-1, y + 1)) for y in range(4))] = -0.3
    system[LATTICE(-1, 0), LATTICE(0, 0)] = -1.0


def with_lead(lead: Any, **options: Any) -> Pump:
    """Return the workbench's pump with a third lead."""
    pump = bench(**options)
    pump.system.attach_lead(lead)
    return replace(pump)


def two_orbitals() -> Pump:
    """Two coupled chains as one of two orbitals a site: additivity gives 2."""
    chain, system = kwant.lattice.chain(norbs=2), kwant.Builder()
    mixed = 0.1 * np.array([[0, 1], [1, 0]])
    system[(chain(x) for x in range(40))] = lambda site, phi: stagger(site, phi) * np.eye(2) + mixed
    system[chain.neighbors()] = lambda a, b, phi: dimer(a, b, phi) * np.eye(2)
    for direction in (-1, 1):
        lead = kwant.Builder(kwant.TranslationalSymmetry((direction,)))
        lead[chain(0)] = np.zeros((2, 2))
        lead[chain.neighbors()] = -2 * np.eye(2)
        system.attach_lead(lead)
    return Pump(system, Cycle.angle(), 0.05)


def superlattice(**changes: Any) -> Pump:
    given = {"sites": 60, "fermi_level": -1.2, "onsite": [Wave(1.5, 3)], "probe": WIDE, "drain": WIDE, **changes}
    return ModulatedChain(**given).pump()


def fine_step() -> Pump:
    """A step of 0.1 nm under electrons of a few electronvolts, the hopping fifty times the kinetic energy."""
    mass, energy = electron_mass, 1.0e-20
    return bench(continuum=Continuum(step=1e-10, mass=mass, energy=energy))


def weak(contact: float, **changes: Any) -> Pump:
    return rice_mele(loop(), energy=0.1, probe=Lead(hopping=2.0, contact=contact), **changes)


SOUND: dict[str, Callable[[], Pump]] = {
    "dimer": lambda: rice_mele(loop(), cells=20),
    "dimer twice": lambda: rice_mele(loop().repeated(2), cells=20),
    "dimer backwards": lambda: rice_mele(loop().reversed(), cells=20),
    "dimer begun elsewhere": lambda: rice_mele(loop().started_at(2.0), cells=20),
    "dimer that pumps nothing": lambda: rice_mele(RICE_MELE_LOOPS["trivial side"][0], cells=20),
    "recorded trace": lambda: rice_mele(Cycle.through(TABLE), cells=25),
    "splined trace": lambda: rice_mele(Cycle.through(TABLE, curve="spline"), cells=20),
    "contact of a hundredth": lambda: weak(0.01, cells=20),
    "contact of a ten thousandth": lambda: weak(1e-4, cells=30),
    "contact of a millionth": lambda: weak(1e-6, cells=40),
    "superlattice": superlattice,
    "long superlattice": lambda: superlattice(sites=300),
    "disordered superlattice": lambda: superlattice(sites=90, disorder=Disorder(0.3, 0.05, 3)),
    "full bands": lambda: superlattice(fermi_level=3.1, probe=Lead(hopping=3.0), drain=Lead(hopping=3.0)),
    "Harper 2/5": lambda: harper(HARPER_GAPS[10]),
    "somebody's own chain": bench,
    "ribbon": lambda: bench(rows=3, cells=24),
    "probe of five wires": lambda: bench(probe=wire((-1, 0), [(0, y) for y in range(5)]), edit=column),
    "two orbitals": two_orbitals,
    "side-attached sites": lambda: bench(edit=side_sites),
    "three leads": lambda: with_lead(wire((0, 1), [(36, 0)])),
    "fine step": fine_step,
}
