"""Turns read from samples: what is counted right, and what no counting can see."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from scatterpump.winding.unwrap import steps

Matrices = NDArray[np.complex128]
RNG_SEED = 20240229


def circle(intervals: int) -> NDArray[np.float64]:
    return np.linspace(0, 2 * np.pi, intervals + 1)


def unitary(size: int, seed: int) -> Matrices:
    rng = np.random.default_rng(seed)
    return np.linalg.qr(rng.normal(size=(size, size)) + 1j * rng.normal(size=(size, size)))[0]


def channels(turns: list[int], intervals: int) -> Matrices:
    """Return diagonal r(phi) whose channels turn as often as `turns` says, shape (intervals + 1, m, m)."""
    return np.exp(1j * np.multiply.outer(circle(intervals), turns))[:, :, None] * np.eye(len(turns))


def blaschke(points: NDArray[np.complex128], zeros: NDArray[np.complex128]) -> NDArray[np.complex128]:
    factors = (points[:, None] - zeros) / (1 - zeros.conj() * points[:, None])
    return np.prod(factors, axis=1)


def turns_of_function(values: NDArray[np.complex128]) -> float:
    return steps(values[:, None, None]).turns


@pytest.mark.parametrize("conjugated", [0, 2])
@pytest.mark.parametrize("count", [1, 3, 5])
def test_argument_principle_counts_zeros_inside_the_circle(count: int, conjugated: int) -> None:
    radii, angles = np.random.default_rng(RNG_SEED).uniform(size=(2, count + conjugated))
    zeros = 0.8 * np.sqrt(radii) * np.exp(2j * np.pi * angles)
    points = np.exp(1j * circle(400))
    values = blaschke(points, zeros[:count]) * blaschke(points, zeros[count:]).conj()
    # argument principle, textbook complex analysis: zeros less poles; common practice
    assert turns_of_function(values) == pytest.approx(count - conjugated, abs=1e-12)


@pytest.mark.parametrize(
    ("turns", "intervals", "read"),
    [(3, 5, -2), (3, 7, 3), (7, 13, -6), (7, 15, 7), (1, 3, 1), (-3, 7, -3), (-3, 5, 2), (5, 11, 5), (5, 9, -4)],
)
def test_too_few_samples_are_read_as_the_nearest_alias(turns: int, intervals: int, read: int) -> None:
    # sampling theorem, common practice: right if and only if there are more than two samples a turn
    assert turns_of_function(np.exp(1j * turns * circle(intervals))) == pytest.approx(read, abs=1e-12)


@settings(derandomize=True, deadline=None)
@given(turns=st.integers(-20, 20), spare=st.integers(1, 40))
def test_more_than_two_samples_a_turn_suffice(turns: int, spare: int) -> None:
    # sampling theorem, common practice
    assert turns_of_function(np.exp(1j * turns * circle(2 * abs(turns) + spare))) == pytest.approx(turns, abs=1e-10)


@pytest.mark.parametrize("copies", [2, 3, 5, 8])
def test_copies_of_a_channel_add_up_where_the_determinant_is_already_aliased(copies: int) -> None:
    reflection = channels([1] * copies, 3)
    determinant = np.linalg.det(reflection)
    # derived: each channel makes a third of a turn a step, so two copies move the determinant by more than half a turn
    assert turns_of_function(determinant) != pytest.approx(copies, abs=0.5)
    assert steps(reflection).turns == pytest.approx(copies, abs=1e-12)
    np.testing.assert_allclose(steps(reflection).largest, 2 * np.pi / 3, rtol=0, atol=1e-12)


@settings(derandomize=True, deadline=None)
@given(turns=st.lists(st.integers(-3, 3), min_size=1, max_size=5), seed=st.integers(0, 99))
def test_basis_of_lead_modes_does_not_matter(turns: list[int], seed: int) -> None:
    reflection = unitary(len(turns), seed) @ channels(turns, 9) @ unitary(len(turns), seed + 100)
    # derived: r_i^-1 r_j changes by a similarity only
    assert steps(reflection).turns == pytest.approx(sum(turns), abs=1e-9)


@settings(derandomize=True, deadline=None)
@given(turns=st.lists(st.integers(-3, 3), min_size=1, max_size=4), scale=st.floats(1e-6, 1e6))
def test_only_the_angle_counts(turns: list[int], scale: float) -> None:
    reflection = channels(turns, 9)
    # derived: a positive factor that depends on phi has no winding
    lossy = reflection * (scale * (1.5 + np.cos(circle(9))))[:, None, None]
    np.testing.assert_allclose(steps(lossy).turned, steps(reflection).turned, rtol=0, atol=1e-9)


@settings(derandomize=True, deadline=None)
@given(turns=st.lists(st.integers(-3, 3), min_size=1, max_size=4))
def test_reversed_order_turns_back(turns: list[int]) -> None:
    reflection = channels(turns, 9)
    # derived
    np.testing.assert_allclose(steps(reflection[::-1]).turned, -steps(reflection).turned[::-1], rtol=0, atol=1e-9)


def test_channels_that_cancel_still_show_their_steps() -> None:
    found = steps(channels([1, -1], 8))
    # derived: the determinant stands still while each channel makes an eighth of a turn a step
    np.testing.assert_allclose(found.turned, np.zeros(8), rtol=0, atol=1e-12)
    np.testing.assert_allclose(found.largest, np.full(8, np.pi / 4), rtol=0, atol=1e-12)
