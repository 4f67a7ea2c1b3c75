"""Devices built to fool a winding count, and disorder up to what the proven gap forgives."""

from __future__ import annotations

import numpy as np
import pytest
from devices import DELTA, STAGGER, WIDE, loop, rice_mele

from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Disorder, Lead, Wave
from scatterpump.bulk.gap import bulk_gap
from scatterpump.cycle import Cycle
from scatterpump.errors import SingularReflectionError
from scatterpump.pump import Pump
from scatterpump.solver.folded import fold
from scatterpump.winding.certificate import behind_good_contact, certify

NARROW = Lead(2.0, contact=1e-3)


def test_two_resonances_closer_than_any_grid_sees() -> None:
    """The edge level dips below the Fermi level for 2e-4 of a cycle: filled and emptied again, and both are found."""
    cycle = Cycle.ellipse(x=("delta", -0.5, 0.3), y=("stagger", 0.2 + 0.3 * np.cos(1e-4), -0.3))
    winding = certify(rice_mele(cycle, energy=0.2, probe=Lead(2.0, contact=1e-5)))
    # derived: the edge level of the dimerised chain lies at the stagger, which is the Fermi level twice, at pi/2 -+
    # 1e-4
    assert (winding.number, winding.certified) == (0, True)
    phases = [crossing.phase for crossing in winding.crossings]
    assert phases == pytest.approx([np.pi / 2 - 1e-4, np.pi / 2 + 1e-4], abs=1e-6)
    assert sorted(crossing.direction for crossing in winding.crossings) == [-1, 1]
    assert winding.evaluations <= 40


def test_level_that_touches_without_crossing() -> None:
    cycle = Cycle.ellipse(x=("delta", -0.5, 0.3), y=("stagger", 0.5, 0.3))
    winding = certify(rice_mele(cycle, energy=0.2, probe=Lead(2.0, contact=1e-2)))
    # derived: the smallest stagger is 0.2, the Fermi level itself, so the edge level turns back there
    assert (winding.number, winding.certified) in {(0, True), (None, False)}
    assert sum(crossing.direction for crossing in winding.crossings) == 0


def test_crossing_at_the_very_start_of_the_cycle() -> None:
    winding = certify(rice_mele(loop().started_at(np.pi), probe=NARROW))
    # derived: the edge level crosses where stagger = 0 and delta < 0, which is now phi = 0
    assert (winding.number, winding.certified) == (1, True)
    assert [crossing.phase for crossing in winding.crossings] == pytest.approx([0.0], abs=1e-9)


def test_gap_of_a_millionth() -> None:
    cycle = Cycle.ellipse(x=("delta", 0.5 - 5e-7, 0.5), y=("stagger", 0.0, 0.5))
    pump = rice_mele(cycle, energy=0.0, cells=30)
    gap = bulk_gap(pump)
    # derived: the half-gap 2 |delta| at phi = pi is 1e-6, and 30 cells are far too few to tell on which side of the
    # origin the loop runs
    assert not gap.is_open or gap.upper <= 2.1e-6
    winding = certify(pump)
    assert (
        winding.number is None or winding.leak.bound > 0.1
    )  # whatever number comes, nobody is told that it is quantised


def test_one_cell_whose_reflection_vanishes() -> None:
    # derived: two sites at phi = pi pass every electron on, r = 0
    with pytest.raises(SingularReflectionError) as caught:
        certify(rice_mele(loop(), cells=1))
    assert caught.value.phase == pytest.approx(np.pi, abs=1e-6)


@pytest.mark.parametrize("cells", [6, 10, 40])
def test_hard_wall_winds_zero(cells: int) -> None:
    pump = ModulatedChain(
        sites=2 * cells, cycle=loop(), fermi_level=0.05, onsite=[STAGGER], bonds=[DELTA], probe=WIDE, drain="wall"
    ).pump()
    winding = certify(pump)
    # derived: without a drain B is the adjoint of A, and det A does not wind
    assert (winding.number, winding.certified) == (0, True)
    if cells <= 10:  # the far edge's level is narrow, but not below rounding: it is found
        assert [crossing.direction for crossing in winding.crossings] == [1, -1]
        assert winding.crossings[1].width < 1e-3 * winding.crossings[0].width


def test_contact_weaker_than_the_leak_is_explained() -> None:
    pump = rice_mele(loop(), cells=10, probe=Lead(2.0, contact=1e-6))
    # derived: the edge level drains through the far end, which is stronger; behind a good contact it would not
    assert (certify(pump).number, behind_good_contact(pump)) == (0, 1)


def test_pulse_between_samples_is_not_taken_for_rest() -> None:
    """A gate that moves only during 1 % of the cycle: few samples see it stand still."""

    def pulse(phase: float) -> dict[str, float]:
        turned = (phase % (2 * np.pi) - 1.0) / 0.06
        angle = 2 * np.pi / (1 + np.exp(-np.clip(8 * turned, -60.0, 60.0)))
        return {"delta": 0.5 * np.cos(angle), "stagger": 0.5 * np.sin(angle)}

    winding = certify(rice_mele(Cycle(pulse)))
    # derived: the same loop round the gapless origin, run through within a pulse
    assert (winding.number, winding.certified, winding.exact) == (1, True, False)


def test_coupling_that_is_off_at_the_start() -> None:
    """Where a hopping vanishes at phi = 0 the chain falls apart there, but not elsewhere."""
    cycle = Cycle.ellipse(x=("delta", 0.5, 0.5), y=("stagger", 0.0, 0.5))
    device = fold(rice_mele(cycle, cells=10))
    assert device.size == 20


@pytest.mark.parametrize("seed", range(50))
def test_disorder_within_the_gap_changes_nothing(seed: int) -> None:
    clean = ModulatedChain(sites=60, cycle=loop(), onsite=[STAGGER], bonds=[DELTA], probe=WIDE, drain=WIDE)
    gap = _proven_distance(clean.pump())
    width = 0.99 * gap * (seed + 1) / 50
    noisy = Disorder(onsite=width, bonds=width / 2, seed=seed)
    assert noisy.norm < gap
    dirty = ModulatedChain(
        sites=60, cycle=loop(), onsite=[STAGGER], bonds=[DELTA], probe=WIDE, drain=WIDE, disorder=noisy
    )
    # H. Weyl, Math. Ann. 71, 441 (1912) (citation from memory): levels move by at most the norm of the disorder, so
    # the gap stays open
    winding = certify(dirty.pump())
    assert (winding.number, winding.certified) == (1, True)


def _proven_distance(pump: Pump) -> float:
    return bulk_gap(pump).distance_lower


def test_three_lead_harmonics_still_count() -> None:
    """A wave with an overtone: two harmonics in H, bounds still exact."""
    chain = ModulatedChain(
        sites=60, fermi_level=-1.2, onsite=[Wave(1.5, 3), Wave(0.2, 3, harmonic=2, lag=0.7)], probe=WIDE, drain=WIDE
    )
    winding = certify(chain.pump())
    # derived: the overtone is smaller than the gap, so the wave still carries one filled level a period
    assert (winding.number, winding.exact) == (1, True)


@pytest.mark.parametrize(("sites", "energy"), [(60, 0.3), (90, -0.3)])
def test_level_inside_a_band_is_given_up_early(sites: int, energy: float) -> None:
    """Most electrons pass and little of the cycle gets covered: hundreds of looks more would not change that."""
    wave = [Wave(1.5, 3)]
    chain = ModulatedChain(sites=sites, fermi_level=energy, onsite=wave, probe=WIDE, drain=WIDE)
    winding = certify(chain.pump())
    # derived: the middle band of the period-3 chain reaches over both energies
    assert (winding.number, winding.certified) == (None, False)
    assert winding.evaluations < 60
    assert "not reflected" in winding.reason
    assert winding.unproven
