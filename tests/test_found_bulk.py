"""The cell that repeats along a device is found, has the bands of the given one, and is not imagined."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from devices import HARPER_GAPS, WIDE, HarperGap, harper, loop, rice_mele
from hypothesis import given, settings
from hypothesis import strategies as st

from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Disorder, Wave
from scatterpump.bulk.cell import bloch_cell, interior
from scatterpump.bulk.chern import chern_number
from scatterpump.bulk.gap import bulk_gap
from scatterpump.cycle import Cycle
from scatterpump.errors import NoBulkError
from scatterpump.pump import Pump
from scatterpump.solver.period import Run, longest_run
from scatterpump.verdict import judge

FEW = HARPER_GAPS[::3]


def without_cell(pump: Pump) -> Pump:
    return replace(pump, bulk=None)


def same_bands(pump: Pump) -> None:
    given, found = bulk_gap(pump), bulk_gap(without_cell(pump))
    # derived: one and the same cell, up to where it begins
    assert found.upper == pytest.approx(given.upper, abs=1e-9)
    assert found.distance_upper == pytest.approx(given.distance_upper, abs=1e-9)
    assert chern_number(without_cell(pump)) == chern_number(pump)


@pytest.mark.parametrize("gap", FEW, ids=str)
def test_found_cell_has_the_bands_of_the_given_one(gap: HarperGap) -> None:
    same_bands(harper(gap, sites=6 * gap.q))
    # D. J. Thouless et al., Phys. Rev. Lett. 49, 405 (1982)
    assert chern_number(without_cell(harper(gap, sites=6 * gap.q))) == gap.hall


@pytest.mark.parametrize(
    "cycle",
    [loop(), Cycle.through({"delta": [0.5, 0, -0.5, 0, 0.5], "stagger": [0, 0.5, 0, -0.5, 0]})],
    ids=["ellipse", "straight"],
)
def test_found_cell_knows_the_path(cycle: Cycle) -> None:
    pump = rice_mele(cycle, cells=6)
    same_bands(pump)
    assert bulk_gap(without_cell(pump)).exact
    assert bloch_cell(without_cell(pump)).bands == 2


def test_found_cell_of_a_path_that_is_only_sampled() -> None:
    path = {"delta": [0.5, 0, -0.5, 0, 0.5], "stagger": [0, 0.5, 0, -0.5, 0]}
    same_bands(rice_mele(Cycle.through(path, curve="spline"), cells=4))


def test_direction_is_away_from_the_probe() -> None:
    """Seen from the other end the same device carries the opposite charge (derived)."""
    pump = without_cell(harper(HARPER_GAPS[0], sites=18))
    assert chern_number(pump) == 1
    assert chern_number(replace(pump, probe=1, drain=0)) == -1


@pytest.mark.parametrize(
    ("device", "reason"),
    [
        ({"disorder": Disorder(onsite=0.1)}, "no cell that changes repeats"),
        ({"onsite": [Wave(1.5, 2**0.5)]}, "no cell that changes repeats"),
        ({"sites": 5}, "no cell that changes repeats"),
    ],
    ids=["disorder", "incommensurate", "less than two periods"],
)
def test_what_does_not_repeat_has_no_interior(device: dict[str, Any], reason: str) -> None:
    usual: dict[str, Any] = {"sites": 30, "onsite": [Wave(1.5, 3)], "fermi_level": -1.2, "probe": WIDE, "drain": WIDE}
    pump = without_cell(ModulatedChain(**{**usual, **device}).pump())
    with pytest.raises(NoBulkError, match=reason):
        bulk_gap(pump)
    assert "holds for this very device" in interior(pump)


def test_interior_of_two_halves_that_differ_is_none() -> None:
    """Neither half of a device holds most of what changes; a third that differs does not take the interior away."""
    third = [1.0] * 20 + [0.7] * 20 + [0.5] * 20
    half = [1.0] * 40 + [0.7] * 20
    with pytest.raises(NoBulkError, match="hold only"):
        bloch_cell(stepped(third))
    assert bloch_cell(stepped(half)).bands == 2


def stepped(strengths: list[float]) -> Pump:
    """Return a chain whose wave of period 2 has another strength on every site."""
    import kwant

    lattice, system = kwant.lattice.chain(norbs=1), kwant.Builder()
    system[(lattice(x) for x in range(len(strengths)))] = lambda site, phi: (
        strengths[site.tag[0]] * np.cos(np.pi * site.tag[0] - phi)
    )
    system[lattice.neighbors()] = -1
    wire = kwant.Builder(kwant.TranslationalSymmetry((-1,)))
    wire[lattice(0)], wire[lattice.neighbors()] = 0, -2
    system.attach_lead(wire)
    system.attach_lead(wire.reversed())
    return Pump(system, Cycle.angle(), 0.1)


def test_metal_before_the_pump_is_not_its_interior() -> None:
    """Forty still sites before a pump of thirty repeat too, but nothing changes there."""
    import kwant

    lattice, system = kwant.lattice.chain(norbs=1), kwant.Builder()
    for x in range(-40, 30):
        system[lattice(x)] = 0 if x < 0 else lambda site, phi: 1.5 * np.cos(2 * np.pi * site.tag[0] / 3 - phi)
    system[lattice.neighbors()] = -1
    wire = kwant.Builder(kwant.TranslationalSymmetry((-1,)))
    wire[lattice(0)], wire[lattice.neighbors()] = 0, -2
    system.attach_lead(wire)
    system.attach_lead(wire.reversed())
    pump = Pump(system, Cycle.angle(), -1.2)
    assert (bloch_cell(pump).bands, bulk_gap(pump).is_open) == (3, True)


def test_verdict_without_an_interior_says_what_stands_for_it() -> None:
    chain = ModulatedChain(
        sites=45, onsite=[Wave(1.5, 3)], fermi_level=-1.2, probe=WIDE, drain=WIDE, disorder=Disorder(onsite=0.1, seed=3)
    )
    verdict = judge(without_cell(chain.pump()))
    assert (verdict.gap, verdict.chern, verdict.winding.number) == (None, None, 1)
    assert "holds for this very device" in " ".join(verdict.summary().split())


# --- the kernel ---


def as_layers(values: list[float]) -> tuple[list[Any], list[Any]]:
    """Return layers of one orbital each with those energies, and equal hops."""
    return [np.full((1, 1, 1), v, dtype=complex) for v in values], [np.ones((1, 1, 1), dtype=complex)] * (
        len(values) - 1
    )


def everything(count: int) -> Any:
    return np.ones(count, dtype=bool), np.ones(count - 1, dtype=bool)


@given(
    cell=st.lists(st.integers(1, 4), min_size=1, max_size=5),
    repeats=st.integers(2, 6),
    before=st.integers(0, 4),
    after=st.integers(0, 4),
)
@settings(derandomize=True, deadline=None, max_examples=80)
def test_planted_run_is_found(cell: list[int], repeats: int, before: int, after: int) -> None:
    values = [10.0 + i for i in range(before)] + [float(v) for v in cell] * repeats + [20.0 + i for i in range(after)]
    found = longest_run(*as_layers(values), everything(len(values)), longest_cell=10)
    # derived: nothing else in the list repeats, so the run is all of the planted part, with its shortest period
    assert found is not None
    assert found.layers == range(before, before + len(cell) * repeats)
    primitive = next(
        p for p in range(1, len(cell) + 1) if cell == (cell[:p] * len(cell))[: len(cell)] and len(cell) % p == 0
    )
    assert found.length == primitive


@given(st.lists(st.integers(0, 1), min_size=2, max_size=12), st.lists(st.integers(0, 1), min_size=11, max_size=11))
@settings(derandomize=True, deadline=None, max_examples=150)
def test_longest_run_is_the_one_that_trying_all_finds(own: list[int], ahead: list[int]) -> None:
    layers = [np.full((1, 1, 1), 1.0 + v, dtype=complex) for v in own]
    hops = [np.full((1, 1, 1), 1.0 + v, dtype=complex) for v in ahead[: len(own) - 1]]
    found = longest_run(layers, hops, everything(len(own)), longest_cell=12)
    best = 0
    for length in range(1, len(own) // 2 + 1):
        for first in range(len(own)):
            for repeats in range(2, (len(own) - first) // length + 1):
                run = Run(first, length, repeats)
                equal = all(own[n] == own[n - length] for n in run.layers[length:])
                linked = all(ahead[n] == ahead[n - length] for n in run.layers[length:-1])
                best = max(best, length * repeats if equal and linked else 0)
    assert (len(found.layers) if found else 0) == best


def test_elements_that_differ_by_rounding_are_the_same() -> None:
    values = [1.0, 2.0, 1.0 + 1e-12, 2.0 - 1e-12]
    assert longest_run(*as_layers(values), everything(4), longest_cell=4) == Run(0, 2, 2)
    assert longest_run(*as_layers([1.0, 2.0, 1.0 + 1e-7, 2.0]), everything(4), longest_cell=4) is None


def test_layers_of_different_width_are_different() -> None:
    wide = [np.ones((1, n, n), dtype=complex) for n in (1, 2, 1, 2)]
    hops = [np.ones((1, b, a), dtype=complex) for a, b in ((1, 2), (2, 1), (1, 2))]
    assert longest_run(wide, hops, everything(4), longest_cell=4) == Run(0, 2, 2)
