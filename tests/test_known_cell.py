"""A cell that is found in an adopted system serves every room as one that a builder gives does."""

from __future__ import annotations

from dataclasses import replace
from math import log, pi, sqrt
from types import SimpleNamespace
from typing import Any

import kwant
import numpy as np
import pytest
from geometries import honeycomb_ribbon, metallic_ring, three_leads, with_moving_lead
from numpy.testing import assert_allclose

from scatterpump.anatomy.layout import inspect
from scatterpump.anatomy.period import cell_length
from scatterpump.audit.examine import examine
from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Lead, Wave
from scatterpump.builder.ribbon import ModulatedRibbon
from scatterpump.bulk.cell import known_cell
from scatterpump.bulk.gap import bulk_gap
from scatterpump.cycle import Cycle
from scatterpump.operation.heat import temperature_limit
from scatterpump.operation.sheet import Sheet, operating_sheet
from scatterpump.operation.speed import adiabatic_frequency
from scatterpump.portrait.album import Album
from scatterpump.pump import Pump
from scatterpump.solver.hamiltonian import DrivenHamiltonian
from scatterpump.sweep.point import Point
from scatterpump.sweep.quantities import QUANTITIES

WIRE = Lead(hopping=2.0)
BUILT = ModulatedChain(sites=24, fermi_level=-1.2, onsite=[Wave(1.5, 3)], probe=WIRE, drain=WIRE)


class Adopted:
    """The chain `BUILT`, written out in kwant."""

    def __init__(self, level: float = -1.2) -> None:
        self.level = level

    def pump(self) -> Pump:
        return Pump(by_hand(range(24)), Cycle.angle(), self.level, name=BUILT.name)


def by_hand(places: Any, noise: Any = (0.0,) * 24) -> Any:
    """Return a chain of 24 sites at `places`, raised by `noise`, a neutral one on either side, and leads."""
    lattice, system = kwant.lattice.chain(norbs=1), kwant.Builder()
    ends = (places[0] - 1, places[-1] + 1)
    number = {x: n for n, x in enumerate(places)}

    def level(site: Any, phi: Any) -> Any:
        n = number[site.tag[0]]
        return noise[n] + 1.5 * np.cos(2 * pi * n / 3 - phi)

    system[(lattice(x) for x in places)] = level
    system[(lattice(x) for x in ends)] = 0.0
    for a, b in zip((ends[0], *places), (*places, ends[1]), strict=True):
        system[lattice(a), lattice(b)] = -1.0
    for direction in (-1, 1):
        wire = kwant.Builder(kwant.TranslationalSymmetry((direction,)))
        wire[lattice(0)], wire[lattice.neighbors()] = 0.0, -2.0
        system.attach_lead(wire)
    return system


ADOPTED = Adopted()


@pytest.fixture(scope="module")
def sheets() -> tuple[Sheet, Sheet]:
    """The sheets of the built and of the adopted device."""
    return operating_sheet(BUILT, samples=0), operating_sheet(ADOPTED, samples=0)


def test_system_by_hand_is_the_built_one_without_its_cell() -> None:
    built, adopted = BUILT.pump(), ADOPTED.pump()
    assert (built.bulk is None, adopted.bulk is None) == (False, True)
    dense = []
    for pump in (built, adopted):
        driven = DrivenHamiltonian(pump)
        matrix = np.zeros((driven.size, driven.size), dtype=complex)
        matrix[driven.rows, driven.columns] = driven.at(0.7)
        dense.append(matrix)
    assert_allclose(dense[1], dense[0], rtol=0, atol=1e-13)  # rounding of cosines at up to 24 sites


# --- sweeps ---


def kept(make: Any, name: str) -> Any:
    return tuple(QUANTITIES[name].of(Point(lambda changes: make().pump(), {})))


@pytest.mark.parametrize("name", ["gap", "window", "chern"])
def test_sweep_keeps_the_same_of_an_adopted_system(name: str) -> None:
    given, found = kept(lambda: BUILT, name), kept(Adopted, name)
    assert None not in given
    # the searches begin in other places of the same torus: both brackets are within their own accuracy of 2e-2
    assert_allclose(np.array(found, dtype=float), np.array(given, dtype=float), rtol=2e-2)
    if name == "chern":
        # D. J. Thouless et al., Phys. Rev. Lett. 49, 405 (1982): the lowest gap of one flux quantum in three
        assert found == (1,)


def test_sweep_finds_no_gap_where_nothing_repeats() -> None:
    point = Point(lambda changes: metallic_ring(), {})
    assert tuple(QUANTITIES["gap"].of(point)) == (None, None)
    assert tuple(QUANTITIES["chern"].of(point)) == (None,)


def test_no_cell_is_looked_for_where_none_is_asked_for() -> None:
    point = Point(lambda changes: ADOPTED.pump(), {}, leak=False)
    for name in ("integer", "proven", "sampled", "reflection"):
        tuple(QUANTITIES[name].of(point))
    assert {"found cell", "bloch cell"}.isdisjoint(point.pump.remembered)
    tuple(QUANTITIES["gap"].of(point))
    assert {"found cell", "bloch cell"} <= set(point.pump.remembered)


def test_cell_is_found_once_for_all_fermi_levels() -> None:
    pump = ADOPTED.pump()
    here, there = known_cell(pump), known_cell(pump.at_fermi_level(1.2))
    assert here is not None
    assert there is not None
    assert here.found is there.found
    assert (here.fermi_level, there.fermi_level) == (-1.2, 1.2)


# --- the sheet, and its limits ---


def test_sheet_of_an_adopted_system_has_the_lines_of_the_built_one(sheets: tuple[Sheet, Sheet]) -> None:
    given, found = sheets
    labels = [[line.label for line in (*each.limits, *each.output)] for each in (given, found)]
    # only a description that knows its own cell can be built in another length
    assert [label for label in labels[0] if label != "shortest"] == labels[1]
    assert {"temperature", "speed"} <= set(labels[1])
    for line in found.limits:
        (same,) = (other for other in given.limits if other.label == line.label)
        assert line.how == same.how
        for name, value in line.values.items():
            if isinstance(value, float):
                assert value == pytest.approx(same.values[name], rel=2e-2), (line.label, name)


def test_plateaus_of_an_adopted_system_are_those_of_the_built_one(sheets: tuple[Sheet, Sheet]) -> None:
    given, found = (each.plateaus for each in sheets)
    assert [(p.number, p.how, p.filled) for p in found] == [(p.number, p.how, p.filled) for p in given]
    edges = [[(p.lower, p.upper) for p in each] for each in (found, given)]
    assert_allclose(edges[0], edges[1], rtol=0, atol=1e-6)


def test_limits_start_from_the_found_gap() -> None:
    given, found = (adiabatic_frequency(device.pump()) for device in (BUILT, ADOPTED))
    assert found is not None
    assert found == pytest.approx(given, rel=4e-2)  # the square of the gap, known to 2e-2
    short = replace(BUILT, sites=12).pump()
    limit = temperature_limit(replace(short, bulk=None), error=1e-2)
    assert limit.estimate == pytest.approx(bulk_gap(short).distance_upper / log(100), rel=1e-9)


def test_chain_whose_waves_have_no_common_period_may_still_have_a_found_cell(sheets: tuple[Sheet, Sheet]) -> None:
    """A second wave of amplitude 0 takes the builder's cell away, and with it the length, but nothing else."""
    chain = replace(BUILT, onsite=[Wave(1.5, 3), Wave(0.0, sqrt(2))])
    assert chain.pump().bulk is None
    labels = [line.label for line in operating_sheet(chain, samples=0).limits]
    assert labels == [line.label for line in sheets[1].limits]


def test_sheet_says_why_it_knows_no_limits_and_where_the_charge_goes() -> None:
    noise = np.random.default_rng(3).uniform(-0.1, 0.1, 24)
    pump = Pump(by_hand(range(24), noise), Cycle.angle(), -1.2, lead_names=("west", "east"))
    found = operating_sheet(SimpleNamespace(pump=lambda: pump), samples=0)
    text = " ".join(found.summary().split())
    assert "limits none to tell: no cell that changes repeats along the device" in text
    assert "+1 from west to east" in text


# --- the layout ---


def test_layout_of_an_adopted_system_repeats_like_the_built_one() -> None:
    given, found = inspect(BUILT.pump()), inspect(ADOPTED.pump())
    assert found.period == given.period == 3.0
    text = found.summary()
    assert "repeats every 3 lattice constants: a cell of 3 orbitals, found 8 times in a row" in " ".join(text.split())
    assert "3 lattice constants: the cell that the pump was given" in " ".join(given.summary().split())


def test_length_of_a_cell_is_the_lattice_vector() -> None:
    """Two rows of a honeycomb lattice of constant 1 under a wave of three of its unit cells (derived)."""
    assert cell_length(honeycomb_ribbon(energy=-5.1)) == pytest.approx(3.0, abs=1e-12)
    ribbon = ModulatedRibbon(sites=16, width=2, fermi_level=-2.5, onsite=[Wave(1.5, 4)]).pump()
    assert cell_length(replace(ribbon, bulk=None)) == cell_length(ribbon) == 4.0


def test_elements_that_repeat_where_places_do_not_have_no_length() -> None:
    stretched = [x if x < 12 else x + 5 for x in range(24)]
    pump = Pump(by_hand(stretched), Cycle.angle(), -1.2)
    assert known_cell(pump) is not None
    assert cell_length(pump) is None
    assert "interior          a cell of 3 orbitals, found 8 times in a row" in inspect(pump).summary()


def test_layout_says_why_nothing_repeats() -> None:
    layout = inspect(metallic_ring())
    assert layout.period is None
    assert "interior          no cell that changes repeats along the device" in layout.summary()


def test_layout_calls_leads_by_their_names() -> None:
    pump = replace(three_leads(sites=12, at=6), lead_names=("west", "east", "gauge"))
    text = " ".join(inspect(pump).summary().split())
    assert "lead 0 west: probe, attached to 1 site" in text
    assert "lead 2 gauge: counts as part of the drain, attached to 1 site" in text
    assert "12 on-site values change, by up to 1.5; no bond changes" in text


def test_layout_knows_the_interior_where_the_leads_are_unusable() -> None:
    layout = inspect(with_moving_lead())
    assert (layout.drive, layout.period) == ("trigonometric in phi, degree 1", 3.0)
    assert layout.widths is None


# --- the audit and the pictures ---


def test_audit_and_pictures_ask_for_the_same_cell() -> None:
    names = [{finding.check for finding in examine(device.pump(), quick=True).findings} for device in (BUILT, ADOPTED)]
    assert names[0] == names[1]
    assert "Fermi level in gap" in names[1]
    assert {"Fermi level in gap", "leak falls with length"} <= set(examine(metallic_ring(), quick=True).idle)
    spectra = [Album(device.pump()).spectrum for device in (BUILT, ADOPTED)]
    assert_allclose(spectra[1].top, spectra[0].top, rtol=0, atol=1e-12)
