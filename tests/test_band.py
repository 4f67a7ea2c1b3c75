"""Banded matrices against dense ones, and positivity proofs that must never claim too much."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.linalg
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from scatterpump.solver.band import (
    apply,
    apply_adjoint,
    factor,
    gram,
    is_positive,
    norm_bound,
    pack,
    row_sum_norm,
    spectral_norm,
)

Complex = NDArray[np.complex128]
EPS = float(np.finfo(float).eps)


def dense(band: Complex) -> Complex:
    """Write a band out, element by element, from its definition band[b + i - j, j] = A_ij."""
    half, n = len(band) // 2, band.shape[1]
    full = np.zeros((n, n), dtype=complex)
    for i in range(n):
        for j in range(max(0, i - half), min(n, i + half + 1)):
            full[i, j] = band[half + i - j, j]
    return full


def random_band(rng: np.random.Generator, n: int, half: int) -> Complex:
    i, j = np.nonzero(np.abs(np.subtract.outer(np.arange(n), np.arange(n))) <= half)
    return pack(i, j, rng.normal(size=len(i)) + 1j * rng.normal(size=len(i)), n, half)


def hermitian_band(rng: np.random.Generator, n: int, half: int) -> Complex:
    band = random_band(rng, n, half)
    full = dense(band)
    i, j = np.nonzero(np.abs(np.subtract.outer(np.arange(n), np.arange(n))) <= half)
    return pack(i, j, (full + full.conj().T)[i, j], n, half)


@st.composite
def bands(draw: st.DrawFn, hermitian: bool = False) -> Complex:
    n, half = draw(st.integers(1, 24)), draw(st.integers(0, 6))
    rng = np.random.default_rng(draw(st.integers(0, 10**6)))
    return (hermitian_band if hermitian else random_band)(rng, n, half)


@st.composite
def bands_and_vectors(draw: st.DrawFn) -> tuple[Complex, Complex]:
    band = draw(bands())
    rng = np.random.default_rng(draw(st.integers(0, 10**6)))
    size = (band.shape[1], draw(st.integers(0, 4)))
    return band, rng.normal(size=size) + 1j * rng.normal(size=size)


def lower_of(full: Complex, depth: int) -> Complex:
    """Return the lower form of a Hermitian matrix: lower[i - j, j] = M_ij."""
    lower = np.zeros((depth + 1, len(full)), dtype=complex)
    for d in range(min(depth + 1, len(full))):
        lower[d, : len(full) - d] = np.diag(full, -d)
    return lower


def random_positive(rng: np.random.Generator, n: int, half: int, smallest: float) -> tuple[Complex, Complex]:
    """Return a random band whose smallest singular value is about `smallest`, and its dense form."""
    band = random_band(rng, n, half)
    full = dense(band)
    level = scipy.linalg.eigvals(full)
    band[half] -= level[np.abs(level).argmin()] - smallest
    return band, dense(band)


def test_values_at_the_same_place_are_added() -> None:
    band = pack(np.array([0, 2, 2, 2]), np.array([0, 1, 1, 2]), np.array([1.0, 2j, 3.0, -1.0]), 3, 1)
    # definition of the band
    assert_allclose(dense(band), [[1, 0, 0], [0, 0, 0], [0, 3 + 2j, -1]], rtol=0, atol=0)


@settings(derandomize=True, deadline=None)
@given(bands_and_vectors())
def test_products_are_those_of_the_dense_matrix(case: tuple[Complex, Complex]) -> None:
    band, x = case
    # definition of the matrix product
    assert_allclose(apply(band, x), dense(band) @ x, rtol=0, atol=1e-12)
    assert_allclose(apply_adjoint(band, x), dense(band).conj().T @ x, rtol=0, atol=1e-12)


@settings(derandomize=True, deadline=None)
@given(bands_and_vectors())
def test_solutions_leave_no_residual(case: tuple[Complex, Complex]) -> None:
    band, right = case
    lu = factor(band)
    assert lu is not None
    full = dense(band)
    for adjoint, matrix in ((False, full), (True, full.conj().T)):
        x = lu.solve(right, adjoint=adjoint)
        # elimination with partial pivoting is backward stable up to its growth factor: J. H. Wilkinson, J. ACM 8,
        # 281 (1961) (citation from memory)
        scale = np.linalg.norm(full) * np.linalg.norm(x) + np.linalg.norm(right)
        assert np.linalg.norm(matrix @ x - right) <= 1e-13 * scale


def test_singular_to_the_last_digit_has_no_factors() -> None:
    band = random_band(np.random.default_rng(3), 6, 1)
    band[:, 2] = 0
    # an empty column
    assert factor(band) is None


@settings(derandomize=True, deadline=None)
@given(bands())
def test_gram_is_the_adjoint_times_the_matrix(band: Complex) -> None:
    full = dense(band)
    # definition; A^+ A has twice the half-bandwidth of A
    assert_allclose(gram(band), lower_of(full.conj().T @ full, len(band) - 1), rtol=0, atol=1e-11)


@settings(derandomize=True, deadline=None)
@given(bands(hermitian=True), st.floats(1e-14, 1e-2), st.sampled_from([-1, 1]))
def test_a_proof_of_positivity_means_positive(band: Complex, distance: float, side: int) -> None:
    """Proven wherever there is room beyond rounding, and never on the wrong side."""
    full, half = dense(band), len(band) // 2
    levels = np.linalg.eigvalsh(full)
    size = max(float(np.abs(levels).max()), float(np.abs(np.diag(full)).max()))
    lower = np.array(band[half:])
    lower[0] += size  # positive diagonal, as the callers have it
    shift = size + levels[0] + side * distance * size
    proven = is_positive(lower, shift)
    # Rump's theorem on Cholesky in floating point (S. M. Rump, BIT 46, 433 (2006), citation from memory)
    assert not (proven and side > 0)
    assert proven or side > 0 or distance < 100 * (2 * half + 4) ** 2 * EPS


@pytest.mark.parametrize("excess", [1e-13, 1e-12, 1e-9])
@pytest.mark.parametrize("n", [2, 5, 40, 300])
def test_a_shift_just_above_the_lowest_eigenvalue_is_never_proven(n: int, excess: float) -> None:
    lower = np.zeros((2, n), dtype=complex)
    lower[0], lower[1, :-1] = 2, -1
    lowest = 4 * np.sin(np.pi / (2 * (n + 1))) ** 2
    # spectrum of the discrete Laplacian, 4 sin^2(k pi / 2(n+1)): textbook
    assert not is_positive(lower, lowest * (1 + excess))
    assert is_positive(lower, lowest - 1e-12)


@pytest.mark.parametrize("seed", range(40))
def test_gram_matrices_near_singular_are_not_overrated(seed: int) -> None:
    rng = np.random.default_rng(seed)
    n, half = int(rng.integers(3, 60)), int(rng.integers(1, 5))
    band, full = random_positive(rng, n, half, 10 ** rng.uniform(-7, -1))
    smallest = scipy.linalg.svdvals(full)[-1]
    squared = gram(band)
    # eigenvalues of A^+ A are the squares of the singular values of A: textbook
    for excess in (1e-13, 1e-10, 1e-6, 1e-2):
        assert not is_positive(squared, (smallest * (1 + excess)) ** 2, half)
    resolved = np.sqrt(1e4 * EPS) * np.linalg.norm(full, 2)
    assert is_positive(squared, (0.9 * smallest) ** 2, half) or smallest < resolved


@pytest.mark.parametrize("place", [0, 3, 5])
def test_what_is_not_a_number_is_not_positive(place: int) -> None:
    lower = np.zeros((2, 6), dtype=complex)
    lower[0], lower[0, place] = 1, np.nan
    # a comparison with nan is false, so a pivot that is nan passes for one that is not negative
    assert not is_positive(lower, 0.0)
    assert not is_positive(np.ones((1, 4), dtype=complex), np.nan)


@settings(derandomize=True, deadline=None)
@given(bands())
def test_row_sums_bound_the_norm(band: Complex) -> None:
    full = np.abs(dense(band))
    # |A|_2^2 <= |A|_1 |A|_inf: textbook
    assert row_sum_norm(band) == pytest.approx(np.sqrt(full.sum(axis=0).max() * full.sum(axis=1).max()), rel=1e-13)
    assert row_sum_norm(band) >= np.linalg.norm(dense(band), 2) * (1 - 10 * EPS)


@pytest.mark.parametrize("shape", [(0, 3), (4, 0), (1, 1), (1, 5), (6, 1), (3, 3), (2, 7)])
def test_spectral_norm_of_any_shape(shape: tuple[int, int]) -> None:
    rng = np.random.default_rng(shape)
    matrix = rng.normal(size=shape) + 1j * rng.normal(size=shape)
    # largest singular value: definition
    largest = scipy.linalg.svdvals(matrix).max(initial=0.0) if matrix.size else 0.0
    assert spectral_norm(matrix) == pytest.approx(largest, rel=1e-14)


@settings(derandomize=True, deadline=None)
@given(bands(hermitian=True))
def test_norm_bound_holds_and_is_close(band: Complex) -> None:
    norm = float(np.linalg.norm(dense(band), 2))
    # definition of the spectral norm, here from a dense decomposition that is itself exact to a few eps
    assert norm * (1 - 10 * EPS) <= norm_bound(band) <= 1.1 * norm


@pytest.mark.parametrize("seed", range(12))
@pytest.mark.parametrize("kind", ["clean", "disordered", "one strong bond", "diagonal"])
def test_norm_bound_holds_where_the_estimate_is_hard(kind: str, seed: int) -> None:
    rng = np.random.default_rng(seed)
    n = int(rng.integers(100, 500))
    band = np.zeros((3, n), dtype=complex)
    level, bond = rng.normal(size=n), np.exp(2j * np.pi * rng.uniform(size=n - 1))
    if kind in ("disordered", "diagonal"):
        band[1] = 3 * level
    if kind != "diagonal":
        band[2, :-1], band[0, 1:] = bond, bond.conj()
    if kind == "one strong bond":
        band[2, n // 2] *= 1.5
        band[0, n // 2 + 1] *= 1.5
    norm = float(np.abs(scipy.linalg.eigvals_banded(band[1:], lower=True)).max())
    # definition of the spectral norm; localised and nearly degenerate extremes are hard for a short Krylov space
    assert norm * (1 - 10 * EPS) <= norm_bound(band) <= 1.1 * norm


def test_norm_of_nothing_is_nothing() -> None:
    # definition
    assert norm_bound(np.zeros((3, 7), dtype=complex)) == 0
