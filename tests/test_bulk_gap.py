"""The gap of the interior: brackets against closed forms, brute force, and what may not be called open."""

from math import cos, pi, sqrt

import kwant
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Lead, Wave
from scatterpump.bulk.cell import bloch_cell
from scatterpump.bulk.family import bloch_family
from scatterpump.bulk.gap import bulk_gap
from scatterpump.bulk.torus import Cover, search
from scatterpump.cycle import Cycle
from scatterpump.errors import InputError, NoBulkError
from scatterpump.pump import Pump

RADII = st.floats(0.05, 0.9)


def rice_mele(cycle, fermi_level=0.0):
    return ModulatedChain(
        sites=80,
        fermi_level=fermi_level,
        cycle=cycle,
        onsite=[Wave("stagger", 2, harmonic=0)],
        bonds=[Wave("delta", 2, lag=-pi / 2, harmonic=0)],
        probe=Lead(2.0),
        drain=Lead(2.0),
    ).pump()


def ellipse(d0, stagger, centre=0.0):
    return Cycle.ellipse(x=("delta", centre, d0), y=("stagger", 0.0, stagger))


def harper(p, q, height, fermi_level):
    return ModulatedChain(sites=60, fermi_level=fermi_level, onsite=[Wave(height, q / p)]).pump()


def polygon(corners):
    angles = 2 * pi * np.arange(corners + 1) / corners
    table = {"delta": (0.6 * np.cos(angles)).tolist(), "stagger": (0.6 * np.sin(angles)).tolist()}
    return {name: [*values[:-1], values[0]] for name, values in table.items()}


# ---- closed forms ----------------------------------------------------------------------------------------------------


@settings(derandomize=True, deadline=None, max_examples=40)
@given(d0=RADII, stagger=RADII)
def test_rice_mele_ellipse_has_the_gap_of_the_closed_form(d0, stagger):
    """Gap 2 sqrt(D^2 + 4 d^2) at k = pi, so min(2 D0, 4 d0) on the loop (derived from the 2 x 2 Bloch matrix)."""
    # model: M. J. Rice, E. J. Mele, Phys. Rev. Lett. 49, 1455 (1982) (from memory)
    gap, exact = bulk_gap(rice_mele(ellipse(d0, stagger))), min(2 * stagger, 4 * d0)
    assert gap.is_open and gap.exact and gap.filled == 1
    assert gap.lower <= exact <= gap.upper * (1 + 1e-12)
    assert gap.upper - gap.lower <= 0.01 * gap.upper + 1e-8
    assert gap.distance_lower <= exact / 2 <= gap.distance_upper * (1 + 1e-12)  # the spectrum is E <-> -E symmetric


@pytest.mark.parametrize(("hopping", "height"), [(1.0, 1.5), (1.0, 0.5), (1.0, 2.0), (0.7, 3.0)])
def test_period_three_window_and_gap(hopping, height):
    """With a = t, b = V/2 gap 1 is from -(a+b) to [(a+b) - sqrt(9a^2 - 6ab + 9b^2)]/2; the direct gap is as wide."""
    # derived from the cubic of W. G. Chambers, Phys. Rev. 140, A135 (1965) (from memory)
    a, b = hopping, height / 2
    low, high = -(a + b), ((a + b) - sqrt(9 * a * a - 6 * a * b + 9 * b * b)) / 2
    chain = ModulatedChain(sites=60, hopping=hopping, fermi_level=(low + high) / 2, onsite=[Wave(height, 3)])
    gap = bulk_gap(chain.pump(), accuracy=1e-3)
    assert gap.lower <= high - low <= gap.upper + 1e-12
    assert gap.lower_edge.lower - 1e-12 <= low <= gap.lower_edge.upper
    assert gap.upper_edge.lower <= high <= gap.upper_edge.upper + 1e-12
    assert gap.upper - gap.lower < 1.1e-3 * gap.upper


def test_samples_of_the_period_three_chain_solve_its_cubic():
    """E^3 - 3 (t^2 + V^2/4) E = (V^3/4) cos 3 phi - 2 t^3 cos k at the places that are reported."""
    # W. G. Chambers, Phys. Rev. 140, A135 (1965) (from memory); hopping -t, potential V cos(2 pi x/3 - phi)
    gap = bulk_gap(harper(1, 3, 1.5, -1.211))

    def levels(k, phi):
        return np.sort(np.roots([1, 0, -3 * (1 + 1.5**2 / 4), -(1.5**3 / 4 * cos(3 * phi) - 2 * cos(k))]).real)

    assert_allclose(gap.upper, np.diff(levels(gap.momentum, gap.phase))[0], atol=1e-7)
    assert_allclose(gap.lower_edge.lower, levels(gap.lower_edge.momentum, gap.lower_edge.phase)[0], atol=1e-7)
    assert_allclose(gap.upper_edge.upper, levels(gap.upper_edge.momentum, gap.upper_edge.phase)[1], atol=1e-7)


@pytest.mark.parametrize(
    ("p", "q", "band", "height", "low", "high"),
    [
        (1, 3, 1, 1.5, -1.7500, -0.6712),
        (1, 3, 2, 1.5, 0.6712, 1.7500),
        (2, 3, 1, 1.5, -1.7500, -0.6712),
        (2, 3, 2, 1.5, 0.6712, 1.7500),
        (1, 4, 1, 1.5, -2.2905, -1.0018),
        (1, 4, 3, 1.5, 1.0018, 2.2905),
        (1, 5, 1, 1.8, -2.7580, -1.2901),
        (1, 5, 2, 1.8, -0.8580, -0.3694),
        (1, 5, 3, 1.8, 0.3694, 0.8580),
        (1, 5, 4, 1.8, 1.2901, 2.7580),
        (2, 5, 2, 1.8, -1.6251, -0.1708),
        (2, 5, 3, 1.8, 0.1708, 1.6251),
    ],
)
def test_harper_windows(p, q, band, height, low, high):
    """Energies that lie in the gap for all k and phi, from a brute-force grid with other code, to four decimals."""
    # D. J. Thouless, M. Kohmoto, M. P. Nightingale, M. den Nijs, Phys. Rev. Lett. 49, 405 (1982): the gaps;
    # P. G. Harper, Proc. Phys. Soc. A 68, 874 (1955) (from memory): the chain
    gap = bulk_gap(harper(p, q, height, (low + high) / 2))
    tolerance = 0.01 * gap.distance_upper + 1e-8
    assert gap.is_open and gap.exact and gap.filled == band
    assert gap.lower_edge.lower - 6e-5 <= low <= gap.lower_edge.upper + 6e-5
    assert gap.upper_edge.lower - 6e-5 <= high <= gap.upper_edge.upper + 6e-5
    assert gap.lower_edge.upper - gap.lower_edge.lower <= tolerance
    assert gap.upper_edge.upper - gap.upper_edge.lower <= tolerance


def test_no_band_below_the_fermi_level():
    """Then there is no direct gap to close, and the distance is that to the lowest level of the cubic of Chambers."""
    gap = bulk_gap(harper(1, 3, 1.5, -4.0))
    lowest = np.roots([1, 0, -3 * (1 + 1.5**2 / 4), 1.5**3 / 4 + 2]).real.min()  # Phys. Rev. 140, A135 (from memory)
    assert gap.is_open and gap.filled == 0
    assert gap.lower == gap.upper == np.inf and gap.lower_edge.upper == -np.inf
    assert gap.distance_lower <= lowest + 4 <= gap.distance_upper + 1e-12
    above = bulk_gap(harper(1, 3, 1.5, 4.0))  # the mirror image, E <-> -E
    assert above.is_open and above.filled == 3 and above.upper_edge.lower == np.inf
    assert above.distance_lower <= lowest + 4 <= above.distance_upper + 1e-12


# ---- brute force -----------------------------------------------------------------------------------------------------


def random_coefficients(seed):
    """h and V of a random cell, as coefficients of exp(i m phi), m = -K ... K, shape (2K+1, 2, q, q)."""
    rng = np.random.default_rng(seed)
    q, degree = int(rng.integers(2, 6)), int(rng.integers(1, 3))
    half = rng.normal(size=(degree + 1, 2, q, q)) + 1j * rng.normal(size=(degree + 1, 2, q, q)) * (seed % 3 > 0)
    half *= rng.uniform(0.1, 0.5) / np.arange(1, degree + 2)[:, None, None, None] ** 2
    still, onward = half[0, 0] + half[0, 0].conj().T + np.diag(rng.uniform(1.0, 4.0) * np.arange(q)), half[0, 1]
    moving = half[1:]
    if seed % 3 == 0:
        moving, onward = moving.real, onward.real
    back = np.stack([moving[::-1, 0].conj().swapaxes(1, 2), rng.normal(size=moving[:, 1].shape) * 0.1], axis=1)
    return np.concatenate([back, [np.stack([still, onward])], moving])


def site_between_wires():
    """Return a system that has nothing to do with the cell whose bands are asked for."""
    lattice = kwant.lattice.chain(norbs=1)
    system, wire = kwant.Builder(), kwant.Builder(kwant.TranslationalSymmetry((-1,)))
    system[lattice(0)] = wire[lattice(0)] = 0
    wire[lattice.neighbors()] = -1
    system.attach_lead(wire)
    system.attach_lead(wire.reversed())
    return system


def pump_of(coefficients, fermi_level):
    orders = np.arange(len(coefficients)) - len(coefficients) // 2
    lattice = kwant.lattice.chain(norbs=coefficients.shape[-1])
    cell = kwant.Builder(kwant.TranslationalSymmetry((1,)))
    cell[lattice(0)] = lambda site, phi: np.tensordot(np.exp(1j * orders * phi), coefficients[:, 0], 1)
    cell[lattice(1), lattice(0)] = lambda to, here, phi: np.tensordot(np.exp(1j * orders * phi), coefficients[:, 1], 1)
    return Pump(site_between_wires(), Cycle.angle(), fermi_level, bulk=cell)


def levels(coefficients, k, phi):
    orders = np.arange(len(coefficients)) - len(coefficients) // 2
    h, hop = np.moveaxis(np.tensordot(np.exp(1j * np.multiply.outer(phi, orders)), coefficients, 1), 1, 0)
    hop = hop * np.exp(-1j * k)[:, None, None]
    return np.linalg.eigvalsh(h + hop + hop.conj().swapaxes(1, 2))


def extremes(coefficients, filled):
    """Direct gap.

    Top of the filled and bottom of the empty bands: a 64 x 64 grid, then ever finer ones about its best.
    """
    dk, dphi = (axis.ravel() for axis in np.meshgrid(*[np.linspace(-1, 1, 7)] * 2))
    grid = np.array([axis.ravel() for axis in np.meshgrid(*[2 * pi * np.arange(64) / 64] * 2)])
    energies, found = levels(coefficients, *grid), []
    for value in (lambda e: e[:, filled] - e[:, filled - 1], lambda e: -e[:, filled - 1], lambda e: e[:, filled]):
        (k, phi), size = grid[:, value(energies).argmin()], 4 * pi / 64
        for _ in range(30):
            best = value(levels(coefficients, k + size * dk, phi + size * dphi)).argmin()
            k, phi, size = k + size * dk[best], phi + size * dphi[best], size / 2
        found.append(float(value(levels(coefficients, np.array([k]), np.array([phi])))[0]))
    return found[0], -found[1], found[2]


@pytest.mark.parametrize("seed", range(200))
def test_random_cells_are_bracketed(seed):
    """Brute force.

    Dense grid and local refinement by numpy alone; 2 to 5 orbitals, real and complex, 1 or 2 harmonics.
    """
    coefficients = random_coefficients(seed)
    filled = 1 + seed % (coefficients.shape[-1] - 1)
    direct, top, bottom = extremes(coefficients, filled)
    gap = bulk_gap(pump_of(coefficients, (top + bottom) / 2))
    assert gap.exact
    assert gap.is_open == (bottom - top > 1e-4)
    if gap.is_open:
        assert gap.filled == filled
        assert gap.lower <= direct <= gap.upper + 1e-9
        assert gap.lower_edge.lower - 1e-9 <= top <= gap.lower_edge.upper
        assert gap.upper_edge.lower <= bottom <= gap.upper_edge.upper + 1e-9
        assert gap.distance_lower <= (bottom - top) / 2 <= gap.distance_upper + 1e-9
        assert gap.upper - gap.lower <= 0.01 * gap.upper + 1e-8
    else:
        there = levels(coefficients, np.array([gap.momentum]), np.array([gap.phase]))
        assert_allclose(np.abs(there - (top + bottom) / 2).min(), gap.distance_upper, atol=1e-9)
        assert gap.lower == 0.0 and gap.distance_lower == 0.0 and gap.distance_upper < 1e-4


@pytest.mark.parametrize("budget", [1, 40, 400])
@pytest.mark.parametrize("seed", range(12))
def test_bounds_hold_however_early_the_search_stops(seed, budget):
    """Brute force again: whatever size the boxes have, the bounds are below the true minima."""
    coefficients = random_coefficients(seed)
    family = bloch_family(bloch_cell(pump_of(coefficients, 0.0)))
    direct, top, bottom = extremes(coefficients, 1)
    found = search(family, family.bends, family.cover, filled=1, accuracy=1e-3, floor=-np.inf, budget=budget)
    assert (found.lower <= np.array([bottom, -top, direct]) + 1e-9).all()
    assert (found.upper >= np.array([bottom, -top, direct]) - 1e-9).all()


@settings(derandomize=True, deadline=None, max_examples=150)
@given(seed=st.integers(0, 10**6), size=st.floats(-4, 0.3), shape=st.floats(-1, 1))
def test_bound_of_a_single_box_is_below_all_levels_in_it(seed, size, shape):
    """Brute force over one box of any size and shape, against its second-order bound (Weyl and Courant-Fischer)."""
    # R. A. Horn, C. R. Johnson, Matrix Analysis, Cambridge (theorems 4.2.6 and 4.3.1, citation from memory)
    rng, coefficients = np.random.default_rng(seed), random_coefficients(seed)
    filled = int(rng.integers(1, coefficients.shape[-1]))
    family = bloch_family(bloch_cell(pump_of(coefficients, 0.0)))
    centre, half = rng.uniform(0, 2 * pi, 2), 10**size * np.array([10**shape, 10**-shape])
    box = Cover(centre[None], half[None], np.zeros(1, dtype=int), mirrored=False)
    found = search(family, family.bends, box, filled=filled, accuracy=1e-9, floor=-np.inf, budget=1)
    points = np.concatenate([rng.uniform(-1, 1, (2, 300)), [[-1, -1, 1, 1], [-1, 1, -1, 1]]], axis=1)
    k, phi = centre[:, None] + half[:, None] * points
    inside = levels(coefficients, k, phi)
    smallest = [
        inside[:, filled].min(),
        -inside[:, filled - 1].max(),
        (inside[:, filled] - inside[:, filled - 1]).min(),
    ]
    assert (found.lower <= np.array(smallest) + 1e-9).all()


def test_degenerate_bands_cost_no_more():
    """Two copies of a chain have its levels twice (direct sum), so its gap, found with as many eigenproblems."""
    one = np.zeros((3, 2, 2, 2), dtype=complex)  # Rice-Mele, d = .6 cos phi, D = .6 sin phi, hoppings -(1 +- d)
    one[1] = [[[0, -1], [-1, 0]], [[0, -1], [0, 0]]]
    one[0] = [[[0.3j, -0.3], [-0.3, -0.3j]], [[0, 0.3], [0, 0]]]
    one[2] = one[0].conj()
    single, double = bulk_gap(pump_of(one, 0.0)), bulk_gap(pump_of(np.kron(one, np.eye(2)), 0.0))
    assert double.filled == 2
    assert_allclose([double.upper, double.distance_upper], [1.2, 0.6], rtol=1e-9)  # min(2 D0, 4 d0), as above
    assert double.lower <= 1.2 and double.evaluations <= 1.2 * single.evaluations


# ---- work ------------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("pump", "gap_width", "plain", "most"),
    [
        (rice_mele(ellipse(0.6, 0.6)), 1.2, 538, 150),
        (rice_mele(ellipse(0.6, 0.2)), 0.4, 584, 100),
        (harper(2, 5, 1.8, -2.1448), 0.147957, 3544, 450),
    ],
)
def test_work_stays_within_budget(pump, gap_width, plain, most):
    """All three brackets together, against a plain second-order search for the direct gap alone (other code)."""
    gap = bulk_gap(pump, accuracy=0.01)
    assert_allclose(gap.upper, gap_width, rtol=1e-5)  # closed form min(2 D0, 4 d0); Harper: brute-force grid
    assert gap.evaluations <= most < plain


def test_spent_budget_leaves_a_wider_bracket():
    """min(2 D0, 4 d0) = 1.2 (closed form above) stays inside a bracket that 24 eigenproblems could not close."""
    gap = bulk_gap(rice_mele(ellipse(0.6, 0.6)), accuracy=1e-6, budget=24)
    assert gap.lower <= 1.2 <= gap.upper + 1e-12
    assert gap.upper - gap.lower > 1e-6 and gap.evaluations <= 30


# ---- what is not open ------------------------------------------------------------------------------------------------


def test_loop_through_the_gapless_point_is_not_open():
    """d = .5 + .5 cos phi, D = .5 sin phi is the uniform chain at phi = pi, which closes at k = pi (derived)."""
    gap = bulk_gap(rice_mele(ellipse(0.5, 0.5, centre=0.5)))
    assert not gap.is_open
    assert gap.lower == 0.0 == gap.distance_lower
    assert_allclose([gap.upper, gap.distance_upper], 0.0, atol=1e-8)
    assert_allclose([gap.momentum, gap.phase], pi, atol=1e-7)


@pytest.mark.parametrize("centre", [0.49, 0.51])
def test_loop_that_nearly_closes_is_open(centre):
    """A loop that passes d = -+.01, D = 0 has the gap 4 |d| = .04 (closed form above)."""
    gap = bulk_gap(rice_mele(ellipse(0.5, 0.5, centre=centre)))
    assert gap.is_open and gap.lower <= 0.04 <= gap.upper + 1e-12


def test_closing_at_an_odd_place_is_found():
    """The same loop begun elsewhere and at a level shifted with it: the place moves along, nothing else changes."""
    # k = pi, phi = pi - 1 by the closed form above
    gap = bulk_gap(rice_mele(ellipse(0.5, 0.5, centre=0.5).started_at(1.0)), floor=1e-3)
    assert not gap.is_open
    assert_allclose([gap.momentum, gap.phase], [pi, pi - 1], atol=1e-6)
    assert gap.upper < 1e-6


@pytest.mark.parametrize("fermi_level", [0.7, -0.9, 1.5])
def test_band_across_the_fermi_level_is_located(fermi_level):
    """E = +-sqrt(D^2 + t1^2 + t2^2 + 2 t1 t2 cos k) is the Fermi level at the place reported (2 x 2 Bloch matrix)."""
    gap = bulk_gap(rice_mele(ellipse(0.6, 0.6), fermi_level))
    d, stagger = 0.6 * cos(gap.phase), 0.6 * np.sin(gap.phase)
    energy = sqrt(stagger**2 + (1 + d) ** 2 + (1 - d) ** 2 + 2 * (1 - d * d) * cos(gap.momentum))
    assert not gap.is_open and gap.lower == 0.0 == gap.distance_lower
    assert_allclose(energy, abs(fermi_level), atol=1e-7)
    assert gap.distance_upper < 1e-7


def test_fermi_level_at_a_band_edge_is_not_open():
    """The band edge of the ellipse .6/.6 is .6 (closed form above); 2e-5 below it no search can see the difference."""
    gap = bulk_gap(rice_mele(ellipse(0.6, 0.6), 0.6 - 2e-5))
    assert not gap.is_open and gap.distance_upper <= 2e-5 + 1e-9
    assert bulk_gap(rice_mele(ellipse(0.6, 0.6), 0.6 - 2e-5), floor=1e-6).is_open


# ---- exact or estimated ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("corners", [4, 8, 50])
def test_broken_line_is_exact(corners):
    """2 sqrt(D^2 + 4 d^2) is twice the distance from the origin in the plane (2d, D), least on a side of it."""
    table = polygon(corners)
    points = np.column_stack([2 * np.array(table["delta"]), table["stagger"]])
    start, along = points[:-1], np.diff(points, axis=0)
    nearest = np.clip(-(start * along).sum(axis=1) / (along**2).sum(axis=1), 0, 1)
    exact = 2 * np.linalg.norm(start + nearest[:, None] * along, axis=1).min()  # Euclidean geometry
    gap = bulk_gap(rice_mele(Cycle.through(table)))
    assert gap.is_open and gap.exact
    assert gap.lower <= exact <= gap.upper + 1e-12
    assert gap.upper - gap.lower <= 0.01 * gap.upper + 1e-8


@pytest.mark.parametrize("points", [5, 12])
def test_spline_is_bracketed_but_estimated(points):
    """scipy's periodic cubic spline through the same points, put into 2 sqrt(D^2 + 4 d^2) on a fine grid."""
    from scipy.interpolate import CubicSpline

    table = polygon(points)
    curve = CubicSpline(np.linspace(0, 2 * pi, points + 1), np.column_stack(list(table.values())), bc_type="periodic")
    d, stagger = curve(np.linspace(0, 2 * pi, 200_001)).T
    exact = 2 * np.sqrt(stagger**2 + 4 * d**2).min()
    gap = bulk_gap(rice_mele(Cycle.through(table, curve="spline")))
    assert gap.is_open and not gap.exact
    assert gap.lower <= exact <= gap.upper + 1e-9
    assert gap.upper - gap.lower <= 0.01 * gap.upper + 1e-4


def test_straight_cycle_of_a_bent_hamiltonian_is_not_called_exact():
    """phi runs 0 .. 2 and back on straight lines, but H goes as cos phi; gap from the cubic of Chambers on the way."""
    # W. G. Chambers, Phys. Rev. 140, A135 (1965) (from memory): levels 2R cos((arccos(rho/2R^3) + 2 pi j)/3)
    cycle = Cycle.through({"phi": [0.0, 1.0, 2.0, 1.0, 0.0]})
    gap = bulk_gap(ModulatedChain(sites=60, fermi_level=-1.211, onsite=[Wave(1.5, 3)], cycle=cycle).pump())
    phi, radius = np.linspace(0, 2, 4001), sqrt(1 + 1.5**2 / 4)
    rho = 1.5**3 / 4 * np.cos(3 * phi) + 2 * np.array([[-1.0], [1.0]])
    angle = np.arccos(rho / (2 * radius**3))
    energies = np.sort([2 * radius * np.cos((angle + 2 * pi * j) / 3) for j in range(3)], axis=0)
    assert gap.is_open and not gap.exact
    assert gap.lower <= (energies[1] - energies[0]).min() <= gap.upper + 1e-6


# ---- laws and refusals -----------------------------------------------------------------------------------------------


@settings(derandomize=True, deadline=None, max_examples=15)
@given(start=st.floats(0, 6.2), backwards=st.booleans(), times=st.integers(1, 3))
def test_gap_does_not_depend_on_how_the_loop_is_run(start, backwards, times):
    """Start, sense and number of rounds leave the set of Hamiltonians, hence min(2 D0, 4 d0) = .8, as it is."""
    cycle = ellipse(0.3, 0.4).started_at(start).repeated(times)
    gap = bulk_gap(rice_mele(cycle.reversed() if backwards else cycle))
    assert gap.lower <= 0.8 <= gap.upper + 1e-12
    assert gap.upper - gap.lower <= 0.008 + 1e-8


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"accuracy": 0.0}, "accuracy"),
        ({"accuracy": 1.0}, "accuracy"),
        ({"floor": 0.0}, "floor"),
        ({"floor": np.inf}, "floor"),
        ({"budget": 0}, "budget"),
    ],
)
def test_arguments_out_of_range_are_refused(options, message):
    """Common practice: a tolerance is positive and finite."""
    with pytest.raises(InputError, match=message):
        bulk_gap(rice_mele(ellipse(0.6, 0.6)), **options)


def test_pump_without_a_cell_is_refused():
    """A period of sqrt(2) never repeats (number theory), so there is no cell whose bands could be asked for."""
    with pytest.raises(NoBulkError, match="no cell that changes repeats"):
        bulk_gap(ModulatedChain(sites=60, onsite=[Wave(1.0, sqrt(2))]).pump())
