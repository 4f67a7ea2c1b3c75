"""What pictures show is what kwant, closed forms and the proof say."""

from __future__ import annotations

from dataclasses import replace

import kwant
import numpy as np
import pytest
from devices import WIDE, loop, rice_mele
from numpy.testing import assert_allclose
from sound import bench

from scatterpump import portrait
from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Lead, Wave
from scatterpump.bulk import cell
from scatterpump.bulk.gap import bulk_gap
from scatterpump.errors import InputError
from scatterpump.portrait.window import energy_window
from scatterpump.pump import Pump
from scatterpump.solver.reflect import reflect
from scatterpump.winding.certificate import certify

TURN = 2 * np.pi


def sliding(*, sites: int = 30, contact: float = 1.0) -> Pump:
    probe = Lead(hopping=2.0, contact=contact)
    return ModulatedChain(sites=sites, fermi_level=-1.2, onsite=[Wave(1.5, 3)], probe=probe, drain=WIDE).pump()


@pytest.mark.parametrize("contact", [1.0, 1e-3], ids=["wide level", "level of width 1e-7"])
def test_curve_of_det_r_goes_round_as_often_as_is_proven(contact: float) -> None:
    pump = sliding(contact=contact)
    winding = certify(pump)
    found = portrait.turning(pump, winding)
    # derived: the samples gather at the crossings, so that even a narrow level is seen
    assert winding.number == 1
    assert found.agrees
    assert_allclose(found.turned[-1], TURN, atol=1e-9)
    assert (found.phases[0], found.phases[-1]) == (0.0, TURN)


def test_missed_level_is_admitted() -> None:
    chain = ModulatedChain(sites=30, fermi_level=-1.2, onsite=[Wave(1.5, 3)], probe=WIDE, drain="wall")
    pump = chain.pump()
    found = portrait.turning(pump, certify(pump))
    # derived: a closed far end takes back what the near one took in, by a level of width 1e-13 that no sample meets
    assert found.winding.number == 0
    assert not found.agrees


def test_eigenphases_add_up_to_the_phase_of_det_r() -> None:
    pump = bench(rows=3)
    found = portrait.turning(pump, certify(pump))
    determinant = reflect(pump, found.phases).determinant
    # derived: det r is the product of r's eigenvalues
    assert found.eigenphases.shape == (len(found.phases), 3)
    assert_allclose(np.exp(1j * found.eigenphases.sum(axis=1)), determinant / np.abs(determinant), atol=1e-9)


def test_bands_are_those_of_the_dimerised_chain() -> None:
    found = portrait.spectrum(rice_mele(loop(delta=(0.0, 0.4), stagger=(0.0, 0.6)), cells=20), phases=13)
    delta, stagger = 0.4 * np.cos(found.phases), 0.6 * np.sin(found.phases)
    # M. J. Rice, E. J. Mele, Phys. Rev. Lett. 49, 1455 (1982) (citation from memory):
    # E = +-sqrt(stagger^2 + 4 cos^2(k/2) + 4 delta^2 sin^2(k/2)) for hoppings 1 +- delta
    assert_allclose(found.bottom[:, 1], np.hypot(stagger, 2 * np.abs(delta)), atol=1e-12)
    assert_allclose(found.top[:, 1], np.hypot(stagger, 2.0), atol=1e-12)
    assert_allclose(found.bottom, -found.top[:, ::-1], atol=1e-12)


def test_edge_level_passes_the_fermi_level_at_the_proven_crossing() -> None:
    pump = sliding()
    (crossing,) = certify(pump).crossings
    found = portrait.spectrum(pump, bulk_gap(pump), phases=721)
    near = found.is_between_bands & (found.nearness > 0.9)
    energies = np.where(near, found.levels, np.nan)
    closest = np.nanmin(np.abs(energies - pump.fermi_level), axis=1, initial=9.0)
    # derived: r has the eigenvalue +1 where the device, closed towards the probe, has a level at the Fermi level
    assert abs(found.phases[closest.argmin()] - crossing.phase) < TURN / 720


def test_density_is_that_of_kwant() -> None:
    pump = bench(rows=2, cells=6)
    energies = np.array([0.17, 0.63])
    found = portrait.local_density(pump, energies, phases=4)
    first = [i for i in range(pump.finalized.graph.num_nodes) if pump.finalized.pos(i)[0] < 6]
    for row, energy in zip(found.density, energies, strict=True):
        for value, phase in zip(row, found.phases, strict=True):
            density = kwant.ldos(pump.finalized, energy, params=pump.parameters(float(phase)))
            # kwant's own local density of states, summed over the first six columns of sites
            assert_allclose(value, density[first].sum(), rtol=1e-8)


def test_density_of_a_chain_is_that_of_kwant() -> None:
    pump = sliding(sites=12)
    found = portrait.local_density(pump, np.array([-1.2, 9.0]), phases=3)
    first = [i for i in range(14) if pump.finalized.pos(i)[0] < 5]
    density = [kwant.ldos(pump.finalized, -1.2, params=pump.parameters(float(phase))) for phase in found.phases]
    # kwant's own local density of states on the lead-like site and the first five; no mode at 9, outside the band
    assert_allclose(found.density[0], np.array(density)[:, first].sum(axis=1), rtol=1e-8)
    assert np.isnan(found.density[1]).all()


def test_potential_is_the_sliding_wave() -> None:
    found = portrait.potential(sliding(), phases=9)
    x, phi = found.places, found.phases[:, None]
    expected = np.where((x >= 0) & (x < 30), 1.5 * np.cos(TURN * x / 3 - phi), 0.0)
    # the convention of `Wave`: A cos(2 pi x/p - phi); the lead-like sites rest
    assert_allclose(found.energies, expected, atol=1e-12)


def test_potential_of_a_sheet_is_averaged_across() -> None:
    found = portrait.potential(bench(rows=3, cells=6), phases=5)
    # derived: one place a column of sites
    assert_allclose(found.places, np.arange(12.0))


def test_leakage_falls_as_the_slowest_wave_does() -> None:
    pump = sliding(sites=15)
    found = portrait.leakage_by_length(pump, (0, 3, 30), phases=12)
    longer = sliding(sites=24)
    here = reflect(longer, TURN * np.arange(12) / 12, engine="layered").leakage.max()
    assert found.decay is not None
    # derived: three cells of three sites more are a chain of 24 sites, and |t|^2 ~ |beta|^(2 cells)
    assert_allclose(found.leakage[1], here, rtol=1e-8)
    assert_allclose(np.log(found.leakage[2] / found.leakage[1]) / 27, 2 * np.log(found.decay), rtol=0.05)


def test_plane_closes_where_the_dimerised_chain_does() -> None:
    found = portrait.parameter_plane(rice_mele(loop(), cells=12))
    delta, stagger = np.meshgrid(found.x, found.y)
    inside = np.abs(delta) < 1  # for larger ones the smallest gap moves to the other edge
    expected = np.hypot(stagger, 2 * np.abs(delta))
    # Rice and Mele as above: the nearest band is at sqrt(stagger^2 + 4 delta^2), at k = pi
    assert found.names == ("delta", "stagger")
    assert_allclose(found.distance[inside], expected[inside], atol=1e-9)
    assert not found.is_closed[expected > 1e-9].any()
    assert_allclose(found.path[0], [0.5, 0.0], atol=1e-12)


def test_plane_of_a_found_cell_is_that_of_the_given_one(monkeypatch: pytest.MonkeyPatch) -> None:
    given = rice_mele(loop(), cells=12)
    searches: list[Pump] = []
    search = cell.find_cell
    monkeypatch.setattr(cell, "find_cell", lambda pump: (searches.append(pump), search(pump))[1])
    found, wanted = (portrait.parameter_plane(pump) for pump in (replace(given, bulk=None), given))
    # derived: one device, and one cell of it, wherever it is cut
    assert_allclose(found.distance, wanted.distance, atol=1e-9)
    assert (found.is_closed == wanted.is_closed).all()
    assert len(searches) == 1  # for all rows of the plane together


def test_plane_needs_two_parameters() -> None:
    with pytest.raises(InputError, match="sets 1 parameter"):
        portrait.parameter_plane(sliding())


def test_window_holds_the_gap() -> None:
    pump = sliding()
    gap = bulk_gap(pump)
    low, high = energy_window(portrait.spectrum(pump, gap, phases=5))
    # derived
    assert low < gap.lower_edge.lower < gap.upper_edge.upper < high
