"""H along the cycle: values, slopes, and bounds on path lengths that must never fall short."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, Literal

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from scatterpump.cycle import Cycle
from scatterpump.solver.follow import follow as follow_many
from scatterpump.solver.path import Path, SampledPath, Slopes, StraightPath, TrigonometricPath

Entries = NDArray[np.complex128]
Floats = NDArray[np.float64]
TURN = 2 * np.pi
SIZE = 3
TRACE = {"a": [0.0, 1.0, 0.3, -1.0, 0.0], "b": [1.0, 0.0, -1.5, 0.2, 1.0]}


def follow(sample: Callable[[float], Entries], cycle: Cycle) -> Path:
    """Follow a Hamiltonian given phase by phase."""
    return follow_many(lambda phases: np.array([sample(float(phase)) for phase in phases]), cycle)


def norm(entries: Entries) -> float:
    return float(np.linalg.norm(entries.reshape(SIZE, SIZE), 2))


def norms(entries: Entries) -> Floats:
    """Spectral norms of a stack of matrices, shape (n, SIZE^2)."""
    return np.asarray(np.linalg.norm(entries.reshape(-1, SIZE, SIZE), 2, axis=(1, 2)))


def hermitian(rng: np.random.Generator) -> Entries:
    matrix = rng.normal(size=(SIZE, SIZE)) + 1j * rng.normal(size=(SIZE, SIZE))
    return np.asarray(matrix + matrix.conj().T).ravel()


class Wave:
    """A random Hermitian trigonometric polynomial sum_k A_k e^{ik phi} + h.c. with its exact derivatives."""

    def __init__(self, degree: int, seed: int) -> None:
        rng = np.random.default_rng(seed)
        self.degree, shape = degree, (degree + 1, SIZE, SIZE)
        sizes = rng.uniform(0.1, 1, size=(degree + 1, 1, 1))
        self.parts = (rng.normal(size=shape) + 1j * rng.normal(size=shape)) * sizes

    def __call__(self, phases: Any, order: int = 0) -> Entries:
        phases = np.asarray(phases, dtype=float)
        k = np.arange(self.degree + 1)
        waves = (1j * k) ** order * np.exp(1j * np.multiply.outer(phases, k))
        half = np.tensordot(waves, self.parts, axes=(-1, 0))
        full = half + np.swapaxes(half, -1, -2).conj()
        return np.asarray(full.reshape(*phases.shape, SIZE * SIZE))

    def length(self, start: float, end: float) -> tuple[float, float]:
        """Integral of |H'| by the trapezoid rule, and how far it may be off.

        For fixed unit vectors the integrand is smooth, so between points of distance h the norm lies at most
        h^2/8 sup|H'''| above its chord.
        """
        points = np.linspace(start, end, 1500)
        step = abs(end - start) / 1499
        error = abs(end - start) * step**2 / 8 * float(norms(self(np.linspace(0, TURN, 400), 3)).max()) * 1.1
        return abs(float(np.trapezoid(norms(self(points, 1)), points))), error


def linear(parts: dict[str, Entries], still: Entries, cycle: Cycle) -> Callable[[float], Entries]:
    return lambda phase: still + sum(value * parts[name] for name, value in cycle.at(phase).items())


def straight(cycle: Cycle, seed: int = 5) -> tuple[Callable[[float], Entries], StraightPath]:
    rng = np.random.default_rng(seed)
    sample = linear({"a": hermitian(rng), "b": hermitian(rng)}, hermitian(rng), cycle)
    path = follow(sample, cycle)
    assert isinstance(path, StraightPath)
    return sample, path


def one_sided(sample: Callable[[float], Entries], phase: float, side: int, step: float = 1e-5) -> Entries:
    return side * (sample(phase + side * step) - sample(phase)) / step


waves = st.builds(Wave, st.integers(1, 4), st.integers(0, 10**6))
phases = st.floats(0, TURN, exclude_max=True)
distances = st.floats(1e-3, np.pi)
sides = st.sampled_from([-1, 1])


@settings(derandomize=True, deadline=None, max_examples=60)
@given(waves, st.floats(-7, 13))
def test_trigonometric_path_knows_values_and_derivatives(wave: Wave, phase: float) -> None:
    path = follow(wave, Cycle.angle())
    assert isinstance(path, TrigonometricPath) and path.exact and path.corners.size == 0
    scale = np.abs(wave.parts).max()
    # derivative of e^{ik phi}: textbook
    assert_allclose(path.at(phase), wave(phase), rtol=0, atol=1e-12 * scale)
    for side in (-1, 1):
        assert_allclose(path.derivative(phase, side), wave(phase, 1), rtol=0, atol=1e-11 * scale)
        assert_allclose(path.derivative(phase, side, 2), wave(phase, 2), rtol=0, atol=1e-10 * scale)


@settings(derandomize=True, deadline=None, max_examples=60)
@given(waves, phases, distances, sides)
def test_trigonometric_lengths_are_upper_bounds(wave: Wave, start: float, distance: float, side: int) -> None:
    """Also where the stretch begins below 0 or ends above 2 pi."""
    slopes = follow(wave, Cycle.angle()).slopes(norm)
    end = start + side * distance
    found = float(slopes.length(start, np.array([end]))[0])
    integral, error = wave.length(start, end)
    # derived: |H(end) - H(start)| is at most the integral of |H'|, which the bound must exceed
    assert found >= integral - error
    assert found <= 1.1 * integral + 0.01 * distance * slopes.largest
    assert found >= norm(wave(end) - wave(start)) * (1 - 1e-12)


@settings(derandomize=True, deadline=None, max_examples=40)
@given(waves)
def test_trigonometric_bounds_hold_and_are_close(wave: Wave) -> None:
    slopes = follow(wave, Cycle.angle()).slopes(norm)
    first, second, third = (float(norms(wave(np.linspace(0, TURN, 1200), k)).max()) for k in (1, 2, 3))
    whole, error = wave.length(0.0, TURN)
    # Ehlich and Zeller's bound from a grid, Bernstein's inequality (citations from memory), against a fine grid
    assert first <= slopes.largest <= 1.02 * first
    assert second <= slopes.second <= 1.1 * second
    assert third <= slopes.third
    assert whole - error <= slopes.length(0.0, np.array([TURN]))[0] <= 1.03 * whole + error


@settings(derandomize=True, deadline=None, max_examples=30)
@given(waves, phases)
def test_lengths_add_up_round_the_cycle(wave: Wave, start: float) -> None:
    slopes = follow(wave, Cycle.angle()).slopes(norm)
    turn = slopes.length(0.0, np.array([TURN]))[0]
    ends = start + np.array([TURN, -TURN, np.pi, -np.pi])
    found = slopes.length(start, ends)
    # derived: a closed path has the same length from wherever it is begun, and forth and back make a whole
    assert_allclose(found[:2], turn, rtol=1e-12)
    assert found[2] + found[3] == pytest.approx(turn, rel=1e-12)
    assert (np.diff(slopes.length(start, start + np.linspace(0, np.pi, 200))) >= 0).all()


def test_opposite_phases_of_a_single_harmonic_are_told_apart() -> None:
    """H'(phi + pi) = -H'(phi) saves half the work; it must not be taken for H' having period pi."""
    wave = Wave(1, 8)
    path = follow(wave, Cycle.angle())
    # closed form
    assert_allclose(path.derivative(1.0 + np.pi, 1), -path.derivative(1.0, 1), rtol=0, atol=1e-12)
    slopes = path.slopes(norm)
    assert_allclose(slopes.left, norms(wave(slopes.nodes[:-1], 1)), rtol=1e-10)
    assert_allclose(slopes.right, norms(wave(slopes.nodes[1:], 1)), rtol=1e-10)


@pytest.mark.parametrize("centre", np.linspace(0.1, TURN, 15))
@pytest.mark.parametrize("width", [0.2, 0.4, 0.8])
def test_a_pulse_in_the_hamiltonian_is_not_taken_for_rest(centre: float, width: float) -> None:
    """A value function of phi may rest almost all round the cycle: what is called exact has to know the pulse."""
    still, moved = (hermitian(np.random.default_rng(seed)) for seed in (1, 2))

    def sample(phase: float) -> Entries:
        away = (phase - centre + np.pi) % TURN - np.pi
        return still + moved * (np.cos(np.pi * away / (2 * width)) ** 4 if abs(away) < width else 0.0)

    path = follow(sample, Cycle.angle())
    grid = np.linspace(0, TURN, 200)
    miss = max(float(np.abs(path.at(p) - sample(p)).max()) for p in grid.tolist())
    # derived: a function that vanishes on an interval is no trigonometric polynomial
    assert not path.exact
    assert miss < 1e-12
    assert path.slopes(norm).largest >= norm(moved) * np.pi / (2 * width) * 1.29  # sup of |d cos^4| is 1.299


@pytest.mark.parametrize("wall", [1.0, 1e4, 1e8])
@pytest.mark.parametrize("kind", ["round", "straight"])
def test_a_strong_still_element_does_not_hide_what_a_weak_one_does(kind: str, wall: float) -> None:
    """A hard wall inside the device must not coarsen what is called exact elsewhere."""
    cycle = Cycle.angle() if kind == "round" else Cycle.through({"phi": [0.0, 2.0, 1.0, 0.0]})
    still, moved = (hermitian(np.random.default_rng(seed)) for seed in (1, 2))
    still[0], moved[0] = wall, 0.0

    def sample(phase: float) -> Entries:
        return still + moved / (1.2 + np.cos(cycle.at(phase)["phi"]))

    path = follow(sample, cycle)
    miss = max(float(np.abs(path.at(p) - sample(p)).max()) for p in np.linspace(0, TURN, 50).tolist())
    # derived: this function has all harmonics, and no straight piece
    assert not path.exact
    assert miss < 1e-12 * max(1.0, wall)


def test_a_path_of_no_elements_is_trigonometric() -> None:
    """A device that takes nothing from its cycle has none that it drives."""
    path = follow_many(lambda phases: np.empty((len(phases), 0), dtype=complex), Cycle.angle())
    assert isinstance(path, TrigonometricPath)
    assert path.many(np.array([0.0, 1.0])).shape == (2, 0)


def test_an_element_that_is_rounding_does_not_spoil_an_exact_path() -> None:
    """Far below what a look allows for as noise."""
    wave = Wave(2, 3)
    wave.parts[:, 0, 0] = 0.0

    def sample(phase: float) -> Entries:
        rounding = np.zeros(SIZE * SIZE, dtype=complex)
        rounding[0] = np.cos(phase) ** 2 + np.sin(phase) ** 2 - 1
        return np.asarray(wave(phase) + rounding)

    # derived: cos^2 + sin^2 - 1 is 0, or the last digit of 1
    assert any(sample(phase)[0] != 0 for phase in np.linspace(0, 6, 50).tolist())
    assert follow(sample, Cycle.angle()).exact


@settings(derandomize=True, deadline=None)
@given(st.floats(-7, 13), sides)
def test_straight_path_knows_values_and_slopes(phase: float, side: int) -> None:
    sample, path = straight(Cycle.through(TRACE))
    assert path.exact
    # linear interpolation between the points: definition
    assert_allclose(path.at(phase), sample(phase), rtol=0, atol=1e-13)
    inside = np.abs((phase - path.corners + np.pi) % TURN - np.pi).min() > 1e-4
    if inside:
        assert_allclose(path.derivative(phase, side), one_sided(sample, phase, side), rtol=0, atol=1e-8)
    assert not path.derivative(phase, side, 2).any()


@pytest.mark.parametrize("start", [0.0, 1.1, -2.5])
@pytest.mark.parametrize("corner", range(4))
def test_slopes_at_a_corner_are_those_of_its_two_sides(corner: int, start: float) -> None:
    sample, path = straight(Cycle.through(TRACE).started_at(start))
    phase = float(path.corners[corner])
    for side in (-1, 1):
        # difference quotients of a straight line are exact
        assert_allclose(path.derivative(phase, side), one_sided(sample, phase, side), rtol=0, atol=1e-8)
    assert np.abs(path.derivative(phase, 1) - path.derivative(phase, -1)).max() > 0.1


@settings(derandomize=True, deadline=None)
@given(phases, distances, sides, st.sampled_from([0.0, 0.4, 3.3, -1.0]))
def test_straight_lengths_are_exact(phase: float, distance: float, side: int, start: float) -> None:
    sample, path = straight(Cycle.through(TRACE).started_at(start))
    slopes = path.slopes(norm)
    end = phase + side * distance
    low, high = min(phase, end), max(phase, end)
    laps = np.concatenate([path.corners + TURN * lap for lap in (-1, 0, 1)])
    stops = [low, *sorted(c for c in laps.tolist() if low < c < high), high]
    pieces = sum(norm(sample(b) - sample(a)) for a, b in zip(stops, stops[1:], strict=False))
    # length of a polygon: textbook
    assert float(slopes.length(phase, np.array([end]))[0]) == pytest.approx(pieces, rel=1e-10, abs=1e-12)


@pytest.mark.parametrize("offset", range(4))
@pytest.mark.parametrize("ulps", [-2, -1, 1, 2])
def test_a_start_that_misses_a_corner_by_rounding_keeps_its_sides_apart(offset: int, ulps: int) -> None:
    """Then a corner comes to lie a hair below 2 pi, or at 2 pi itself, which is 0."""
    start = float(Cycle.through(TRACE).corners[offset])
    for _ in range(abs(ulps)):
        start = float(np.nextafter(start, np.sign(ulps) * 10))
    sample, path = straight(Cycle.through(TRACE).started_at(start))
    assert (path.corners >= 0).all() and (path.corners < TURN).all()
    for side in (-1, 1):
        ahead = (side * path.corners) % TURN
        smooth = ahead[ahead > 0].min() > 1e-6
        # derived: up to the next corner strictly ahead the slope at 0 is the one that the path keeps
        assert not smooth or np.abs(path.derivative(0.0, side) - one_sided(sample, 0.0, side)).max() < 1e-8
    ends = np.array([-1e-3, 1e-3])
    exact = [norm(sample(float(end)) - sample(0.0)) for end in ends]
    assert_allclose(path.slopes(norm).length(0.0, ends), exact, rtol=1e-9)


def test_a_hamiltonian_that_bends_between_corners_is_only_estimated() -> None:
    cycle = Cycle.through(TRACE)
    rng = np.random.default_rng(4)
    parts = hermitian(rng), hermitian(rng)

    def sample(phase: float) -> Entries:
        values = cycle.at(phase)
        return np.asarray(values["a"] ** 2 * parts[0] + values["b"] * parts[1])

    path = follow(sample, cycle)
    assert isinstance(path, SampledPath) and not path.exact
    for corner in path.corners.tolist():
        for side in (-1, 1):
            # difference quotients
            assert_allclose(path.derivative(corner, side), one_sided(sample, corner, side), rtol=0, atol=1e-3)
    grid = np.linspace(0, TURN, 4001)
    lengths = np.cumsum([0.0, *(norm(sample(b) - sample(a)) for a, b in zip(grid, grid[1:], strict=False))])
    found = path.slopes(norm).length(0.0, grid)
    # a chord is never longer than the path; the estimate carries a safety factor of 2
    assert (found >= lengths * (1 - 1e-9)).all()
    assert found[-1] <= 2.1 * lengths[-1]


def test_a_spline_is_only_estimated_with_a_safety_factor() -> None:
    angle = np.linspace(0, TURN, 9)
    table = {"a": [*np.cos(angle[:-1]), 1.0], "b": [*(np.sin(angle[:-1]) + 0.2 * np.sin(3 * angle[:-1])), 0.0]}
    cycle = Cycle.through(table, curve="spline")
    rng = np.random.default_rng(6)
    sample = linear({"a": hermitian(rng), "b": hermitian(rng)}, hermitian(rng), cycle)
    path = follow(sample, cycle)
    assert isinstance(path, SampledPath) and not path.exact
    grid = np.linspace(0, TURN, 4001)
    steps = np.array([norm(sample(b) - sample(a)) for a, b in zip(grid, grid[1:], strict=False)])
    slopes = path.slopes(norm)
    # derived: with a factor of 2, differences on a grid as fine as this bound the rates of a smooth path
    assert slopes.largest >= steps.max() / grid[1]
    assert slopes.length(0.0, np.array([TURN]))[0] == pytest.approx(2 * steps.sum(), rel=0.02)
    assert_allclose(path.derivative(1.234, 1), one_sided(sample, 1.234, 1, 1e-6), rtol=0, atol=1e-4)
    bend = (sample(1.0 + 1e-4) - 2 * sample(1.0) + sample(1.0 - 1e-4)) / 1e-8
    assert norm(bend) <= slopes.second


@pytest.mark.parametrize(
    "cycle",
    [
        Cycle.ellipse(x=("a", 0.1, 0.7), y=("b", -0.2, 0.4)),
        Cycle.through(TRACE),
        Cycle.through(TRACE, curve="spline"),
    ],
    ids=["ellipse", "straight", "spline"],
)
@pytest.mark.parametrize("change", ["reversed", "repeated", "begun elsewhere", "all"])
def test_paths_of_cycles_derived_from_another(cycle: Cycle, change: str) -> None:
    moved, where, rate = {
        "reversed": (cycle.reversed(), lambda p: -p, -1),
        "repeated": (cycle.repeated(3), lambda p: 3 * p, 3),
        "begun elsewhere": (cycle.started_at(1.3), lambda p: p + 1.3, 1),
        "all": (cycle.reversed().repeated(2).started_at(0.7), lambda p: -2 * (p + 0.7), -2),
    }[change]
    rng = np.random.default_rng(7)
    parts, still = {"a": hermitian(rng), "b": hermitian(rng)}, hermitian(rng)
    path, base = (follow(linear(parts, still, c), c) for c in (moved, cycle))
    assert path.exact == base.exact and type(path) is type(base)
    for phase in (0.05, 2.2, 5.9):
        # chain rule: textbook
        assert_allclose(path.at(phase), base.at(where(phase)), rtol=0, atol=1e-12)
        side = int(np.sign(rate))
        assert_allclose(path.derivative(phase, 1), rate * base.derivative(where(phase), side), rtol=0, atol=1e-4)
    turn = np.array([TURN])
    whole, once = path.slopes(norm).length(0.0, turn)[0], base.slopes(norm).length(0.0, turn)[0]
    # derived: a path run k times is k times as long, whatever its direction or start
    assert whole == pytest.approx(abs(rate) * once, rel=0.03)


@settings(derandomize=True, deadline=None, max_examples=30)
@given(waves, st.lists(st.integers(0, SIZE * SIZE - 1), min_size=1, max_size=4, unique=True))
def test_some_elements_alone_move_as_they_did(wave: Wave, chosen: list[int]) -> None:
    path = follow(wave, Cycle.angle())
    part = path.only(np.array(chosen))
    values = wave(np.linspace(0, TURN, 200))
    mean = (wave.parts[0] + wave.parts[0].conj().T).ravel()
    assert_allclose(path.many(np.array([1.1, 7.0])), [path.at(1.1), path.at(7.0)], rtol=0, atol=1e-13)
    # derived: the moduli of the harmonics add up to at least what the element strays from its mean
    assert (path.variation() >= np.abs(values - mean).max(axis=0) * (1 - 1e-12)).all()
    assert_allclose(part.at(1.1), path.at(1.1)[chosen], rtol=0, atol=1e-13)
    assert_allclose(part.derivative(1.1, 1, 2), path.derivative(1.1, 1, 2)[chosen], rtol=0, atol=1e-12)


@given(
    heights=st.lists(st.floats(0, 50), min_size=2, max_size=9),
    excess=st.sampled_from([0.0, 1e-9, 0.3]),
    start=st.floats(-7, 7),
    side=st.sampled_from([-1, 1]),
    limit=st.floats(0, 60),
)
@settings(derandomize=True, deadline=None)
def test_reach_is_as_far_as_the_length_allows(
    heights: list[float], excess: float, start: float, side: Literal[-1, 1], limit: float
) -> None:
    values = np.array([*heights, heights[0]])
    nodes = np.linspace(0, 2 * np.pi, len(values))
    slopes = Slopes(nodes, values[:-1], values[1:], excess, 1.0, 1.0)
    reach = slopes.reach(start, side, limit)
    assert 0 <= reach <= np.pi
    assert slopes.length(start, np.array(start + side * reach)) <= limit
    if reach < np.pi:  # derived: a little farther on, and by a little more than rounding, the limit is passed
        beyond = slopes.length(start, np.array(start + side * min(np.pi, reach + 1e-6)))
        assert beyond >= limit - 1e-9 * (1 + limit)
