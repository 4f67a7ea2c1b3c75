"""A weak contact seen from behind a good one: identities for several channels, bounds on the leak by brute force."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest
import scipy.linalg
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from numpy.typing import NDArray
from scipy.optimize import minimize_scalar

from scatterpump.solver.band import apply, norm_bound, pack
from scatterpump.solver.folded import FoldedDevice
from scatterpump.solver.harmonics import Harmonics
from scatterpump.solver.path import Slopes, TrigonometricPath
from scatterpump.winding.damped import damped, sideways_slope
from scatterpump.winding.reference import Contact, Reference, survey

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
TURN = 2 * np.pi


@dataclass(frozen=True)
class Ladder:
    """Dimerised chains side by side, weakly coupled and disordered, driven round a loop.

    Contacts are the amplitudes of the probe's channels, which are mixtures of the rows; `far` is that of the drain.
    """

    contacts: tuple[float, ...]
    cells: int = 8
    far: float = 1.0
    disorder: float = 0.0
    radius: float = 0.5
    between: float = 0.0
    energy: float = 0.0
    seed: int = 0

    @property
    def rows(self) -> int:
        return len(self.contacts)


@cache
def device(ladder: Ladder) -> FoldedDevice:
    rng = np.random.default_rng(ladder.seed)
    length, rows = 2 * ladder.cells, ladder.rows
    n = length * rows
    along = np.kron(np.eye(length, k=1), np.eye(rows))
    flux = np.diag(np.exp(1j * rng.uniform(0, 2 * np.pi, size=rows - 1)), 1)
    across = ladder.between * np.kron(np.eye(length), flux)
    rest = -(along + along.T) + across + across.conj().T + np.diag(ladder.disorder * rng.uniform(-0.5, 0.5, size=n))
    signs = (-1.0) ** np.arange(length)
    delta, stagger = along * np.repeat(signs, rows)[:, None], np.diag(np.repeat(signs, rows))
    part = ladder.radius / 2 * (-(delta + delta.T) - 1j * stagger)
    band = np.abs(np.subtract.outer(np.arange(n), np.arange(n))) <= 2 * rows - 1
    places = np.nonzero(band)
    coefficients = np.array([part.conj().T[places], rest[places], part[places]])
    probe, drain = np.zeros((n, rows), dtype=complex), np.zeros((n, rows), dtype=complex)
    mixed = [np.linalg.qr(rng.normal(size=(rows, rows)) + 1j * rng.normal(size=(rows, rows)))[0] for _ in range(2)]
    probe[:rows], drain[n - rows :] = mixed[0] * ladder.contacts, mixed[1] * ladder.far
    path, half, hops = TrigonometricPath(Harmonics(coefficients)), 2 * rows - 1, np.repeat(np.arange(length), rows)
    closed = ladder.energy * np.eye(n) + 0.5j * (probe @ probe.conj().T + drain @ drain.conj().T)
    still = pack(*places, closed[places], n, half)
    return FoldedDevice(n, half, *places, path, still, probe, drain, hops, 0)


def dense(folded: FoldedDevice, phase: float) -> Complex:
    return apply(folded.matrix(phase), np.eye(folded.size, dtype=complex))


def scattering(folded: FoldedDevice, phase: float) -> tuple[Complex, Complex]:
    """Return r = -1 + i W^+ G W and t = W_d^+ G W."""
    right = np.linalg.solve(dense(folded, phase), folded.probe)
    return 1j * folded.probe.conj().T @ right - np.eye(folded.probe.shape[1]), folded.drain.conj().T @ right


def slopes_of(folded: FoldedDevice) -> Slopes:
    return folded.path.slopes(lambda entries: norm_bound(folded.band(entries)))


@cache
def behind_good_contact(ladder: Ladder, width: float = 2.0) -> tuple[FoldedDevice, Contact]:
    good, excess = device(ladder).with_broadening(width)
    return good, Contact(excess)


@cache
def surveyed(ladder: Ladder, need_winding: bool = True) -> Reference:
    good, contact = behind_good_contact(ladder)
    return survey(good, slopes_of(good), contact, goal=1e-7, need_winding=need_winding, budget=48)


def winding(folded: FoldedDevice) -> int:
    """Winding of det r = (-1)^m det B / det A by the zeros of both inside the unit circle of z = e^{i phi}."""
    assert isinstance(folded.path, TrigonometricPath)
    parts = [apply(folded.band(c), np.eye(folded.size, dtype=complex)) for c in folded.path.harmonics.coefficients]
    a = apply(folded.still, np.eye(folded.size, dtype=complex))
    b = a - 1j * folded.probe @ folded.probe.conj().T
    return zeros_inside(parts, b) - zeros_inside(parts, a)


def zeros_inside(parts: list[Complex], constant: Complex) -> int:
    """Number of zeros of det(-H_-1 + z (constant - H_0) - z^2 H_1) with |z| < 1, by a block companion matrix."""
    n = len(constant)
    one, none = np.eye(n), np.zeros((n, n))
    left = np.block([[none, one], [parts[0], parts[1] - constant]])
    right = np.block([[one, none], [none, -parts[2]]])
    alpha, beta = scipy.linalg.eigvals(left, right, homogeneous_eigvals=True)
    return int((np.abs(alpha) < np.abs(beta)).sum())


@cache
def largest_transmission(ladder: Ladder) -> float:
    """max |t|^2 over the cycle: an even grid, and a search for the top of every peak of |t| or |G|."""
    folded = device(ladder)

    def through(phase: float) -> float:
        return float(np.linalg.norm(scattering(folded, phase)[1], 2) ** 2)

    def closeness(phase: float) -> float:
        return float(np.linalg.svd(dense(folded, phase), compute_uv=False)[-1])

    grid, shifts = np.linspace(0, TURN, 150), 10.0 ** np.arange(-12, -1)
    found = [through(float(phase)) for phase in grid]
    near = np.array([closeness(float(phase)) for phase in grid])
    for i in np.flatnonzero((near[1:-1] <= near[:-2]) & (near[1:-1] <= near[2:])) + 1:
        top = minimize_scalar(closeness, bounds=(grid[i - 1], grid[i + 1]), method="bounded", options={"xatol": 1e-12})
        found += [through(float(top.x + shift)) for shift in (0.0, *shifts, *-shifts)]
    return max(found)


def contraction(rng: np.random.Generator, m: int, loss: float) -> tuple[Complex, Complex]:
    """Random r and t with r^+ r + t^+ t = 1 and |t|^2 <= loss."""
    u, v, w = (np.linalg.qr(rng.normal(size=(m, m)) + 1j * rng.normal(size=(m, m)))[0] for _ in range(3))
    lost = loss * rng.uniform(size=m)
    return (u * np.sqrt(1 - lost)) @ v, (w * np.sqrt(lost)) @ v


LADDERS = [
    *(Ladder((c,), cells=k) for c in (1.4, 0.3, 1e-2, 1e-3) for k in (3, 8, 16)),
    *(Ladder((c,), cells=8, energy=0.2, disorder=1.0, seed=s) for c in (0.7, 1e-2) for s in range(3)),
    *(Ladder((c, d), cells=6, between=0.3, seed=7) for c, d in ((1.0, 0.5), (1.0, 1e-2), (1e-2, 3e-3), (2.0, 1e-3))),
    *(Ladder((0.5, 0.1), cells=5, between=0.5, disorder=1.5, far=0.3, seed=s) for s in range(4)),
    *(Ladder((1.0, 0.3, 1e-2), cells=4, between=0.2, disorder=0.5, seed=s) for s in range(3)),
    *(Ladder((3e-3,), cells=4, far=f, energy=0.1) for f in (1.4, 1e-2)),
    *(Ladder((c, 0.1), cells=5, radius=0.9, between=0.1, seed=3) for c in (3.0, 0.2)),
]
several = st.lists(st.floats(0.02, 500), min_size=1, max_size=4).map(np.array)


@settings(derandomize=True, deadline=None)
@given(several, st.integers(0, 10**6))
def test_moebius_map_between_contacts_of_several_channels(excess: Floats, seed: int) -> None:
    rng = np.random.default_rng(seed)
    m, n = len(excess), len(excess) + 4
    h = rng.normal(size=(n, n)) + 1j * rng.normal(size=(n, n))
    w_good = np.linalg.qr(rng.normal(size=(n, n)) + 1j * rng.normal(size=(n, n)))[0][:, :m] * np.sqrt(2.0)
    w, drain = w_good / np.sqrt(excess), 0.5 * (rng.normal(size=(n, 2)) + 1j * rng.normal(size=(n, 2)))
    closed = 0.3 * np.eye(n) - h - h.conj().T + 0.5j * drain @ drain.conj().T
    blocks = []
    for columns in (w, w_good):
        right = np.linalg.solve(closed + 0.5j * columns @ columns.conj().T, columns)
        blocks.append((1j * columns.conj().T @ right - np.eye(m), drain.conj().T @ right))
    (r, t), (r_good, t_good) = blocks
    a = Contact(excess).a
    q, one = np.sqrt(1 - a**2), np.eye(m)
    inner = np.linalg.inv(one - a[:, None] * r_good)
    # derived: eliminating the broadening from the two Dyson equations
    assert_allclose(r, (r_good - np.diag(a)) @ inner * q / q[:, None], rtol=0, atol=1e-9)
    assert_allclose(t, t_good @ inner * q, rtol=0, atol=1e-9)
    assert Contact(excess).transparency == pytest.approx(float((1 - a**2).min()), rel=1e-9)


@settings(derandomize=True, deadline=None)
@given(several, st.integers(0, 10**6), st.one_of(st.just(0.0), st.floats(1e-290, 1)), st.floats(0, 0.3))
def test_amplified_leak_is_an_upper_bound(excess: Floats, seed: int, loss: float, error: float) -> None:
    rng = np.random.default_rng(seed)
    contact, m = Contact(excess), len(excess)
    r, t = contraction(rng, m, loss)
    shift = rng.normal(size=(m, m)) + 1j * rng.normal(size=(m, m))
    seen = r + error * shift / np.linalg.norm(shift, 2)
    actual = t @ np.linalg.inv(np.eye(m) - contact.a[:, None] * r) * np.sqrt(1 - contact.a**2)
    # derived: t = t_S (1 - a r_S)^-1 q, the inverse by the triangle inequality
    bound = contact.amplified(float(np.linalg.norm(t, 2) ** 2), seen, error)
    assert bound >= np.linalg.norm(actual, 2) ** 2 * (1 - 1e-9)


def test_amplified_leak_is_exact_for_one_channel() -> None:
    contact, r = Contact(np.array([40.0])), np.array([[0.8 * np.exp(0.3j)]])
    actual = 0.36 * (1 - contact.a**2) / np.abs(1 - contact.a * r[0, 0]) ** 2
    # closed form
    assert contact.amplified(0.36, r, 0.0) == pytest.approx(float(actual[0]), rel=1e-12)


@settings(derandomize=True, deadline=None)
@given(several, st.integers(0, 10**6), st.floats(0, 1))
def test_distance_from_the_segment_is_a_lower_bound(excess: Floats, seed: int, loss: float) -> None:
    contact = Contact(excess)
    r, _ = contraction(np.random.default_rng(seed), len(excess), loss)
    u = np.linspace(0, 1, 1501)
    true = np.linalg.svd(r - u[:, None, None] * np.diag(contact.a), compute_uv=False)[:, -1].min()
    # derived: singular values move no faster than the matrix (H. Weyl, textbook)
    assert true - 0.016 <= contact.off_segment(r) <= true + 1e-12


@pytest.mark.parametrize("ladder", LADDERS)
def test_good_contact_keeps_the_level_shift_and_the_channels(ladder: Ladder) -> None:
    actual, (good, contact) = device(ladder), behind_good_contact(ladder)
    change = dense(good, 1.0) - dense(actual, 1.0)
    # definition: only i/2 W W^+ is another, its columns stretched by sqrt(s_j) to one and the same width
    expected = 0.5j * (good.probe @ good.probe.conj().T - actual.probe @ actual.probe.conj().T)
    assert_allclose(change, expected, rtol=0, atol=1e-14)
    assert_allclose(good.probe, actual.probe * np.sqrt(contact.excess), rtol=1e-12)
    assert_allclose(good.probe.conj().T @ good.probe, 2.0 * np.eye(ladder.rows), rtol=0, atol=1e-14)


@pytest.mark.parametrize("alpha", [0.03, 0.14, 0.5])
@pytest.mark.parametrize("ladder", LADDERS[::3])
def test_damped_bound_on_what_gets_through(ladder: Ladder, alpha: float) -> None:
    """The argument of Combes and Thomas, on stretches to both sides of a look."""
    good, _ = behind_good_contact(ladder)
    slopes, phase = slopes_of(good), 1.1
    found = damped(good, good.matrix(phase), alpha, sideways_slope(good))
    assert found is not None
    assert found.through == pytest.approx(float(np.linalg.norm(scattering(good, phase)[1], 2)), rel=1e-6)
    scale = np.exp(alpha * good.distance)
    here = scale[:, None] * dense(good, phase) / scale
    # |A^-1| is one over the smallest singular value: textbook
    assert found.g_norm >= (1 - 1e-9) / np.linalg.svd(here, compute_uv=False)[-1]
    for distance in (1e-3, 0.03, 0.3):
        for side in (-1, 1):
            length = float(slopes.length(phase, np.array(phase + side * distance)))
            bound = found.at(distance, length)
            for end in phase + side * distance * np.array([0.5, 1.0]):
                moved = scale[:, None] * dense(good, float(end)) / scale - here
                # J. M. Combes, L. Thomas, Commun. Math. Phys. 34, 251 (1973) (citation from memory)
                assert np.linalg.norm(moved, 2) <= length + found.extra_rate * distance + found.noise
                assert bound >= np.linalg.norm(scattering(good, float(end))[1], 2)


@pytest.mark.parametrize("ladder", LADDERS)
def test_bounds_and_windings_of_a_survey_hold_at_the_actual_contact(ladder: Ladder) -> None:
    for need_winding in (True, False):
        leak = surveyed(ladder, need_winding).leak
        # derived: the damped bound on every stretch, carried over to the actual contact; here against brute force there
        assert largest_transmission(ladder) * (1 - 1e-9) <= leak <= 1
    good, _ = behind_good_contact(ladder)
    # argument principle: textbook complex analysis
    assert not surveyed(ladder).same_winding or winding(device(ladder)) == winding(good)


def test_surveys_are_worth_their_looks() -> None:
    found = [surveyed(ladder) for ladder in LADDERS]
    numbers = [winding(device(ladder)) for ladder in LADDERS[:24]]
    assert sum(seen.same_winding for seen in found) >= len(LADDERS) // 2
    assert sum(seen.leak < 0.5 for seen in found) >= len(LADDERS) // 3
    assert {1, 2} <= {abs(number) for number, seen in zip(numbers, found, strict=False) if seen.same_winding}
    assert all(seen.evaluations <= 48 and seen.needed <= seen.evaluations for seen in found)


@pytest.mark.parametrize(
    ("cells", "contact", "number"), [(3, 0.3, 1), (3, 0.1, 0), (3, 1e-3, 0), (4, 0.3, 1), (4, 0.05, 1), (4, 0.03, 0)]
)
def test_winding_that_a_weak_contact_loses_is_not_called_the_same(cells: int, contact: float, number: int) -> None:
    """In a short chain the level at the far end leaks more than a weak contact lets through: the winding is lost."""
    ladder = Ladder((contact,), cells=cells)
    good, _ = behind_good_contact(ladder)
    # argument principle: textbook complex analysis
    assert (winding(good), winding(device(ladder))) == (1, number)
    assert surveyed(ladder).same_winding is (number == 1)


def test_without_a_drain_nothing_leaks() -> None:
    good, contact = behind_good_contact(Ladder((0.1,)))
    closed = FoldedDevice(
        good.size,
        good.half,
        good.rows,
        good.columns,
        good.path,
        good.still,
        good.probe,
        good.drain[:, :0],
        good.distance,
        0,
    )
    seen = survey(closed, slopes_of(good), contact, goal=1e-7, need_winding=True, budget=10)
    # definition
    assert (seen.leak, seen.same_winding, seen.evaluations) == (0.0, True, 0)
