"""Both elimination kernels against a dense solution of the whole block-tridiagonal matrix, by numpy's LAPACK."""

from __future__ import annotations

from typing import Any, Literal

import numpy as np
import pytest

from scatterpump.solver.elimination import Eliminated, eliminate, has_compiler

Kernel = Literal["numpy", "compiled"]
System = tuple[list[Any], list[Any], list[Any], list[Any]]

WIDTHS = [[2] * 6, [5, 10, 14, 16, 6], [3, 1, 4, 7, 2, 6], [12, 5, 9, 1, 10], [8] * 4, [11] * 3, [17, 33, 24]]
COUNT = 6  # not a multiple of the lanes


@pytest.fixture(params=["numpy", "numpy, all together", "compiled"])
def kernel(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> Kernel:
    if "together" in request.param:
        monkeypatch.setattr("scatterpump.solver.inverses.FEWEST", 1)
        return "numpy"
    if request.param == "compiled" and not has_compiler():
        pytest.skip("numba is not installed (extra `jit`)")
    return request.param


def system(widths: list[int], *, is_complex: bool, dense: bool, moves: bool, seed: int = 0) -> System:
    """Random blocks with an absorbing last one; couplings that pick elements, or dense ones."""
    rng = np.random.default_rng(seed)

    def numbers(*shape: int) -> Any:
        return rng.standard_normal(shape) + (1j * rng.standard_normal(shape) if is_complex else 0.0)

    def coupling(tall: int, wide: int) -> Any:
        kept = np.ones((tall, wide)) if dense else np.eye(tall, wide)[rng.permutation(tall)]
        return kept * numbers(COUNT if moves else 1, tall, wide)

    diagonal = [numbers(COUNT, w, w) + 2 * np.sqrt(w) * np.eye(w) for w in widths]
    diagonal[-1] = diagonal[-1] + 3j * np.eye(widths[-1])
    lower = [coupling(far, near) for near, far in zip(widths, widths[1:], strict=False)]
    upper = [coupling(near, far) for near, far in zip(widths, widths[1:], strict=False)]
    wanted = [rng.standard_normal((2, w)) + 1j * rng.standard_normal((2, w)) for w in widths]
    return diagonal, lower, upper, wanted


def dense_solution(diagonal: Any, lower: Any, upper: Any, wanted: Any) -> tuple[Any, Any]:
    """D_0 and T_0 by LAPACK's pivoted solver."""
    edges = np.cumsum([0] + [block.shape[1] for block in diagonal])
    whole = np.zeros((COUNT, edges[-1], edges[-1]), dtype=complex)
    places = [slice(*pair) for pair in zip(edges, edges[1:], strict=False)]
    for here, block in zip(places, diagonal, strict=True):
        whole[:, here, here] = block
    for near, far, down, up in zip(places, places[1:], lower, upper, strict=False):
        whole[:, far, near], whole[:, near, far] = down, up
    w, rows = edges[1], np.concatenate(wanted, axis=1)
    beyond = np.linalg.solve(whole[:, w:, w:], whole[:, w:, :w])
    return whole[:, :w, :w] - whole[:, :w, w:] @ beyond, rows[:, :w] - rows[:, w:] @ beyond


def close(found: Eliminated, block: Any, amplitudes: Any, tolerance: float) -> None:
    assert np.abs(found.block - block).max() <= tolerance * np.abs(block).max()
    assert np.abs(found.amplitudes - amplitudes).max() <= tolerance * np.abs(amplitudes).max()


@pytest.mark.parametrize("widths", WIDTHS, ids=str)
@pytest.mark.parametrize("is_complex", [False, True], ids=["real", "complex"])
@pytest.mark.parametrize(("dense", "moves"), [(False, False), (True, False), (False, True), (True, True)])
def test_a_dense_solver_finds_the_same(
    kernel: Kernel, widths: list[int], is_complex: bool, dense: bool, moves: bool
) -> None:
    diagonal, lower, upper, wanted = system(widths, is_complex=is_complex, dense=dense, moves=moves)
    real_below = 0 if is_complex else len(widths) - 1
    found = eliminate(diagonal, lower, upper, wanted, unit=1.0, real_below=real_below, kernel=kernel)
    # general-purpose reference: LAPACK through numpy.linalg.solve; digits are lost in proportion to the growth
    close(found, *dense_solution(diagonal, lower, upper, wanted), 1e-14 * found.growth.max() * max(widths))


def test_a_long_device_goes_on_in_real_arithmetic(kernel: Kernel) -> None:
    # derived: behind 40 blocks that damp, the open end is below rounding and nothing imaginary is left
    diagonal, lower, upper, wanted = system([3, 5] * 20, is_complex=False, dense=True, moves=False)
    lower, upper = [0.2 * block for block in lower], [0.2 * block for block in upper]
    found = eliminate(diagonal, lower, upper, wanted, unit=1.0, real_below=39, kernel=kernel)
    assert not found.block.imag.any()
    close(found, *dense_solution(diagonal, lower, upper, wanted), 1e-13 * found.growth.max())


def test_still_blocks_given_once_are_the_same_for_all(kernel: Kernel) -> None:
    diagonal, lower, upper, wanted = system([4, 6, 3], is_complex=True, dense=False, moves=False)
    diagonal[1] = np.broadcast_to(diagonal[1][:1], diagonal[1].shape)
    found = eliminate(diagonal, lower, upper, wanted, unit=1.0, real_below=0, kernel=kernel)
    close(found, *dense_solution(diagonal, lower, upper, wanted), 1e-13 * found.growth.max())


def test_nothing_wanted_gives_no_rows(kernel: Kernel) -> None:
    diagonal, lower, upper, _ = system([4, 2, 4], is_complex=True, dense=True, moves=False)
    found = eliminate(diagonal, lower, upper, None, unit=1.0, real_below=0, kernel=kernel)
    assert found.amplitudes.shape == (COUNT, 0, 4)


@pytest.mark.parametrize("w", [2, 5, 9])
def test_vanishing_pivots_of_a_healthy_block_cost_no_digits(kernel: Kernel, w: int) -> None:
    # derived: a block with a zero diagonal that is unitary has an inverse of size 1, but needs rows exchanged
    diagonal, lower, upper, wanted = system([3, w, 4], is_complex=True, dense=True, moves=False)
    lower[1], upper[1] = 0 * lower[1], 0 * upper[1]
    diagonal[1] = np.broadcast_to(np.roll(np.eye(w), 1, axis=0) + 0j, diagonal[1].shape)
    found = eliminate(diagonal, lower, upper, wanted, unit=1.0, real_below=0, kernel=kernel)
    assert found.growth.max() < 10
    close(found, *dense_solution(diagonal, lower, upper, wanted), 1e-13)


@pytest.mark.parametrize("distance", [1e-3, 1e-7, 1e-11])
def test_growth_tells_how_near_to_singular_a_block_was(kernel: Kernel, distance: float) -> None:
    # derived: the inverse of U diag(1, 1, d) U^+ has the largest element max |u_3|^2 / d
    diagonal, lower, upper, wanted = system([2, 3], is_complex=True, dense=True, moves=False)
    turn = np.linalg.qr(diagonal[1][0])[0]
    diagonal[1] = diagonal[1].copy()
    diagonal[1][2] = turn @ np.diag([1, 1, distance]) @ turn.conj().T
    found = eliminate(diagonal, lower, upper, wanted, unit=1.0, real_below=0, kernel=kernel)
    assert found.growth[2] == pytest.approx((np.abs(turn[:, 2]) ** 2).max() / distance, rel=1e-3)
    assert np.delete(found.growth, 2).max() < 1e3


@pytest.mark.parametrize("w", [2, 7, 12])
@pytest.mark.parametrize("bad", [np.nan, np.inf, None])
def test_what_is_not_finite_or_singular_is_flagged_in_its_own_system(kernel: Kernel, w: int, bad: float | None) -> None:
    # derived: no growth below a limit may hide a wrong answer, and the other systems are as they were
    diagonal, lower, upper, wanted = system([w] * 4, is_complex=True, dense=False, moves=False)
    healthy = eliminate(diagonal, lower, upper, wanted, unit=1.0, real_below=0, kernel=kernel)
    diagonal[2] = diagonal[2].copy()
    diagonal[3] = np.broadcast_to(1e3j * np.eye(w), diagonal[3].shape) if bad is None else diagonal[3]
    if bad is None:
        lower[2], upper[2] = 0 * lower[2], 0 * upper[2]
        diagonal[2][1] = 0.0
    else:
        diagonal[2][1, 1, 0] = bad
    with np.errstate(all="ignore"):
        try:
            found = eliminate(diagonal, lower, upper, wanted, unit=1.0, real_below=0, kernel=kernel)
        except np.linalg.LinAlgError:
            assert kernel == "numpy"
            return
    assert not found.growth[1] < 1e5
    if bad is not None:
        others = np.delete(np.arange(COUNT), 1)
        assert np.abs(found.block - healthy.block)[others].max() < 1e-13
