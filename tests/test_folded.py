"""Folding must not be seen from outside: det r up to one constant, singular values, and the number of channels."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import kwant
import numpy as np
import pytest
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from scatterpump.cycle import Cycle
from scatterpump.errors import SolverError
from scatterpump.pump import Pump
from scatterpump.solver.band import apply, factor
from scatterpump.solver.folded import FoldedDevice, fold
from scatterpump.solver.modes import with_modes
from scatterpump.winding.certificate import certify

Complex = NDArray[np.complex128]
PHASES = np.linspace(0.0, 6.1, 9)
CHAIN, SQUARE, PAIR = kwant.lattice.chain(norbs=1), kwant.lattice.square(norbs=1), kwant.lattice.chain(norbs=2)
BESIDE = kwant.lattice.chain(norbs=1, name="beside")
S0, SX, SZ = np.eye(2), np.array([[0, 1], [1, 0]]), np.diag([1.0, -1.0])


def sliding(site: Any, phi: float) -> float:
    return 1.4 * np.cos(2.1 * site.tag[0] - phi + 0.4 * site.tag[-1])


def turning(site: Any, phi: float) -> Any:
    return 0.8 * np.cos(phi + site.tag[0]) * SZ + 0.3 * np.sin(phi) * SX


def swinging(a: Any, b: Any, phi: float) -> complex:
    return -1.0 - 0.4 * np.sin(phi + a.tag[0]) + 0.3j * np.cos(phi)


def lead(
    direction: Sequence[int], sites: Sequence[Any], *, hopping: Any = -1.6, level: Any = 0.0, across: complex = -1.0
) -> kwant.Builder:
    """A straight wire whose cell is `sites`, neighbours in the list being joined."""
    wire = kwant.Builder(kwant.TranslationalSymmetry(tuple(direction)))
    for site in sites:
        wire[site] = level
    for site in sites:
        wire[site, site.family(*(np.array(site.tag) + direction))] = hopping
    for a, b in zip(sites, sites[1:], strict=False):
        wire[a, b] = across
    return wire


def chain(driven: range, still: range, *, contact: complex = -1.0) -> kwant.Builder:
    """Sites of `still` of which `driven` are modulated; the first bond is the contact."""
    system = kwant.Builder()
    for x in still:
        system[CHAIN(x)] = sliding if x in driven else 0.3 * np.cos(1.7 * x)
    for x in still[:-1]:
        system[CHAIN(x), CHAIN(x + 1)] = swinging if x in driven and x + 1 in driven else -1.0
    system[CHAIN(still[0]), CHAIN(still[1])] = contact
    return system


def plain_chain() -> Pump:
    system = chain(range(0, 9), range(-1, 10))
    system.attach_lead(lead((-1,), [CHAIN(0)]))
    system.attach_lead(lead((1,), [CHAIN(0)]))
    return Pump(system, Cycle.angle(), 0.4)


def long_still_stretches() -> Pump:
    system = chain(range(40, 48), range(0, 120), contact=-0.2)
    system.attach_lead(lead((-1,), [CHAIN(0)]))
    system.attach_lead(lead((1,), [CHAIN(0)]))
    return Pump(system, Cycle.angle(), 0.4)


def hard_wall() -> Pump:
    system = chain(range(5, 12), range(0, 20), contact=-0.5j)
    system.attach_lead(lead((-1,), [CHAIN(0)]))
    return Pump(system, Cycle.angle(), 0.4, drain=None)


def dimerised_leads() -> Pump:
    """Lead cells of two and three sites, of which one is the interface."""
    system = chain(range(2, 9), range(0, 11))
    long = kwant.Builder(kwant.TranslationalSymmetry((-2,)))
    long[CHAIN(0)], long[CHAIN(1)] = 0.2, -0.1
    long[CHAIN(0), CHAIN(1)], long[CHAIN(1), CHAIN(2)] = -1.3 + 0.2j, -1.1
    system.attach_lead(long)
    longer = kwant.Builder(kwant.TranslationalSymmetry((3,)))
    for x in range(3):
        longer[CHAIN(x)] = 0.1 * x
    for x in range(3):
        longer[CHAIN(x), CHAIN(x + 1)] = -1.5
    system.attach_lead(longer)
    return Pump(system, Cycle.angle(), 0.4)


def still_side_branch(*, length: int = 7) -> Pump:
    system = chain(range(2, 9), range(0, 11))
    for i in range(length):
        system[BESIDE(i)] = 0.2 * i
        system[BESIDE(i), BESIDE(i - 1) if i else CHAIN(5)] = -0.7
    system.attach_lead(lead((-1,), [CHAIN(0)]))
    system.attach_lead(lead((1,), [CHAIN(0)]))
    return Pump(system, Cycle.angle(), 0.4)


def island() -> Pump:
    """A driven island that nothing connects to any lead."""
    system = chain(range(0, 9), range(-1, 10))
    for x in (0, 1):
        system[BESIDE(x)] = sliding
    system[BESIDE(0), BESIDE(1)] = swinging
    system.attach_lead(lead((-1,), [CHAIN(0)]))
    system.attach_lead(lead((1,), [CHAIN(0)]))
    return Pump(system, Cycle.angle(), 0.4)


def ribbon(*, width: int = 3, flux: float = 0.0, driven: range = range(3, 8), length: int = 12) -> kwant.Builder:
    system = kwant.Builder()
    for x in range(length):
        for y in range(width):
            system[SQUARE(x, y)] = sliding if x in driven else 0.2 * np.cos(x + 2.0 * y)
    for x in range(length):
        for y in range(width):
            if x + 1 < length:
                system[SQUARE(x + 1, y), SQUARE(x, y)] = -np.exp(1j * flux * y)
            if y + 1 < width:
                system[SQUARE(x, y + 1), SQUARE(x, y)] = -0.8 + 0.1j
    return system


def wide(*, flux: float = 0.0, energy: float = 0.4, **options: Any) -> Pump:
    system = ribbon(flux=flux, **options)
    column = [SQUARE(0, y) for y in range(options.get("width", 3))]
    system.attach_lead(lead((-1, 0), column, across=-0.6 + 0.2j))
    system.attach_lead(lead((1, 0), column))
    return Pump(system, Cycle.angle(), energy)


def evanescent() -> Pump:
    """At this energy only some of the three modes of either lead are open."""
    return wide(energy=-2.7, flux=0.2)


def three_leads(*, probe: int = 0) -> Pump:
    system = ribbon(flux=0.3)
    column = [SQUARE(0, y) for y in range(3)]
    system.attach_lead(lead((-1, 0), column))
    system.attach_lead(lead((1, 0), column))
    system.attach_lead(lead((0, 1), [SQUARE(9, 0), SQUARE(10, 0)]))
    return Pump(system, Cycle.angle(), 0.4, probe=probe, drain=1 if probe != 1 else 0)


def lead_in_the_middle() -> Pump:
    """The third lead sits on driven sites; the first covers two of three rows only."""
    system = ribbon(flux=0.1)
    system.attach_lead(lead((-1, 0), [SQUARE(0, 0), SQUARE(0, 1)]))
    system.attach_lead(lead((1, 0), [SQUARE(0, 1)]))
    system.attach_lead(lead((0, -1), [SQUARE(5, 0)]))
    return Pump(system, Cycle.angle(), 0.4)


def both_leads_on_one_side() -> Pump:
    """A still stretch that touches two leads belongs to neither."""
    system = ribbon()
    system.attach_lead(lead((-1, 0), [SQUARE(0, 0)]))
    system.attach_lead(lead((-1, 0), [SQUARE(0, 2)]))
    return Pump(system, Cycle.angle(), 0.4)


def uncoupled_row_in_the_lead() -> Pump:
    """The lead's interface has two sites, but only one of them hops on."""
    system = ribbon(width=2)
    wire = lead((-1, 0), [SQUARE(0, 0), SQUARE(0, 1)])
    wire[SQUARE(0, 1), SQUARE(-1, 1)] = 0.0
    system.attach_lead(wire)
    system.attach_lead(lead((1, 0), [SQUARE(0, 0), SQUARE(0, 1)]))
    return Pump(system, Cycle.angle(), 0.4)


def closed_row_in_the_lead() -> Pump:
    """Two rows that do not see each other, of which the lead opens only one at this energy."""
    system = kwant.Builder()
    for y in range(2):
        for x in range(9):
            system[SQUARE(x, y)] = sliding if 2 <= x < 7 else 0.1
        for x in range(8):
            system[SQUARE(x, y), SQUARE(x + 1, y)] = -1
    system[SQUARE(4, 0), SQUARE(4, 1)] = -0.3
    for direction in (-1, 1):
        wire = lead((direction, 0), [SQUARE(0, 0), SQUARE(0, 1)], across=0.0)
        wire[SQUARE(0, 1)] = 6.0
        system.attach_lead(wire)
    return Pump(system, Cycle.angle(), 0.4)


def narrow_neck() -> Pump:
    """Three open modes of the probe, one site to the driven part."""
    system = kwant.Builder()
    for y in range(3):
        system[SQUARE(-1, y)] = 0.1 * y
    for y in range(2):
        system[SQUARE(-1, y), SQUARE(-1, y + 1)] = -1
    system[SQUARE(0, 1)], system[SQUARE(0, 1), SQUARE(-1, 1)] = 0.2, -0.8
    for x in range(1, 8):
        system[SQUARE(x, 1)] = sliding
        system[SQUARE(x, 1), SQUARE(x - 1, 1)] = -1
    system.attach_lead(lead((-1, 0), [SQUARE(0, y) for y in range(3)]))
    system.attach_lead(lead((1, 0), [SQUARE(0, 1)]))
    return Pump(system, Cycle.angle(), 0.1)


def two_orbitals(lattice: Any = PAIR) -> Pump:
    system = kwant.Builder()
    for x in range(12):
        system[lattice(x)] = turning if 3 <= x < 9 else 0.2 * SZ
    for x in range(11):
        system[lattice(x), lattice(x + 1)] = -S0 + 0.4j * SX
    for direction in (-1, 1):
        system.attach_lead(lead((direction,), [lattice(0)], hopping=-1.5 * S0 + 0.2 * SX, level=0.1 * SZ))
    return Pump(system, Cycle.angle(), 0.3)


def mixed_orbitals() -> Pump:
    """One orbital at the ends, two in the middle."""
    left, middle = kwant.lattice.chain(norbs=1, name="ends"), kwant.lattice.chain(norbs=2, name="middle")
    system = kwant.Builder()
    for x in (0, 1, 8, 9):
        system[left(x)] = 0.1 * x
    for x in range(2, 8):
        system[middle(x)] = turning
    for x in range(2, 7):
        system[middle(x), middle(x + 1)] = -S0 + 0.4j * SX
    system[left(0), left(1)] = system[left(8), left(9)] = -1
    system[middle(2), left(1)] = np.array([[-1], [0.3j]])
    system[middle(7), left(8)] = np.array([[-0.8], [0.5]])
    for direction in (-1, 1):
        system.attach_lead(lead((direction,), [left(0)]))
    return Pump(system, Cycle.angle(), 0.3)


GEOMETRIES: dict[str, Callable[[], Pump]] = {
    "chain": plain_chain,
    "long still stretches": long_still_stretches,
    "hard wall": hard_wall,
    "long lead cells": dimerised_leads,
    "still side branch": still_side_branch,
    "island": island,
    "ribbon": wide,
    "ribbon with flux": lambda: wide(flux=0.7),
    "evanescent modes": evanescent,
    "three leads": three_leads,
    "probe is the third": lambda: three_leads(probe=2),
    "probe is the second": lambda: three_leads(probe=1),
    "lead in the middle": lead_in_the_middle,
    "both on one side": both_leads_on_one_side,
    "uncoupled row": uncoupled_row_in_the_lead,
    "closed row": closed_row_in_the_lead,
    "narrow neck": narrow_neck,
    "two orbitals": two_orbitals,
    "one and two orbitals": mixed_orbitals,
}


def folded_reflection(device: FoldedDevice, phase: float) -> Complex:
    lu = factor(device.matrix(phase))
    assert lu is not None
    return np.asarray(1j * device.probe.conj().T @ lu.solve(device.probe) - np.eye(device.probe.shape[1]))


def actual_reflection(pump: Pump) -> list[Complex]:
    system = with_modes(pump)
    found = (kwant.smatrix(system, pump.fermi_level, params=pump.parameters(float(phase))) for phase in PHASES)
    return [np.asarray(s.submatrix(pump.probe, pump.probe)) for s in found]


def singular_values(matrix: Complex, count: int) -> NDArray[np.float64]:
    """Singular values; channels that never see the driven part reflect everything."""
    found = np.linalg.svd(matrix, compute_uv=False)
    return np.sort(np.concatenate([found, np.ones(count - len(found))]))


@pytest.mark.parametrize("build", GEOMETRIES.values(), ids=GEOMETRIES)
def test_determinant_differs_from_the_whole_device_by_one_constant(build: Callable[[], Pump]) -> None:
    pump = build()
    device, actual = fold(pump), actual_reflection(pump)
    folded = [folded_reflection(device, float(phase)) for phase in PHASES]
    ratio = np.array([np.linalg.det(a) / np.linalg.det(f) for a, f in zip(actual, folded, strict=True)])
    # block elimination: D. S. Fisher, P. A. Lee, Phys. Rev. B 23, 6851 (1981) (citation from memory)
    assert_allclose(ratio, ratio[0], rtol=0, atol=1e-10)
    assert_allclose(np.abs(ratio), 1, rtol=0, atol=1e-10)
    for a, f in zip(actual, folded, strict=True):
        assert_allclose(singular_values(a, len(a)), singular_values(f, len(a)), rtol=0, atol=1e-10)
    assert np.ptp(np.unwrap(np.angle([np.linalg.det(a) for a in actual]))) > 0.05  # something is pumped about


@pytest.mark.parametrize("build", GEOMETRIES.values(), ids=GEOMETRIES)
def test_what_is_missing_in_reflection_leaves_by_the_drain(build: Callable[[], Pump]) -> None:
    device = fold(build())
    for phase in PHASES.tolist():
        lu = factor(device.matrix(phase))
        assert lu is not None
        r = folded_reflection(device, phase)
        t = device.drain.conj().T @ lu.solve(device.probe)
        # unitarity of scattering: textbook
        assert_allclose(r.conj().T @ r + t.conj().T @ t, np.eye(len(r)), rtol=0, atol=1e-10)


@pytest.mark.parametrize("build", GEOMETRIES.values(), ids=GEOMETRIES)
def test_broadenings_are_those_of_the_matrix(build: Callable[[], Pump]) -> None:
    device = fold(build())
    whole = np.eye(device.size, dtype=complex)
    matrix = apply(device.matrix(1.0), whole)
    columns = np.hstack([device.probe, device.drain])
    # definition: A^+ - A = i W W^+ summed over all leads; columns of the probe are orthogonal
    assert_allclose(1j * (matrix.conj().T - matrix), columns @ columns.conj().T, rtol=0, atol=1e-12)
    overlap = device.probe.conj().T @ device.probe
    assert_allclose(overlap, np.diag(np.diag(overlap)), rtol=0, atol=1e-12)


@pytest.mark.parametrize("build", GEOMETRIES.values(), ids=GEOMETRIES)
def test_hops_from_the_probe_are_steps_of_at_most_one(build: Callable[[], Pump]) -> None:
    device = fold(build())
    matrix = np.abs(apply(device.matrix(2.0), np.eye(device.size, dtype=complex)))
    rows, columns = np.nonzero(matrix)
    # definition of a distance in a graph
    assert np.abs(device.distance[rows] - device.distance[columns]).max() <= 1
    assert (device.distance[np.abs(device.probe).max(axis=1) > 0] == 0).all()
    assert device.distance.max() < device.size


@pytest.mark.parametrize(
    ("build", "size"),
    [
        (plain_chain, 9),
        (long_still_stretches, 8),
        (hard_wall, 15),
        (dimerised_leads, 7),
        (still_side_branch, 14),
        (island, 9),
        (wide, 15),
        (both_leads_on_one_side, 36),
        (two_orbitals, 12),
    ],
    ids=["chain", "long", "wall", "cells", "branch", "island", "ribbon", "one side", "orbitals"],
)
def test_only_what_must_stay_stays(build: Callable[[], Pump], size: int) -> None:
    device = fold(build())
    # derived: driven orbitals, and still ones that touch no lead or two
    assert device.size == size
    assert device.half <= 6 or build is both_leads_on_one_side


def test_orbitals_need_not_be_declared() -> None:
    """A lattice may leave open how many orbitals its sites have."""
    with pytest.warns(kwant.KwantDeprecationWarning):
        lattice = kwant.lattice.chain()
    told, untold = fold(two_orbitals()), fold(two_orbitals(lattice))
    assert untold.size == told.size
    reflections = (folded_reflection(device, 1.0) for device in (told, untold))
    # derived: the same Hamiltonian
    assert_allclose(*(singular_values(r, 2) for r in reflections), rtol=0, atol=1e-12)


def test_orbitals_that_join_only_for_a_part_of_the_cycle_are_kept() -> None:
    """At phi = 0 both tunnel barriers are closed, and nothing connects the dot to any lead."""
    system = kwant.Builder()
    for x in (-1, 0, 1):
        system[CHAIN(x)] = 0.0
    system[CHAIN(0)] = lambda site, phi: 0.5 * np.cos(phi + 0.8)
    system[CHAIN(-1), CHAIN(0)] = lambda a, b, phi: -0.15 * (np.sin(phi) + 1 - np.cos(phi))
    system[CHAIN(0), CHAIN(1)] = lambda a, b, phi: -0.15 * (1 - np.cos(phi) - np.sin(phi))
    for direction in (-1, 1):
        system.attach_lead(lead((direction,), [CHAIN(0)], hopping=-1.0))
    pump = Pump(system, Cycle.angle(), 0.0)
    device = fold(pump)
    ratio = [
        np.linalg.det(a) / np.linalg.det(folded_reflection(device, float(p)))
        for a, p in zip(actual_reflection(pump), PHASES, strict=True)
    ]
    # block elimination
    assert_allclose(ratio, ratio[0], rtol=0, atol=1e-10)


def test_values_that_are_not_finite_are_refused() -> None:
    """Also if the pole lies at a phase that only the search for harmonics asks for."""
    system = chain(range(0, 9), range(-1, 10))
    system[CHAIN(4)] = lambda site, phi: 0.1 / (phi - 2 * np.pi / 3)
    for direction in (-1, 1):
        system.attach_lead(lead((direction,), [CHAIN(0)]))
    # definition: H is finite
    with pytest.raises(SolverError, match="failed at phi = 2.094"):
        fold(Pump(system, Cycle.angle(), 0.4))


def staggered(site: Any, delta: float, stagger: float) -> float:
    return stagger * (-1) ** site.tag[0]


def dimerised(a: Any, b: Any, delta: float, stagger: float) -> float:
    return -1 - (-1) ** min(a.tag[0], b.tag[0]) * delta


def dimer_rows(contacts: Sequence[float], *, cells: int, barrier: int = 0, rows: int = 0) -> Pump:
    """Dimerised chains side by side, the first ones behind contacts, and one drain behind a still barrier."""
    system, rows = kwant.Builder(), rows or len(contacts)
    end = 2 * cells
    for y in range(rows):
        for x in range(end):
            system[SQUARE(x, y)] = staggered
        for x in range(end - 1):
            system[SQUARE(x, y), SQUARE(x + 1, y)] = dimerised
        for x in range(end, end + barrier + 1):
            system[SQUARE(x, y)] = 3.0 if x < end + barrier else 0.0
            system[SQUARE(x, y), SQUARE(x - 1, y)] = -1.0
    for y, contact in enumerate(contacts):
        system[SQUARE(-1, y)] = 0.0
        system[SQUARE(-1, y), SQUARE(0, y)] = -contact
    for direction, width in ((-1, len(contacts)), (1, rows)):
        wire = kwant.Builder(kwant.TranslationalSymmetry((direction, 0)))
        for y in range(width):
            wire[SQUARE(0, y)], wire[SQUARE(0, y), SQUARE(1, y)] = 0.0, -2.0
        system.attach_lead(wire)
    return Pump(system, Cycle.ellipse(x=("delta", 0.0, 0.5), y=("stagger", 0.0, 0.5)), 0.0)


@pytest.mark.parametrize(("weak", "answers"), [(1e-2, {2}), (1e-6, {2}), (1e-7, {2, None})])
def test_a_weak_channel_beside_a_strong_one_is_not_lost(weak: float, answers: set[int | None]) -> None:
    """Two chains that do not see each other pump one charge each, however weak the contact of one is."""
    pump = dimer_rows([1.0, weak], cells=20)
    device = fold(pump)
    strength = np.sort(np.linalg.norm(device.probe, axis=0) ** 2)
    assert device.probe.shape[1] == 2
    assert device.size > 80 or strength[0] / strength[1] == pytest.approx(weak**2, rel=1e-4)
    # derived: windings of blocks that are not coupled add up; so long a chain lets less through than the contact does
    assert certify(pump).number in answers


@pytest.mark.parametrize(("cells", "barrier"), [(30, 20), (40, 30)])
def test_a_drain_behind_a_barrier_is_still_a_drain(cells: int, barrier: int) -> None:
    """The level at the far end leaks through the barrier far faster than through the pump itself."""
    pump = dimer_rows([1.0], cells=cells, barrier=barrier)
    assert fold(pump).drain.shape[1] == 1
    found = certify(pump)
    # derived: e^{-2 kappa barrier}, 2 cosh kappa = 3, against (1/3)^(2 cells); r computed with 90 digits winds once
    assert found.number in {1, None}
    assert found.method != "no drain"


@pytest.mark.parametrize("contact", [1.0, 1e-3, 1e-8])
def test_a_drain_of_which_only_a_part_belongs_to_the_device_is_still_a_drain(contact: float) -> None:
    """Three rows end in one drain whose rows do not see each other; the probe sits at the first row alone."""
    pump = dimer_rows([contact], cells=24, rows=3)
    assert fold(pump).drain.shape[1] == 1
    found = certify(pump)
    # derived: rows that are not coupled do not matter, and one row pumps one charge
    assert (found.number, found.method != "no drain") == (1, True)
    assert found.leak.bound > 0


def test_a_drain_that_nothing_connects_to_the_probe_is_none() -> None:
    """Two pieces: the probe sees a wall, whatever the other lead does with the rest."""
    system = chain(range(2, 9), range(0, 11))
    del system[CHAIN(6), CHAIN(7)]
    system.attach_lead(lead((-1,), [CHAIN(0)]))
    system.attach_lead(lead((1,), [CHAIN(0)]))
    pump = Pump(system, Cycle.angle(), 0.4)
    device = fold(pump)
    assert device.drain.shape[1] == 0 or not device.drain.any()
    # derived: without a drain det A and det B are complex conjugates, and neither winds
    assert certify(pump).number == 0
