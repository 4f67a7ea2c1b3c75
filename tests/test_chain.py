"""The Hamiltonian that a description stands for, its disorder, its period and its walls."""

from __future__ import annotations

from dataclasses import replace
from math import pi
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Disorder, Lead, Wave
from scatterpump.bulk.cell import bloch_cell
from scatterpump.cycle import Cycle
from scatterpump.errors import InputError
from scatterpump.pump import Pump
from scatterpump.winding.certificate import certify

Matrix = NDArray[np.float64]
ROUNDING = 1e-12


def built(pump: Pump, phase: float) -> Matrix:
    """Return H as built, sites from left to right, with the lead-like site at either end."""
    system = pump.finalized
    order = np.argsort([site.tag[0] for site in system.sites])
    matrix = system.hamiltonian_submatrix(params=pump.parameters(phase))[np.ix_(order, order)]
    assert np.abs(matrix.imag).max() == 0
    return np.asarray(matrix.real)


def wave(description: Wave, place: Matrix, values: dict[str, float]) -> Matrix:
    """Return A cos(2 pi x / p - n phi + lag) at every place."""
    amplitude = values.get(str(description.amplitude), description.amplitude)
    angle = 2 * pi * place / description.period - description.harmonic * values.get("phi", 0.0) + description.lag
    return float(amplitude) * np.cos(angle)


def written_out(chain: ModulatedChain, phase: float) -> Matrix:
    """Return the same from the formula: levels on the diagonal, minus the hoppings beside it, bond waves at x + 1/2."""
    values, x = chain.cycle.at(phase), np.arange(chain.sites, dtype=float)
    levels = chain.level + sum((wave(w, x, values) for w in chain.onsite), np.zeros(len(x)))
    hoppings = chain.hopping + sum((wave(w, x[:-1] + 0.5, values) for w in chain.bonds), np.zeros(len(x) - 1))
    levels = np.concatenate([[chain.probe.level], levels, [chain.drain.level]])
    hoppings = np.concatenate([[chain.probe.contact], hoppings, [chain.drain.contact]])
    return np.diag(levels) - np.diag(hoppings, 1) - np.diag(hoppings, -1)


NUMBERS = st.floats(-3, 3)
PERIODS = st.sampled_from([1.0, 2.0, 3.0, 2.5, 5 / 3, (1 + 5**0.5) / 2, 7.3])
WAVES = st.builds(Wave, st.one_of(NUMBERS, st.just("depth")), PERIODS, NUMBERS, st.integers(-2, 2))
CHAINS = st.builds(
    ModulatedChain,
    sites=st.integers(1, 9),
    hopping=NUMBERS,
    level=NUMBERS,
    onsite=st.lists(WAVES, max_size=3),
    bonds=st.lists(WAVES, max_size=3),
    probe=st.builds(Lead, st.just(1.0), NUMBERS, st.floats(0.1, 2)),
    drain=st.builds(Lead, st.just(1.0), NUMBERS, st.floats(0.1, 2)),
    cycle=st.just(Cycle(lambda phase: {"depth": 1.3 + np.cos(phase), "phi": phase})),
)


@settings(derandomize=True, deadline=None)
@given(chain=CHAINS, phase=st.floats(-7, 7))
def test_hamiltonian_is_the_formula(chain: ModulatedChain, phase: float) -> None:
    # derived: the definition of the model
    np.testing.assert_allclose(built(chain.pump(), phase), written_out(chain, phase), rtol=0, atol=ROUNDING)


@settings(derandomize=True, deadline=None)
@given(chain=CHAINS, phase=st.floats(-7, 7), momentum=st.floats(-pi, pi))
def test_bulk_cell_is_the_interior_repeated(chain: ModulatedChain, phase: float, momentum: float) -> None:
    if chain.period is None:
        assert chain.pump().bulk is None
        return
    found = bloch_cell(chain.pump()).hamiltonian([momentum], [phase])[0]
    inside = written_out(replace(chain, sites=chain.period + 1), phase)[1:-1, 1:-1]
    # derived: psi(next cell) = e^{ik} psi, V hops onwards; cells of one site fold both bonds on the diagonal
    h, onward = inside[:-1, :-1].astype(complex), -inside[-1, -2]
    h[-1, 0] -= onward * np.exp(1j * momentum)
    h[0, -1] -= onward * np.exp(-1j * momentum)
    np.testing.assert_allclose(np.linalg.eigvalsh(found), np.linalg.eigvalsh(h), rtol=0, atol=1e-11)


def test_leads_are_uniform_wires() -> None:
    pump = ModulatedChain(sites=3, probe=Lead(1.5, 0.3, 0.7), drain=Lead(2.5, -0.4, 0.2)).pump()
    # derived: the definition of the model; both wires hop with minus their hopping
    for number, (level, hopping) in enumerate([(0.3, 1.5), (-0.4, 2.5)]):
        lead = pump.finalized.leads[number]
        assert lead.cell_hamiltonian() == pytest.approx(np.array([[level]]))
        assert lead.inter_cell_hopping() == pytest.approx(np.array([[-hopping]]))


def test_chain_of_one_site_is_a_device() -> None:
    # derived: the definition of the model
    expected = [[0.0, -1.0, 0.0], [-1.0, 0.4, -1.0], [0.0, -1.0, 0.0]]
    np.testing.assert_allclose(built(ModulatedChain(sites=1, level=0.4).pump(), 0.0), expected)


def test_wave_slides_away_from_the_probe() -> None:
    pump = ModulatedChain(sites=30, onsite=[Wave(1.0, 6.0)]).pump()
    tops = [int(np.diag(built(pump, 2 * pi * step / 6))[1:7].argmax()) for step in range(6)]
    # derived: the crest stands at x = period * phi / 2 pi
    assert tops == [0, 1, 2, 3, 4, 5]


# --- disorder ---


def noise(sites: int, disorder: Disorder) -> tuple[Matrix, Matrix]:
    """Return what disorder adds to the levels and to the hoppings."""
    clean = ModulatedChain(sites=sites)
    added = built(replace(clean, disorder=disorder).pump(), 0.0) - built(clean.pump(), 0.0)
    return np.diag(added)[1:-1], -np.diag(added, 1)[1:-1]


@pytest.mark.parametrize("seed", [0, 7])
def test_disorder_depends_on_seed_and_site_only(seed: int) -> None:
    short, long = (noise(sites, Disorder(0.8, 0.4, seed)) for sites in (10, 40))
    # derived: a longer device is the same device continued
    np.testing.assert_array_equal(short[0], long[0][:10])
    np.testing.assert_array_equal(short[1], long[1][:9])


def test_disorder_is_the_same_in_every_build_and_order() -> None:
    first, _, again = (noise(20, Disorder(0.8, 0.4, seed)) for seed in (3, 4, 3))
    # derived
    np.testing.assert_array_equal(first[0], again[0])
    np.testing.assert_array_equal(first[1], again[1])


def test_seeds_and_places_differ() -> None:
    draws = [noise(30, Disorder(1.0, 1.0, seed)) for seed in range(3)]
    # derived: no two of all these draws coincide, so neither seeds nor levels and hoppings share numbers
    values = np.concatenate([part for draw in draws for part in draw])
    assert len(np.unique(values.round(12))) == 3 * (30 + 29)


def test_disorder_scales_with_its_width() -> None:
    small, large = (noise(20, Disorder(width, width / 2, 1)) for width in (0.5, 1.0))
    # derived: box of full width `width`
    np.testing.assert_allclose(large[0], 2 * small[0], rtol=0, atol=ROUNDING)
    np.testing.assert_allclose(large[1], 2 * small[1], rtol=0, atol=ROUNDING)


def test_disorder_fills_its_box_evenly() -> None:
    levels, hoppings = noise(2000, Disorder(2.0, 1.0, 5))
    # box of full width w: P. W. Anderson, Phys. Rev. 109, 1492 (1958) (citation from memory); its variance w^2 / 12 and
    # five standard errors of mean and variance of 2000 draws derived
    for draws, width in ((levels, 2.0), (hoppings, 1.0)):
        assert np.abs(draws).max() <= width / 2
        assert abs(draws.mean()) < 5 * width / np.sqrt(12 * 2000)
        assert draws.var() == pytest.approx(width**2 / 12, rel=5 * np.sqrt(0.8 / 2000))


@settings(derandomize=True, deadline=None, max_examples=30)
@given(onsite=st.floats(0, 3), bonds=st.floats(0, 3), seed=st.integers(0, 1000))
def test_disorder_norm_bounds_its_part_of_the_hamiltonian(onsite: float, bonds: float, seed: int) -> None:
    disorder = Disorder(onsite, bonds, seed)
    levels, hoppings = noise(25, disorder)
    part = np.diag(levels) + np.diag(hoppings, 1) + np.diag(hoppings, -1)
    # derived: |diagonal| <= w/2, and two neighbours of at most w/2 each
    assert np.linalg.norm(part, 2) <= disorder.norm + ROUNDING


def test_disorder_weaker_than_the_gap_leaves_the_integer() -> None:
    chain = ModulatedChain(
        sites=45,
        fermi_level=-1.211,
        onsite=[Wave(1.5, 3)],
        probe=Lead(2.0),
        drain=Lead(2.0),
        disorder=Disorder(0.4, 0.1, 2),
    )
    # derived: the Fermi level is more than 0.53 away from every band, the disorder's norm is 0.3
    assert chain.disorder.norm == pytest.approx(0.3)
    assert certify(chain.pump()).number == 1


# --- period ---


@pytest.mark.parametrize(
    ("periods", "sites", "expected"),
    [
        ([], 5, 1),
        ([3.0], 30, 3),
        ([2.5], 30, 5),
        ([1.5], 30, 3),
        ([2.0, 3.0], 30, 6),
        ([4.0, 6.0], 30, 12),
        ([0.5], 30, 1),
        ([1 / 3], 30, 1),
        ([5 / 3], 30, 5),
        ([3.0], 2, None),
        ([2.0, 3.0], 5, None),
        ([(1 + 5**0.5) / 2], 30, None),
        ([7.3], 30, None),
        ([7.3], 80, 73),
    ],
)
def test_period_is_the_smallest_common_one(periods: list[float], sites: int, expected: int | None) -> None:
    chain = ModulatedChain(sites=sites, onsite=[Wave(1.0, period) for period in periods])
    # derived: least common multiple of the numerators, None if the chain is shorter
    assert chain.period == expected
    assert (chain.pump().bulk is None) == (expected is None)


@settings(derandomize=True, deadline=None)
@given(chain=CHAINS)
def test_chain_repeats_after_its_period(chain: ModulatedChain) -> None:
    if chain.period is not None:
        inside = written_out(replace(chain, sites=3 * chain.period), 0.9)[1:-1, 1:-1]
        # derived: definition
        for values in (np.diag(inside), np.diag(inside, 1)):
            np.testing.assert_allclose(values[chain.period :], values[: -chain.period], rtol=0, atol=1e-11)


# --- walls, and what is refused ---


def test_wall_closes_the_far_end() -> None:
    pump = ModulatedChain(sites=4, drain="wall", level=0.2).pump()
    # derived: no drain, and no lead-like site behind the last one
    assert pump.drain is None
    assert len(pump.finalized.leads) == 1
    assert sorted(site.tag[0] for site in pump.finalized.sites) == [-1, 0, 1, 2, 3]


def refused(field: str, **changes: Any) -> None:
    with pytest.raises(InputError, match=field) as caught:
        ModulatedChain(**{"sites": 4, **changes})
    assert caught.value.allowed


@pytest.mark.parametrize("sites", [0, -3])
def test_chain_without_sites_is_refused(sites: int) -> None:
    refused("sites", sites=sites)


@pytest.mark.parametrize("name", ["hopping", "level", "fermi_level"])
@pytest.mark.parametrize("value", [float("nan"), float("inf")])
def test_chain_with_numbers_that_are_not_finite_is_refused(name: str, value: float) -> None:
    refused(name, **{name: value})


def test_wave_without_its_parameter_is_refused() -> None:
    refused("cycle", onsite=[Wave("depth", 3)])
    refused("cycle", onsite=[Wave(1.0, 3)], cycle=Cycle.angle("flux"))


@pytest.mark.parametrize(
    ("make", "arguments", "field"),
    [
        (Wave, {"amplitude": 1.0, "period": 0.0}, "period"),
        (Wave, {"amplitude": 1.0, "period": -2.0}, "period"),
        (Wave, {"amplitude": 1.0, "period": float("inf")}, "period"),
        (Wave, {"amplitude": float("nan"), "period": 3.0}, "amplitude"),
        (Wave, {"amplitude": "two words", "period": 3.0}, "amplitude"),
        (Wave, {"amplitude": 1.0, "period": 3.0, "lag": float("nan")}, "lag"),
        (Lead, {"hopping": 0.0}, "hopping"),
        (Lead, {"hopping": -1.0}, "hopping"),
        (Lead, {"contact": 0.0}, "contact"),
        (Lead, {"level": float("inf")}, "level"),
        (Disorder, {"onsite": -0.1}, "onsite"),
        (Disorder, {"bonds": -0.1}, "bonds"),
        (Disorder, {"onsite": float("nan")}, "onsite"),
    ],
)
def test_parts_out_of_range_are_refused(make: Any, arguments: dict[str, Any], field: str) -> None:
    with pytest.raises(InputError, match=field) as caught:
        make(**arguments)
    assert caught.value.allowed


@pytest.mark.parametrize("name", ["two words", "lambda", "", "1st"])
def test_parameter_names_that_are_no_names_are_refused_in_time(name: str) -> None:
    """A recorded trace may well have a column named "left gate"."""
    with pytest.raises(InputError):
        ModulatedChain(sites=4, cycle=Cycle.through({name: [0.0, 1.0, 2.0, 0.0]})).pump()


def test_any_name_will_do_for_a_parameter() -> None:
    chain = ModulatedChain(sites=4, cycle=Cycle.angle("site_0"), onsite=[Wave("site_0", 3, harmonic=0)])
    # derived: the definition of the model
    np.testing.assert_allclose(built(chain.pump(), 0.8), written_out(chain, 0.8), rtol=0, atol=ROUNDING)
