"""The charge of a fast cycle against the time-dependent Schroedinger equation, and its slow limit against Brouwer's."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from devices import loop, rice_mele
from scipy.linalg import solve_banded
from scipy.special import expit
from test_charge import circle, two_impurities
from test_time_domain import TURN, open_chain

from scatterpump.cycle import Cycle
from scatterpump.operation.charge import charge
from scatterpump.operation.driven import driven_charge
from scatterpump.operation.floquet import crossing_charge, drive_of
from scatterpump.operation.frozen import frozen_charge
from scatterpump.pump import Pump

CELLS, WIRE, WARM = 6, 150, 0.1


def charge_of_second_cycle(period: float, *, step: float = 0.1) -> float:
    """Return what the second cycle takes from the left half of wire, dimerised chain, wire; hbar = 1.

    Crank-Nicolson steps of all states with their thermal weights.  The first cycle carries the transient of switching
    on; in the wires, as long as nothing has come back from their ends, all is as if they were endless.  At kT = 0.1,
    some level spacings, it does not matter that their levels are discrete.
    """
    levels, bonds = open_chain(0.0, WIRE, CELLS)
    energies, states = np.linalg.eigh(np.diag(levels) + np.diag(bonds, 1) + np.diag(bonds, -1))
    filling = expit(-energies / WARM)
    states = (states * np.sqrt(filling))[:, filling > 1e-7].astype(complex)
    steps, left = round(period / step), []
    for cycle in range(3):
        left.append((np.abs(states[: len(levels) // 2]) ** 2).sum())
        for number in range(steps if cycle < 2 else 0):
            levels, bonds = open_chain(TURN * (number + 0.5) / steps, WIRE, CELLS)
            banded = np.zeros((3, len(levels)), dtype=complex)
            banded[0, 1:] = banded[2, :-1] = 0.5j * step * bonds
            banded[1] = 1 + 0.5j * step * levels
            states = 2 * solve_banded((1, 1), banded, states, check_finite=False) - states
    return float(left[1] - left[2])


@cache
def dimerised() -> Pump:
    return rice_mele(loop(), cells=CELLS)


@pytest.mark.parametrize("period", [20, 30, 40])
def test_fast_cycle_misses_the_integer_as_time_evolution_does(period: int) -> None:
    """The deviations are 9e-2, 3.3e-2 and 1.8e-2."""
    truth = charge_of_second_cycle(period)
    reference = frozen_charge(dimerised()).leads
    found = reference + driven_charge(dimerised(), reference, TURN / period, WARM).shift
    # derived: direct time evolution, numpy and scipy alone
    assert abs(truth - 1) > 1e-3
    assert found[0] - 1 == pytest.approx(truth - 1, rel=0.05)
    assert found.sum() == pytest.approx(0, abs=1e-10)


# The second cycle of two impurities in a wire at kT = 0.03, E = 1, by Crank-Nicolson steps in wires of 200 sites:
# mean of what the left half loses and the right half gains (derived; the two differ by 4e-5)
SECOND_CYCLE = {25: 0.14579, 50: 0.147775, 100: 0.14828}


@pytest.mark.parametrize(("period", "expected"), SECOND_CYCLE.items())
def test_charge_of_two_impurities_follows_the_frequency(period: int, expected: float) -> None:
    pump = two_impurities(circle(1.0, 0.8))
    reference = frozen_charge(pump).leads
    found = reference + driven_charge(pump, reference, TURN / period, 0.03).shift
    assert found[0] == pytest.approx(expected, abs=1e-4)  # value and sign, derived as above


def test_warm_charge_of_two_impurities() -> None:
    found = charge(two_impurities(circle(1.0, 0.8)), temperature=0.03)
    # P. W. Brouwer, Phys. Rev. B 58, R10135 (1998), averaged over -f' by brute force: +0.148390 (derived)
    assert found.probe == pytest.approx(0.148390, abs=2e-6)
    assert found.thermal == pytest.approx(0.148390 - 0.148605, abs=3e-6)


@pytest.mark.parametrize("pump", [rice_mele(loop(), cells=4), two_impurities(circle(1.0, 0.8))], ids=["gap", "metal"])
def test_slow_limit_is_brouwers_with_the_square_of_the_frequency(pump: Pump) -> None:
    slow = frozen_charge(pump).leads
    shifts = [driven_charge(pump, slow, frequency, absolute=1e-10).shift[0] for frequency in (0.02, 0.01, 0.005)]
    orders = np.log2(np.abs(shifts[:-1]) / np.abs(shifts[1:]))
    # derived: the order is observed, not assumed
    assert orders == pytest.approx([2, 2], abs=0.05)
    assert abs(driven_charge(pump, slow, 1e-7, absolute=1e-11).shift).max() < 1e-9


def test_ladder_is_unitary_and_conserves_charge() -> None:
    found = drive_of(dimerised()).ladder(12).charge(0.1, 0.15)
    # derived: H is hermitian on any ladder
    assert found.unitarity < 1e-12
    assert found.leads.sum() == pytest.approx(0, abs=1e-12)


def test_recorded_trace_has_harmonics_without_end() -> None:
    """Straight lines between eight points: kinks, and a charge that still tends to Brouwer's."""
    angles = TURN * np.arange(9) / 8
    trace = Cycle.through(
        {"delta": [*(0.5 * np.cos(angles[:-1])), 0.5], "stagger": [*(0.5 * np.sin(angles[:-1])), 0.0]}
    )
    pump = rice_mele(trace, cells=3)
    slow = frozen_charge(pump).leads
    # derived
    assert driven_charge(pump, slow, 1e-4, absolute=1e-5).shift[0] == pytest.approx(0, abs=2e-5)


def test_what_falls_less_what_rises_is_counted() -> None:
    passed = np.array([[0.1, 0.6], [0.9, 0.4]])
    # derived: column 1 is the upper channel of lead 0; 0.6 fall into lead 1, 0.9 rise into lead 0
    found = crossing_charge(passed, np.array([1, 0]), np.array([False, True]), 2)
    assert found == pytest.approx([-0.9, 0.6])
