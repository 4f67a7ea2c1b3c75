"""The integers that the literature knows: gaps of the sliding cosine, loops of the dimerised chain, edge levels.

The winding W of det r is positive if charge goes from probe to drain.  The literature writes the potential as
V cos(2 pi p x / q + phi), for which W = -t with the Hall integer t of the gap; with the package's own - phi, W = +t.
"""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from devices import HARPER_GAPS, RICE_MELE_LOOPS, HarperGap, harper, rice_mele
from numpy.typing import NDArray
from scipy.linalg import eigh_tridiagonal, eigvalsh_tridiagonal

from scatterpump.bulk.chern import chern_number, plaquettes
from scatterpump.cycle import Cycle
from scatterpump.pump import Pump
from scatterpump.solver.reflect import reflect
from scatterpump.winding.certificate import certify
from scatterpump.winding.result import Winding
from scatterpump.winding.unwrap import steps

Floats = NDArray[np.float64]
TURNS_TOL = 1e-6  # the sum of phase steps round a closed cycle is an integer up to rounding
LOOPS = pytest.mark.parametrize(("cycle", "integer"), RICE_MELE_LOOPS.values(), ids=RICE_MELE_LOOPS)
GAPS = pytest.mark.parametrize("gap", HARPER_GAPS, ids=str)


@cache
def winding_of_gap(gap: HarperGap) -> Winding:
    return certify(harper(gap))


@cache
def winding_of_loop(cycle: Cycle) -> Winding:
    return certify(rice_mele(cycle))


def from_the_far_end(pump: Pump) -> Pump:
    return replace(pump, probe=pump.drain, drain=pump.probe, bulk=None)


def turns_round_origin(cycle: Cycle) -> int:
    points = [cycle.at(phase) for phase in np.linspace(0, 2 * np.pi, 2001)]
    angles = np.unwrap([np.arctan2(point["stagger"], point["delta"]) for point in points])
    return round((angles[-1] - angles[0]) / (2 * np.pi))


@GAPS
def test_sliding_cosine_carries_the_hall_integer_of_its_gap(gap: HarperGap) -> None:
    winding = winding_of_gap(gap)
    # D. J. Thouless et al., Phys. Rev. Lett. 49, 405 (1982); sign for - phi derived from r = q s + p t
    assert winding.number == gap.hall
    assert winding.turns == pytest.approx(gap.hall, abs=TURNS_TOL)


@GAPS
def test_gap_labels_obey_the_diophantine_equation(gap: HarperGap) -> None:
    # D. J. Thouless et al., Phys. Rev. Lett. 49, 405 (1982): r = q s + p t with |t| <= q / 2
    assert (gap.number - gap.p * gap.hall) % gap.q == 0
    assert 2 * abs(gap.hall) <= gap.q


@pytest.mark.parametrize("gap", [HARPER_GAPS[0], HARPER_GAPS[7], HARPER_GAPS[11]], ids=str)
def test_literature_sign_of_phi_turns_the_integer_round(gap: HarperGap) -> None:
    # derived: with + phi the potential slides towards the probe, W = -t
    assert certify(harper(gap, harmonic=-1)).number == -gap.hall


@GAPS
def test_crossings_of_the_sliding_cosine_add_up(gap: HarperGap) -> None:
    crossings = winding_of_gap(gap).crossings
    # Y. Hatsugai, Phys. Rev. Lett. 71, 3697 (1993) (citation from memory): one edge level for each charge
    assert [crossing.direction for crossing in crossings] == [np.sign(gap.hall)] * abs(gap.hall)


@LOOPS
def test_dimer_loop_carries_its_turns_round_the_gapless_point(cycle: Cycle, integer: int) -> None:
    winding = winding_of_loop(cycle)
    # M. J. Rice, E. J. Mele, Phys. Rev. Lett. 49, 1455 (1982) (citation from memory); integers derived
    assert winding.number == integer
    assert winding.turns == pytest.approx(integer, abs=TURNS_TOL)


@LOOPS
def test_dimer_loop_agrees_with_the_plane_winding(cycle: Cycle, integer: int) -> None:
    # derived: W is the winding of delta + i stagger round 0
    assert turns_round_origin(cycle) == integer == winding_of_loop(cycle).number


@LOOPS
def test_crossings_of_the_dimer_loop_add_up(cycle: Cycle, integer: int) -> None:
    # derived: every charge enters or leaves through one level at the probe's end
    assert sum(crossing.direction for crossing in winding_of_loop(cycle).crossings) == integer


@pytest.mark.parametrize("energy", [-0.49, -0.3, 0.3, 0.49])
def test_integer_is_the_same_all_over_the_gap(energy: float) -> None:
    # D. J. Thouless, Phys. Rev. B 27, 6083 (1983) (citation from memory); the common gap is (-0.5, 0.5), derived
    cycle, integer = RICE_MELE_LOOPS["counter-clockwise"]
    assert certify(rice_mele(cycle, energy=energy)).number == integer


@LOOPS
def test_far_end_loses_what_the_near_end_takes(cycle: Cycle, integer: int) -> None:
    # derived from unitarity of S without transmission
    assert certify(from_the_far_end(rice_mele(cycle))).number == -integer


@pytest.mark.parametrize("name", ["counter-clockwise", "three times backwards"])
def test_reflection_at_the_far_end_winds_the_other_way(name: str) -> None:
    cycle, integer = RICE_MELE_LOOPS[name]
    trace = reflect(from_the_far_end(rice_mele(cycle)), np.linspace(0, 2 * np.pi, 65))
    # derived from unitarity of S without transmission
    assert steps(trace.reflection).turns == pytest.approx(-integer, abs=TURNS_TOL)
    assert trace.leakage.max() < 1e-9


@pytest.mark.parametrize("gap", [HARPER_GAPS[0], HARPER_GAPS[8]], ids=str)
def test_far_end_of_the_sliding_cosine_loses_what_the_near_end_takes(gap: HarperGap) -> None:
    # derived from unitarity of S without transmission
    assert certify(from_the_far_end(harper(gap))).number == -gap.hall


@LOOPS
def test_chern_number_of_the_dimer_loop_is_its_winding(cycle: Cycle, integer: int) -> None:
    # method: T. Fukui, Y. Hatsugai, H. Suzuki, J. Phys. Soc. Jpn. 74, 1674 (2005); C = +W: G. Braeunlich, G. M. Graf,
    # G. Ortelli, Commun. Math. Phys. 295, 243 (2010), sign derived
    assert chern_number(rice_mele(cycle, cells=2)) == integer


@GAPS
def test_chern_number_of_the_sliding_cosine_is_its_winding(gap: HarperGap) -> None:
    # D. J. Thouless et al., Phys. Rev. Lett. 49, 405 (1982); method as above
    assert chern_number(harper(gap)) == gap.hall == winding_of_gap(gap).number


@pytest.mark.parametrize("size", [6, 8, 20, 40])
def test_lattice_chern_number_is_an_integer_on_the_coarsest_grid(size: int) -> None:
    """Lower band of the dimerised chain on the ellipse, written out: the flux sums up to an integer on any grid."""
    k, phi = np.meshgrid(*[2 * np.pi * np.arange(size) / size] * 2, indexing="ij")
    off = -(1 + 0.5 * np.cos(phi)) - (1 - 0.5 * np.cos(phi)) * np.exp(-1j * k)
    level = 0.5 * np.sin(phi) + 0j
    states = np.linalg.eigh(np.moveaxis(np.array([[level, off], [off.conj(), -level]]), (0, 1), (2, 3)))[1][..., :1]
    # T. Fukui, Y. Hatsugai, H. Suzuki, J. Phys. Soc. Jpn. 74, 1674 (2005)
    assert plaquettes(states).sum() / (2 * np.pi) == pytest.approx(1, abs=1e-9)


def net_downward_crossings(onsite: Floats, bonds: Floats, energy: float) -> tuple[int, int]:
    """Return how many levels at the left and at the right end go down through `energy`, less those that go up.

    The open chain's levels and hoppings are given at successive phases, shapes (n_phi, sites) and (n_phi, sites - 1).
    """
    below = [int((eigvalsh_tridiagonal(*chain) < energy).sum()) for chain in zip(onsite, bonds, strict=True)]
    left, right = 0, 0
    for step in np.flatnonzero(np.diff(below)):
        energies, states = eigh_tridiagonal(onsite[step], bonds[step])
        level = states[:, np.abs(energies - energy).argmin()]
        if np.sum(level[: len(level) // 2] ** 2) > 0.5:
            left += below[step + 1] - below[step]
        else:
            right += below[step + 1] - below[step]
    return left, right


PHASES = np.linspace(0.013, 2 * np.pi + 0.013, 402)[:, None]


@pytest.mark.parametrize("energy", [-0.1, 0.1])
def test_edge_levels_of_the_dimer_loop_account_for_the_winding(energy: float) -> None:
    sign = (-1.0) ** np.arange(60)
    crossings = net_downward_crossings(0.5 * np.sin(PHASES) * sign, 1 + 0.5 * np.cos(PHASES) * sign[:-1], energy)
    # Y. Hatsugai, Phys. Rev. Lett. 71, 3697 (1993) (citation from memory): W levels go down at the probe's end
    assert crossings == (1, -1)
    assert certify(rice_mele(RICE_MELE_LOOPS["counter-clockwise"][0], energy=energy)).number == 1


@pytest.mark.parametrize(("index", "sites"), [(0, 61), (1, 61), (10, 61), (7, 121), (8, 122)])
def test_edge_levels_of_the_sliding_cosine_account_for_the_winding(index: int, sites: int) -> None:
    gap = HARPER_GAPS[index]
    onsite = gap.strength * np.cos(2 * np.pi * gap.p * np.arange(sites) / gap.q - PHASES)
    crossings = net_downward_crossings(onsite, np.ones((len(PHASES), sites - 1)), gap.energy)
    # Y. Hatsugai, Phys. Rev. Lett. 71, 3697 (1993) (citation from memory)
    assert crossings == (gap.hall, -gap.hall)
    assert crossings[0] == winding_of_gap(gap).number
