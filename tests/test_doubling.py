"""Runs of equal cells joined by doubling: the same r and t as kwant's, longer than anybody builds, and endless.

The star product: R. Redheffer, J. Math. Phys. (MIT) 41, 1 (1962) (citation from memory).
"""

from __future__ import annotations

from typing import Any

import kwant
import numpy as np
import pytest
from devices import HARPER_GAPS, WIDE, harper, loop, rice_mele
from test_layered import PHASES, strip

from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Disorder, Lead, Wave
from scatterpump.cycle import Cycle
from scatterpump.errors import ClosedGapError, InputError
from scatterpump.pump import Pump
from scatterpump.solver import direct
from scatterpump.solver.doubling import Scattering, join
from scatterpump.solver.joined import joined, run_of
from scatterpump.solver.matching import match
from scatterpump.solver.problem import prepare
from scatterpump.solver.reflect import reflect


def forced(pump: Pump, phases: Any = PHASES, tolerance: float = 1e-10) -> None:
    """Join all cells of `pump` by doubling, whatever the cost, and compare with kwant's own solver."""
    problem = prepare(pump)
    run = run_of(problem, transmission=True)
    device, _ = joined(problem, problem.path.many(np.asarray(phases)), run, run.repeats - 2, True)
    r, t = match(problem.probe, device)
    reference = direct.solve(pump, np.asarray(phases))
    np.testing.assert_allclose(r, reference.reflection, rtol=0, atol=tolerance)
    np.testing.assert_allclose(t, reference.transmission, rtol=0, atol=tolerance)


@pytest.mark.parametrize(
    "pump",
    [
        strip(3, 30),
        strip(4, 30, flux=0.1),
        strip(8, 40, flux=0.25),
        strip(4, 30, energy=1.3),
        rice_mele(loop(), cells=40),
        rice_mele(loop(), cells=40, energy=0.3, probe=Lead(2.0, contact=0.1)),
    ],
    ids=["strip", "flux", "wide", "in a band", "chain", "weak contact"],
)
def test_joined_cells_are_kwants(pump: Pump) -> None:
    forced(pump)


@pytest.mark.parametrize("width", [1, 3, 8])
def test_next_to_an_edge_level_of_the_closed_device(width: int) -> None:
    """Cut off from the probe the device has a level at the Fermi level there; nothing in unitary form has a pole."""
    pump = weakly_coupled_chains(width, 36)
    level = _edge_level(pump)
    phases = np.array([level + side * d for d in (0.0, 1e-12, 1e-10, 1e-8, 1e-6, 1e-4) for side in (1, -1)])
    forced(pump, phases)
    swept, reference = reflect(pump, phases, engine="layered"), direct.solve(pump, phases)
    np.testing.assert_allclose(swept.reflection, reference.reflection, rtol=0, atol=1e-10)


def weakly_coupled_chains(width: int, length: int, odd: float = 0.0) -> Pump:
    """A sliding wave on chains side by side, gapped at -1.2; site (14, 0) may differ by `odd`."""
    lattice, system = kwant.lattice.square(norbs=1), kwant.Builder()
    system[(lattice(x, y) for x in range(length) for y in range(width))] = lambda site, phi: (
        1.5 * np.cos(2 * np.pi * (site.tag[0] % 3) / 3 - phi) + odd * (site.tag == (14, 0))
    )
    along, across = (kwant.builder.HoppingKind(step, lattice) for step in ((1, 0), (0, 1)))
    system[along], system[across] = -1.0, -0.1
    for direction in (-1, 1):
        lead = kwant.Builder(kwant.TranslationalSymmetry((direction, 0)))
        lead[(lattice(0, y) for y in range(width))] = 0.0
        lead[along], lead[across] = -2.0, -0.1
        system.attach_lead(lead)
    return Pump(system, Cycle.angle(), -1.2)


def _edge_level(pump: Pump) -> float:
    """A phase where a level of the closed device crosses the Fermi level, by bisection on numpy's eigenvalues."""

    def below(phase: float) -> int:
        levels = np.linalg.eigvalsh(pump.finalized.hamiltonian_submatrix(params={"phi": phase}))
        return int((levels < pump.fermi_level).sum())

    grid = np.linspace(0.0, 2 * np.pi, 13)
    counts = [below(phase) for phase in grid]
    first = int(np.flatnonzero(np.diff(counts))[0])
    left, right = grid[first], grid[first + 1]
    for _ in range(50):
        middle = (left + right) / 2
        left, right = (middle, right) if below(middle) == counts[first] else (left, middle)
    return float(left + right) / 2


def test_a_prolonged_pump_is_the_one_built_longer() -> None:
    short, long = (harper(HARPER_GAPS[7], sites=sites) for sites in (50, 100))
    ours, theirs = reflect(short, PHASES, repeat=10), direct.solve(long, PHASES)
    np.testing.assert_allclose(ours.reflection, theirs.reflection, rtol=0, atol=1e-10)
    np.testing.assert_allclose(ours.transmission, theirs.transmission, rtol=0, atol=1e-12)


def test_a_prolonged_pump_in_a_band_still_conducts() -> None:
    """The transmission of a periodic chain does not decay; rounding must not either create or absorb current."""
    pump = ModulatedChain(sites=30, fermi_level=0.1, onsite=[Wave(0.3, 3)], probe=WIDE, drain=WIDE).pump()
    found = reflect(pump, [0.4], repeat=100_000)
    total = np.abs(found.reflection) ** 2 + np.abs(found.transmission) ** 2
    assert total.item() == pytest.approx(1.0, abs=1e-9)
    assert found.leakage.item() > 0.1


def test_cells_are_joined_faster_than_they_are_counted() -> None:
    """100 times as many cells take a few more joins, and the answer of a gapped pump stays."""
    pump = rice_mele(loop(), cells=20)
    ten, many = reflect(pump, PHASES, repeat=1000), reflect(pump, PHASES, repeat=100_000)
    np.testing.assert_allclose(ten.reflection, many.reflection, rtol=0, atol=1e-13)
    np.testing.assert_allclose(many.reflection, reflect(pump, PHASES, endless=True).reflection, rtol=0, atol=1e-13)


def test_an_endless_pump_in_a_band_has_no_answer() -> None:
    pump = ModulatedChain(sites=30, fermi_level=0.1, onsite=[Wave(0.3, 3)], probe=WIDE, drain=WIDE).pump()
    with pytest.raises(ClosedGapError, match="waves pass through the interior at phi"):
        reflect(pump, PHASES, endless=True)


@pytest.mark.parametrize(
    ("options", "complaint"),
    [
        ({"repeat": -1}, "whole number"),
        ({"repeat": 2.5}, "whole number"),
        ({"repeat": True}, "whole number"),
        ({"repeat": 2, "endless": True}, "both"),
        ({"repeat": 2, "engine": "direct"}, "cannot prolong"),
    ],
    ids=str,
)
def test_prolonging_is_asked_for_properly(options: dict[str, Any], complaint: str) -> None:
    with pytest.raises(InputError, match=complaint):
        reflect(rice_mele(loop(), cells=20), PHASES, **options)


def test_disorder_has_no_cell_to_prolong_by() -> None:
    pump = ModulatedChain(
        sites=30, fermi_level=-1.2, onsite=[Wave(1.5, 3)], disorder=Disorder(onsite=0.1), probe=WIDE, drain=WIDE
    ).pump()
    with pytest.raises(InputError, match="no cell that it repeats"):
        reflect(pump, PHASES, repeat=1)
    with pytest.raises(InputError, match="no cell that it repeats"):
        reflect(pump, PHASES, endless=True)


def test_a_lead_between_the_cells_keeps_its_transmission_to_itself() -> None:
    pump = strip(2, 31, third=True)
    np.testing.assert_allclose(
        reflect(pump, PHASES, engine="layered").transmission, direct.solve(pump, PHASES).transmission, atol=1e-10
    )
    with pytest.raises(InputError, match="before the end of the repeated cells"):
        reflect(pump, PHASES, repeat=3)


@pytest.mark.parametrize(("odd", "cells"), [(0.0, 9), (1e-6, 4)])
def test_one_odd_site_ends_the_run(odd: float, cells: int) -> None:
    run = prepare(weakly_coupled_chains(2, 30, odd)).run
    assert run is not None
    assert (run.length, run.repeats) == (3, cells)


def test_no_run_in_few_layers() -> None:
    assert prepare(rice_mele(loop(), cells=2)).run is None


def test_star_product_is_associative_and_unitary() -> None:
    rng = np.random.default_rng(5)

    def unitary(ports: int) -> Scattering:
        """Six waves in all, so many of them on the right."""
        matrix = np.linalg.qr(rng.standard_normal((4, 6, 6)) + 1j * rng.standard_normal((4, 6, 6)))[0]
        k = 6 - ports
        return Scattering(matrix[:, :k, :k], matrix[:, :k, k:], matrix[:, k:, :k], matrix[:, k:, k:])

    def whole(s: Scattering) -> np.ndarray:
        return np.block([[s.left, s.back], [s.forth, s.right]])

    a, b, c = unitary(3), unitary(3), unitary(3)
    once, twice = whole(join(join(a, b), c)), whole(join(a, join(b, c)))
    np.testing.assert_allclose(once, twice, atol=1e-12)
    np.testing.assert_allclose(once @ once.conj().swapaxes(1, 2), np.broadcast_to(np.eye(6), once.shape), atol=1e-12)
