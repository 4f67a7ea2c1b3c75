"""How much disorder and drive a pump bears, and how long it has to be, against closed forms and brute force."""

from __future__ import annotations

from dataclasses import replace
from math import sqrt

import numpy as np
import pytest
from devices import WIDE, loop, rice_mele
from numpy.testing import assert_allclose
from scipy.optimize import brentq

import scatterpump as sp
from scatterpump.bulk import cell
from scatterpump.bulk.cell import bloch_cell
from scatterpump.operation.altered import with_disorder
from scatterpump.solver.hamiltonian import DrivenHamiltonian

SLIDING = sp.ModulatedChain(sites=36, fermi_level=-1.2, onsite=[sp.Wave(1.5, 3)], probe=WIDE, drain=WIDE)


# ---- the altered pump ------------------------------------------------------------------------------------------------


def test_half_the_drive_is_half_the_wave():
    weak = replace(SLIDING, onsite=[sp.Wave(0.75, 3)]).pump()
    found = bloch_cell(SLIDING.pump()).driven(0.5)
    # derived: the wave's mean over the cycle is 0
    assert_allclose(found.blocks([0.3, 2.0]), bloch_cell(weak).blocks([0.3, 2.0]), atol=1e-13)


def test_drive_shrinks_a_loop_about_its_middle():
    shrunk = rice_mele(loop(delta=(0.2, 0.3), stagger=(0.1, 0.2)))
    found = bloch_cell(rice_mele(loop(delta=(0.2, 0.6), stagger=(0.1, 0.4)))).driven(0.5)
    assert_allclose(found.blocks([1.1]), bloch_cell(shrunk).blocks([1.1]), atol=1e-13)  # derived


@pytest.mark.parametrize("bulk", [True, False])
def test_cell_without_its_drive_does_not_move(bulk):
    pump = SLIDING.pump()
    still = bloch_cell(pump if bulk else replace(pump, bulk=None)).driven(0.0)
    assert still.harmonics is not None and still.harmonics.degree == 0
    # textbook: a uniform chain of hopping 1 has the band -2 cos k; the wave's mean over the cycle is 0
    momenta = np.linspace(0, 2 * np.pi, 5)
    bands = -2 * np.cos((momenta[:, None] + 2 * np.pi * np.arange(3)) / 3)
    energies = np.linalg.eigvalsh(still.hamiltonian(momenta, 0 * momenta))
    assert_allclose(energies, np.sort(bands, axis=1), atol=1e-12)


def test_drive_reaches_as_far_by_a_found_cell():
    given, found = (sp.drive_tolerance(pump) for pump in (SLIDING.pump(), replace(SLIDING.pump(), bulk=None)))
    for one, other in ((given.weakest, found.weakest), (given.strongest, found.strongest)):
        assert one.holds == pytest.approx(other.holds, rel=0.01)  # twice LAST_STEP: each march stops within one


def test_disorder_stays_in_its_box_and_is_the_same_each_time():
    clean, one, again, other = (
        DrivenHamiltonian(pump).at(0.7)
        for pump in (
            SLIDING.pump(),
            with_disorder(SLIDING.pump(), 0.4, seed=1),
            with_disorder(SLIDING.pump(), 0.4, seed=1),
            with_disorder(SLIDING.pump(), 0.4, seed=2),
        )
    )
    noise = (one - clean).real
    assert np.abs(noise).max() <= 0.2
    assert_allclose(np.std(noise[np.abs(noise) > 0]), 0.4 / sqrt(12), rtol=0.3)  # of an even distribution
    assert (one == again).all()
    assert (one != other).any()


# ---- disorder --------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("delta", "stagger"), [(0.5, 0.5), (0.15, 0.6)])
def test_proven_disorder_is_half_the_gap(delta, stagger):
    """The gap of the dimerised chain on its ellipse is min(2 D0, 4 d0), and the level lies in its middle."""
    # derived from the 2 x 2 Bloch matrix; model: M. J. Rice, E. J. Mele, Phys. Rev. Lett. 49, 1455 (1982) (from memory)
    exact = min(stagger, 2 * delta)
    found = sp.disorder_tolerance(rice_mele(loop(delta=(0, delta), stagger=(0, stagger))), samples=0)
    assert 0.985 * exact <= found.change <= exact
    assert found.width == 2 * found.change
    assert found.best_width == pytest.approx(2 * exact, rel=0.02)


def test_samples_bear_at_least_what_is_proven():
    """Weyl's inequality, tried: the samples cannot fail below the bound, and a few fail not far beyond."""
    found = sp.disorder_tolerance(SLIDING.pump(), samples=1)
    assert len(found.samples) == 1
    assert all(found.width <= width < 8 * found.width for width in found.samples)


def test_level_in_a_band_bears_nothing():
    with pytest.raises(sp.ClosedGapError, match="closes at the Fermi level 0.3"):
        sp.disorder_tolerance(SLIDING.pump().at_fermi_level(0.3))


# ---- drive -----------------------------------------------------------------------------------------------------------


def test_weakest_drive_passes_through_the_gapless_point():
    """An ellipse about (c, 0) of half-axis r in delta goes round the origin as long as factor r > c."""
    found = sp.drive_tolerance(rice_mele(loop(delta=(0.2, 0.5), stagger=(0.0, 0.6))))
    # M. J. Rice, E. J. Mele, Phys. Rev. Lett. 49, 1455 (1982) (from memory): gapless at the origin only; derived
    assert 0.4 <= found.weakest.holds < 0.41
    assert found.weakest.fails is not None and 0.38 < found.weakest.fails <= 0.4
    assert (found.strongest.holds, found.strongest.fails) == (4.0, None)
    assert found.exact


def test_drive_of_the_sliding_wave_holds_until_an_edge_meets_the_level():
    """Gap 1 is from -(1 + b) to [(1 + b) - sqrt(9 - 6b + 9b^2)]/2 with b = V/2."""
    # derived from the cubic of W. G. Chambers, Phys. Rev. 140, A135 (1965) (from memory)
    weakest = (1.2 - 1) / 0.75
    strongest = brentq(lambda b: (1 + b - sqrt(9 - 6 * b + 9 * b * b)) / 2 + 1.2, 0.75, 6) / 0.75
    found = sp.drive_tolerance(SLIDING.pump())
    assert found.weakest.fails is not None and found.strongest.fails is not None
    assert found.weakest.fails <= weakest <= found.weakest.holds <= 1.02 * weakest
    assert 0.98 * strongest <= found.strongest.holds <= strongest <= found.strongest.fails


def test_drive_of_a_bent_trace_is_called_estimated(monkeypatch):
    """Recorded points joined by a spline: H between samples is known by sampling only."""
    angles = 2 * np.pi * np.arange(9) / 8
    table = {"delta": (0.45 + 0.5 * np.cos(angles)).tolist(), "stagger": (0.5 * np.sin(angles)).tolist()}
    table = {name: [*values[:-1], values[0]] for name, values in table.items()}
    pump = rice_mele(sp.Cycle.through(table, curve="spline"))
    asked = []
    at = cell._at
    monkeypatch.setattr(cell, "_at", lambda *where: (asked.append(1), at(*where))[1])
    found = sp.drive_tolerance(pump, limit=1.01)
    assert not found.exact
    assert 0.9 <= found.weakest.holds < 0.91  # derived: the loop about (0.45, 0) must be wider than 0.45
    assert found.steps > 2
    assert (
        len(asked) < 2500
    )  # derived: 512 knots and 512 middles, 512 of the norm and 64 of the mean, once for all steps


@pytest.mark.parametrize("limit", [1.0, 0.5, np.inf, np.nan])
def test_limit_of_the_drive_is_checked(limit):
    with pytest.raises(sp.InputError, match="a number above 1"):
        sp.drive_tolerance(SLIDING.pump(), limit=limit)


# ---- length ----------------------------------------------------------------------------------------------------------


def dimers(cells=6):
    return sp.ModulatedChain(
        sites=2 * cells,
        cycle=loop(),
        onsite=[sp.Wave("stagger", 2, harmonic=0)],
        bonds=[sp.Wave("delta", 2, lag=-np.pi / 2, harmonic=0)],
        probe=WIDE,
        drain=WIDE,
    )


@pytest.mark.parametrize(("leak", "cells"), [(6e-3, (6,)), (1e-3, (7, 8)), (1.05e-4, (10,)), (0.7, (1, 2))])
def test_shortest_chain(leak, cells):
    """Smallest |r| over the cycle for 4, 6, 8, 10 cells, by kwant: 0.979716, 0.997277, 0.999630, 0.999949."""
    found = sp.shortest_device(dimers(), leak=leak)
    assert found.cells in cells
    assert found.leak <= leak < found.shorter_leak
    if found.cells == 10:
        assert found.leak == pytest.approx(1 - 0.999949**2, abs=1.1e-6)
        assert found.leak <= found.leak_bound
        assert found.number == 1
    # derived: largest eigenvalue of the transfer matrix squared, per cell
    assert found.decay**2 == pytest.approx(0.3716, rel=1e-3)


def test_no_length_helps_in_a_band():
    with pytest.raises(sp.ClosedGapError, match="propagates"):
        sp.shortest_device(replace(SLIDING, fermi_level=0.3))


@pytest.mark.parametrize("leak", [0.0, 1.0, np.nan])
def test_leak_is_checked(leak):
    with pytest.raises(sp.InputError, match="a probability between 0 and 1"):
        sp.shortest_device(SLIDING, leak=leak)


def test_wave_that_never_repeats_has_no_length():
    with pytest.raises(sp.InputError, match="no cell that changes repeats|do not repeat"):
        sp.shortest_device(replace(SLIDING, onsite=[sp.Wave(1.5, sqrt(7))]))
