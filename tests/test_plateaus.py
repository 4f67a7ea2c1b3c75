"""Windows of Fermi levels against closed forms and published integers."""

from __future__ import annotations

from math import inf, sqrt

import numpy as np
import pytest
from devices import HARPER_GAPS, loop, rice_mele

import scatterpump as sp

EDGE = 1e-9


def period_three(hopping, height):
    wire = sp.Lead(hopping=2.0)
    return sp.ModulatedChain(
        sites=45, hopping=hopping, fermi_level=-1.2, onsite=[sp.Wave(height, 3)], probe=wire, drain=wire
    ).pump()


def sliding(p, q, height):
    """The interior counts here: the leads have no mode anywhere near, so no device is proven."""
    wire = sp.Lead(level=50.0)
    chain = sp.ModulatedChain(sites=q, fermi_level=0.0, onsite=[sp.Wave(height, q / p)], probe=wire, drain=wire)
    return chain.pump()


@pytest.mark.parametrize(("hopping", "height"), [(1.0, 1.5), (1.0, 0.5), (1.0, 2.0), (0.7, 3.0)])
def test_windows_of_the_period_three_chain(hopping, height):
    """With a = t, b = V/2 gap 1 is from -(a+b) to [(a+b) - sqrt(9a^2 - 6ab + 9b^2)]/2; gap 2 is its mirror image."""
    # derived from the cubic of W. G. Chambers, Phys. Rev. 140, A135 (1965) (from memory)
    a, b = hopping, height / 2
    low, high = -(a + b), ((a + b) - sqrt(9 * a * a - 6 * a * b + 9 * b * b)) / 2
    first, second = sp.plateaus(period_three(hopping, height), between=(low - 0.01, -low + 0.01))
    for plateau, edges in ((first, (low, high)), (second, (-high, -low))):
        assert edges[0] - 1e-13 <= plateau.lower <= edges[0] + EDGE
        assert edges[1] - EDGE <= plateau.upper <= edges[1] + 1e-13
        assert plateau.exact
    assert (first.number, first.how) == (1, "proven")
    assert (second.number, second.how) == (-1, "proven")
    assert (first.filled, second.filled) == (1, 2)


# The windows to four decimals, by a brute-force grid and other code.
WINDOWS = {
    (1, 3): {1: (-1.7500, -0.6712), 2: (0.6712, 1.7500)},
    (2, 3): {1: (-1.7500, -0.6712), 2: (0.6712, 1.7500)},
    (1, 4): {1: (-2.2905, -1.0018), 3: (1.0018, 2.2905)},
    (1, 5): {1: (-2.7580, -1.2901), 2: (-0.8580, -0.3694), 3: (0.3694, 0.8580), 4: (1.2901, 2.7580)},
    (2, 5): {2: (-1.6251, -0.1708), 3: (0.1708, 1.6251)},
}


def special_points(p, q, height):
    """Levels where Chambers's relation puts every band edge: k = 0 and pi, and q phi = 0 and pi."""
    for phi in (0.0, np.pi / q):
        for turn in (1.0, -1.0):
            matrix = np.diag(height * np.cos(2 * np.pi * p * np.arange(q) / q + phi))
            matrix -= np.eye(q, k=1) + np.eye(q, k=-1)
            matrix[0, -1] -= turn
            matrix[-1, 0] -= turn
            yield np.linalg.eigvalsh(matrix)


@pytest.mark.parametrize(("p", "q"), WINDOWS)
def test_harper_windows_and_their_integers(p, q):
    """The gaps and Hall integers of D. J. Thouless et al., Phys. Rev. Lett. 49, 405 (1982); sign: slides away."""
    known = {gap.number: gap for gap in HARPER_GAPS if (gap.p, gap.q) == (p, q)}
    height = next(iter(known.values())).strength
    levels = np.array(list(special_points(p, q, height)))
    found = {plateau.filled: plateau for plateau in sp.plateaus(sliding(p, q, height), between=(-3.5, 3.5))}
    for number, (low, high) in WINDOWS[p, q].items():
        plateau = found[number]
        edges = levels[:, number - 1].max(), levels[:, number].min()
        assert edges[0] == pytest.approx(low, abs=6e-5)
        assert edges[1] == pytest.approx(high, abs=6e-5)
        assert edges[0] - 1e-13 <= plateau.lower <= edges[0] + EDGE
        assert edges[1] - EDGE <= plateau.upper <= edges[1] + 1e-13
        assert (plateau.number, plateau.how) == (known[number].hall, "computed")
        assert plateau.lower < plateau.level < plateau.upper


def test_touching_gap_is_no_window():
    """The central gap of 1/4 touches at some phi for every V (the symmetry of Harper's chain for even q)."""
    assert [plateau.filled for plateau in sp.plateaus(sliding(1, 4, 1.5), between=(-2.4, 2.4))] == [1, 3]


def test_windows_are_cut_to_the_range():
    (found,) = sp.plateaus(period_three(1.0, 1.5), between=(-1.5, -1.0))
    # derived: the range lies inside the window from -1.75 to -0.67
    assert (found.lower, found.upper, found.number) == (-1.5, -1.0, 1)
    assert found.lower_edge.upper == pytest.approx(-1.75, abs=EDGE)


def test_usual_range_is_the_level_and_its_neighbours():
    below, here, above = sp.plateaus(rice_mele(loop(), energy=0.1))
    # derived: nothing is carried by no band or by all of them; M. J. Rice, E. J. Mele (1982) for the one between
    assert (below.number, here.number, above.number) == (0, 1, 0)
    assert (below.lower, above.upper) == (-inf, inf)
    assert (here.lower, here.upper) == (pytest.approx(-0.5, abs=EDGE), pytest.approx(0.5, abs=EDGE))


def test_closed_leads_leave_the_chern_number():
    """Wires with a band from 0.2 up have no mode at -0.15, the middle of the range."""
    wire = sp.Lead(hopping=0.5, level=1.2)
    pump = rice_mele(loop(), probe=wire, drain=wire, energy=0.3)
    (found,) = sp.plateaus(pump, between=(-0.4, 0.1))
    assert (found.number, found.how) == (1, "computed")


@pytest.mark.parametrize("between", [(1.0, 1.0), (2.0, -2.0), (-inf, 0.0)])
def test_range_that_is_none_is_refused(between):
    with pytest.raises(sp.InputError, match="two finite energies, the lower one first"):
        sp.plateaus(period_three(1.0, 1.5), between=between)
