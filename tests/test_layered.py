"""The layered engine against kwant's own solver, element by element.

C. W. Groth, M. Wimmer, A. R. Akhmerov, X. Waintal, New J. Phys. 16, 063065 (2014).
"""

from __future__ import annotations

from typing import Any

import kwant
import numpy as np
import pytest
from devices import WIDE, loop, rice_mele
from hypothesis import given, settings
from hypothesis import strategies as st

from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Disorder, Lead, Wave
from scatterpump.cycle import Cycle
from scatterpump.errors import ClosedProbeError, InputError
from scatterpump.pump import Pump
from scatterpump.solver import direct, layered
from scatterpump.solver.modes import with_modes
from scatterpump.solver.reflect import reflect

PHASES = np.linspace(0.1, 6.2, 7)
CLOSE = 1e-10


def agree(pump: Pump, phases: Any = PHASES, tolerance: float = CLOSE) -> None:
    ours, theirs = layered.solve(pump, np.asarray(phases)), direct.solve(pump, np.asarray(phases))
    assert ours.engine == "layered"
    np.testing.assert_allclose(ours.reflection, theirs.reflection, rtol=0, atol=tolerance)
    np.testing.assert_allclose(ours.transmission, theirs.transmission, rtol=0, atol=tolerance)


@pytest.mark.parametrize(
    "pump",
    [
        rice_mele(loop(), cells=30),
        rice_mele(loop(), cells=3, energy=0.3),
        rice_mele(loop(), cells=20, probe=Lead(2.0, contact=0.1)),
        ModulatedChain(sites=40, fermi_level=-1.2, onsite=[Wave(1.5, 3)], probe=WIDE, drain="wall").pump(),
        ModulatedChain(
            sites=40, fermi_level=0.7, onsite=[Wave(1.0, 3.7)], disorder=Disorder(0.5, 0.3, 4), probe=WIDE, drain=WIDE
        ).pump(),
    ],
    ids=["gapped", "leaky", "weak contact", "wall", "disorder in a band"],
)
def test_chains(pump: Pump) -> None:
    agree(pump)


def test_long_chiral_chain_neither_over_nor_underflows() -> None:
    """1500 cells at E = 0, where a recursion of reciprocals alternates between e^{kn} and e^{-kn}."""
    pump = rice_mele(loop(), cells=1500)
    agree(pump, [0.0, 1e-12, 0.3, np.pi, 4.0], 1e-11)


@pytest.mark.parametrize("distance", [0.0, 1e-12, 1e-10, 1e-8, 1e-6, 1e-4])
def test_next_to_an_edge_level_of_the_closed_segment(distance: float) -> None:
    """Where the far part, cut off, has a level at the Fermi level, its Green function is infinite; r is not."""
    pump = rice_mele(loop(), cells=30, energy=0.2)
    # derived: the edge level of the dimerised chain lies at -stagger on one side and stagger on the other, here 0.5
    # sin phi = +-0.2
    level = np.arcsin(0.4)
    agree(pump, [level + distance, np.pi - level + distance, np.pi + level - distance, -level - distance], 1e-10)


def strip(
    width: int,
    length: int,
    *,
    flux: float = 0.0,
    side: bool = False,
    energy: float = 0.4,
    third: bool = False,
    unit: float = 1.0,
) -> Pump:
    """A sliding wave on a square lattice, with flux, side-attached sites and a third lead on request.

    All energies are multiplied by `unit`.
    """
    lattice, system = kwant.lattice.square(norbs=1), kwant.Builder()
    system[(lattice(x, y) for x in range(length) for y in range(width))] = lambda site, phi: (
        unit * (0.9 * np.cos(2 * np.pi * (site.tag[0] % 3) / 3 - phi) + 0.05 * site.tag[1])
    )
    system[kwant.builder.HoppingKind((1, 0), lattice)] = lambda a, b: -unit * np.exp(2j * np.pi * flux * a.tag[1])
    system[kwant.builder.HoppingKind((0, 1), lattice)] = -0.8 * unit
    if side:
        system[lattice(2, width)], system[lattice(2, width), lattice(2, width - 1)] = 0.3 * unit, -0.6 * unit
        del system[lattice(4, 0)]
    for direction in (-1, 1):
        lead = kwant.Builder(kwant.TranslationalSymmetry((direction, 0)))
        lead[(lattice(0, y) for y in range(width))] = 0.0
        lead[kwant.builder.HoppingKind((1, 0), lattice)] = -1.3 * unit
        if width > 1:
            lead[kwant.builder.HoppingKind((0, 1), lattice)] = -0.4 * unit
        system.attach_lead(lead)
    if third:
        lead = kwant.Builder(kwant.TranslationalSymmetry((0, 1)))
        lead[(lattice(x, 0) for x in (3, 4))] = 0.0
        lead[lattice(3, 0), lattice(4, 0)] = -0.5 * unit
        lead[kwant.builder.HoppingKind((0, 1), lattice)] = -1.0 * unit
        system.attach_lead(lead)
    return Pump(system, Cycle.angle(), energy * unit)


@pytest.mark.parametrize(
    "options",
    [
        {"width": 3, "length": 9},
        {"width": 3, "length": 9, "flux": 0.11},
        {"width": 4, "length": 8, "side": True},
        {"width": 2, "length": 10, "third": True},
        {"width": 8, "length": 20, "flux": 0.07},
    ],
    ids=["strip", "flux", "holes and side sites", "three leads", "wide"],
)
def test_strips(options: dict[str, Any]) -> None:
    agree(strip(**options))


@pytest.mark.parametrize("unit", [1e-6, 1e-3, 1e7])
@pytest.mark.parametrize("width", [1, 3])
def test_unit_of_energy_does_not_matter(monkeypatch: pytest.MonkeyPatch, unit: float, width: int) -> None:
    """Megaelectronvolts and nanoelectronvolts are as good as a hopping of one; nothing is taken for a lost digit."""
    expected = layered.solve(strip(width, 90), PHASES)
    monkeypatch.setattr(layered, "factorised", None)
    found = layered.solve(strip(width, 90, unit=unit), PHASES)
    turn = found.reflection @ np.linalg.inv(expected.reflection)  # kwant's modes may differ by phases
    np.testing.assert_allclose(turn, np.broadcast_to(turn[0], turn.shape), rtol=0, atol=CLOSE)


def test_probe_on_the_right_and_in_the_middle_of_an_edge() -> None:
    pump = strip(2, 10, third=True)
    for probe, drain in ((1, 0), (2, 0)):
        agree(Pump(pump.finalized, pump.cycle, pump.fermi_level, probe=probe, drain=drain))


@settings(derandomize=True, deadline=None, max_examples=200)
@given(
    seed=st.integers(0, 10**6),
    orbitals=st.integers(1, 3),
    sites=st.integers(2, 9),
    jump=st.booleans(),
    extra=st.booleans(),
)
def test_random_systems(seed: int, orbitals: int, sites: int, jump: bool, extra: bool) -> None:
    """Random complex on-site and hopping matrices, second neighbours, a third lead in the middle."""
    rng = np.random.default_rng(seed)

    def matrix() -> np.ndarray:
        return rng.standard_normal((orbitals, orbitals)) + 1j * rng.standard_normal((orbitals, orbitals))

    lattice, system, one = kwant.lattice.square(norbs=orbitals), kwant.Builder(), np.eye(orbitals)
    still, moved = ([part + part.conj().T for part in (matrix() for _ in range(sites))] for _ in range(2))
    system[(lattice(x, 0) for x in range(sites))] = lambda site, phi: (
        still[site.tag[0]] + np.cos(phi) * moved[site.tag[0]]
    )
    for x in range(sites - 1):
        system[lattice(x + 1, 0), lattice(x, 0)] = matrix()
    if jump and sites > 3:
        system[lattice(3, 0), lattice(1, 0)] = matrix()
    for place, direction in ((0, (-1, 0)), (sites - 1, (1, 0)), *([(sites // 2, (0, 1))] if extra else [])):
        lead = kwant.Builder(kwant.TranslationalSymmetry(direction))
        lead[lattice(place, 0)], lead[lattice(place, 0), lattice(place + direction[0], direction[1])] = (
            0 * one,
            1.5 * one,
        )
        system.attach_lead(lead)
    pump = Pump(system, Cycle.angle(), 0.3)
    # derived: a random system may have a level close to 0.3 that hardly couples; its condition decides how well any
    # two solvers agree
    agree(pump, [0.4, 2.2, 5.1], CLOSE * max(1.0, _condition(pump)))


def _condition(pump: Pump) -> float:
    """Largest Green function element at the phases looked at, over 1e3."""
    energies = [
        np.abs(np.linalg.eigvalsh(pump.finalized.hamiltonian_submatrix(params={"phi": p})) - 0.3).min()
        for p in (0.4, 2.2, 5.1)
    ]
    return 1e-3 / max(1e-9, min(energies))


def test_auto_says_which_engine_ran() -> None:
    pump = rice_mele(loop(), cells=5)
    assert reflect(pump, PHASES[:1]).engine == "direct"
    assert reflect(pump, PHASES[:2]).engine == "layered"
    assert reflect(pump, PHASES[:1]).engine == "layered"  # by now its path is known
    assert reflect(pump, PHASES, engine="direct").engine == "direct"
    with pytest.raises(InputError, match="engine"):
        reflect(pump, PHASES, engine="fast")  # type: ignore[arg-type]  # that is the point


def test_without_transmission() -> None:
    pump = rice_mele(loop(), cells=5)
    for engine in ("layered", "direct"):
        found = reflect(pump, PHASES, engine=engine, transmission=False)
        assert found.transmission.shape == (len(PHASES), 0, 1)
        assert not found.leakage.any()


def test_recorded_trace_needs_no_harmonics() -> None:
    cycle = Cycle.through({"delta": [0.5, 0.0, -0.5, 0.0, 0.5], "stagger": [0.0, 0.5, 0.0, -0.5, 0.0]}, curve="spline")
    agree(rice_mele(cycle, cells=10))


def test_closed_probe_is_told() -> None:
    with pytest.raises(ClosedProbeError):
        reflect(rice_mele(loop(), cells=5, energy=4.5), PHASES)


def test_equal_leads_share_what_kwant_gives_each() -> None:
    """Modes of a lead follow from its matrices alone, so a second lead with the same ones is not asked again."""
    pump = strip(3, 9)
    system = pump.finalized
    every = system.precalculate(pump.fermi_level, params=pump.parameters(0.0), what="modes")
    ours = with_modes(pump)
    assert ours.leads[0] is ours.leads[1]
    for mine, theirs in zip(ours.leads, every.leads, strict=True):
        found, expected = mine.modes(pump.fermi_level)[1], theirs.modes(pump.fermi_level)[1]
        for name in ("vecs", "vecslmbdainv", "sqrt_hop"):
            np.testing.assert_array_equal(getattr(found, name), getattr(expected, name))
