"""One look against dense linear algebra: every norm it calls proven, and every part of the split."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from scatterpump.solver.band import pack
from scatterpump.winding.look import Look, look

Complex = NDArray[np.complex128]
EPS = float(np.finfo(float).eps)


@dataclass(frozen=True, eq=False)
class Device:
    """A dense device A = E - H - Sigma with the columns W of its probe."""

    matrix: Complex
    probe: Complex

    @property
    def band(self) -> Complex:
        n = len(self.matrix)
        reach = np.abs(np.subtract.outer(np.arange(n), np.arange(n)))
        broad = np.abs(self.matrix) + np.abs(self.probe @ self.probe.conj().T)
        half = int(reach[broad > 0].max(initial=1))
        rows, columns = np.nonzero(reach <= half)
        return pack(rows, columns, self.matrix[rows, columns], n, half)

    @property
    def advanced(self) -> Complex:
        """B = A - i W W^+."""
        return np.asarray(self.matrix - 1j * self.probe @ self.probe.conj().T)

    def look(self) -> Look:
        found = look(0.7, self.band, self.probe)
        assert found is not None
        return found


def dimers(cells: int, *, contact: float, far: float, level: float, copies: int = 1, apart: float = 0.0) -> Device:
    """A dimerised chain with a bound state at either end, or several copies of it side by side, `apart` in energy.

    Odd sites have the energy `level` more than the even ones, so each end state sits on one kind of site.
    """
    n = 2 * cells
    one = np.zeros((n, n), dtype=complex)
    for x in range(n - 1):
        one[x, x + 1] = one[x + 1, x] = 0.5 if x % 2 == 0 else 1.5
    one += np.diag(level * (np.arange(n) % 2) + level / 2)
    whole = np.zeros((copies * n, copies * n), dtype=complex)
    probe = np.zeros((copies * n, copies), dtype=complex)
    for c in range(copies):
        whole[c::copies, c::copies] = -one + apart * c * np.eye(n)
        probe[c, c] = contact
        whole[(n - 1) * copies + c, (n - 1) * copies + c] += 0.5j * far**2
    return Device(whole + 0.5j * probe @ probe.conj().T, probe)


def disordered(seed: int, *, size: int = 60, channels: int = 2, half: int = 2) -> Device:
    rng = np.random.default_rng(seed)
    reach = np.abs(np.subtract.outer(np.arange(size), np.arange(size)))
    coupling = np.where(reach <= half, rng.normal(size=(size, size)) + 1j * rng.normal(size=(size, size)), 0)
    probe = np.zeros((size, channels), dtype=complex)
    mixed = np.linalg.qr(rng.normal(size=(half, half)) + 1j * rng.normal(size=(half, half)))[0]
    probe[:half] = mixed[:, :channels] * 10.0 ** -rng.uniform(0, 3, size=channels)
    matrix = coupling + coupling.conj().T + 0.5j * probe @ probe.conj().T
    matrix[-1, -1] += 0.5j * 10.0 ** -rng.uniform(0, 6)
    return Device(matrix, probe)


def at_level(device: Device, distance: float) -> Device:
    """Move a device so that its level nearest to E, closed off, lies `distance` from it."""
    hermitian = (device.matrix + device.matrix.conj().T) / 2
    levels = np.linalg.eigvalsh(hermitian)
    return Device(device.matrix + (distance - levels[np.abs(levels).argmin()]) * np.eye(len(levels)), device.probe)


GENERAL = [*map(disordered, range(25)), *(disordered(seed, size=12, channels=1, half=1) for seed in range(15))]
NARROW = [
    at_level(disordered(seed, channels=1 + seed % 2), 10.0**-exponent)
    for seed, exponent in enumerate((2, 3, 4, 5, 6, 7, 8, 9))
]
ENDS = [dimers(12, contact=c, far=f, level=v) for c in (1.0, 1e-2, 1e-4) for f in (1.0, 1e-3) for v in (0.3, 1e-5, 0.0)]
COPIES = [
    dimers(10, contact=c, far=0.5, level=v, copies=k, apart=d)
    for c in (1.0, 1e-2, 1e-4)
    for k in (2, 3)
    for v in (0.2, 0.0)
    for d in (0.0, 1e-12, 1e-6, 1e-2)
]
ALL = [*GENERAL, *NARROW, *ENDS, *COPIES]


@pytest.mark.parametrize("device", ALL)
def test_norms_of_the_inverses_are_upper_bounds(device: Device) -> None:
    seen = device.look()
    for bound, matrix in ((seen.g_norm, device.matrix), (seen.b_norm, device.advanced)):
        size, smallest = np.linalg.svd(matrix, compute_uv=False)[[0, -1]]
        # |A^-1| is one over the smallest singular value: textbook; a dense decomposition errs by a few eps |A|
        assert bound >= 1 / (smallest + 10 * EPS * size)
        assert bound <= 1.2 / smallest or smallest < 1e-6 * size


@pytest.mark.parametrize("device", ALL)
def test_reflection_and_columns_are_those_of_the_inverse(device: Device) -> None:
    seen, g, w = device.look(), np.linalg.inv(device.matrix), device.probe
    b = np.linalg.inv(device.advanced)
    reach = 1e3 * EPS * np.linalg.norm(device.matrix, 2)
    # derived: perturbing A by d changes G by less than |G|^2 d / (1 - |G| d)
    slack = reach * (1 + np.linalg.norm(g, 2) + np.linalg.norm(b, 2))
    left, right, left_b, right_b = (np.linalg.norm(x, 2) for x in (w.conj().T @ g, g @ w, w.conj().T @ b, b @ w))
    assert seen.out_columns == pytest.approx(left, rel=slack)
    assert seen.in_columns == pytest.approx(right, rel=slack)
    assert seen.a_columns * seen.b_columns == pytest.approx(min(left * right_b, left_b * right), rel=slack)
    # Fisher-Lee relation (citation from memory): r = -1 + i W^+ G W
    assert_allclose(seen.reflection, 1j * w.conj().T @ g @ w - np.eye(w.shape[1]), rtol=0, atol=slack * left * right)
    # derived: W^+ B^-1 = -r^-1 W^+ G
    other = -np.linalg.solve(seen.reflection, w.conj().T @ g)
    assert np.linalg.norm(other, 2) == pytest.approx(left_b, rel=slack / seen.smallest)


@pytest.mark.parametrize("device", ALL)
def test_split_parts_are_those_of_the_block_elimination(device: Device) -> None:
    seen = device.look()
    split = seen.split
    assert split is not None
    n, k = split.u.shape
    u, v, w = split.u, split.v, device.probe
    assert_allclose(u.conj().T @ u, np.eye(k), rtol=0, atol=1e-13)
    assert_allclose(v.conj().T @ v, np.eye(k), rtol=0, atol=1e-13)
    # the exact matrix that u, sigma, v belong to: A' = (1 - u u^+) A (1 - v v^+) + u sigma v^+
    rest = (np.eye(n) - u @ u.conj().T) @ device.matrix @ (np.eye(n) - v @ v.conj().T)
    exact = rest + u * split.sigma @ v.conj().T
    assert np.linalg.norm(device.matrix - exact, 2) <= split.noise
    # pseudo-inverse of what is left: textbook
    far = np.linalg.pinv(rest, rcond=1e-13)
    slack = 20 * split.noise * np.linalg.norm(far, 2)
    assert split.left == pytest.approx(np.linalg.norm(w.conj().T @ far, 2), rel=slack)
    assert split.right == pytest.approx(np.linalg.norm(far @ w, 2), rel=slack)
    background = 1j * w.conj().T @ far @ w - np.eye(w.shape[1])
    assert_allclose(split.far, background, rtol=0, atol=20 * split.noise * split.left * split.right + 1e-14)
    assert_allclose(split.into, w.conj().T @ v, rtol=0, atol=1e-14)
    assert_allclose(split.out, u.conj().T @ w, rtol=0, atol=1e-14)


@pytest.mark.parametrize("device", ALL)
def test_next_singular_value_is_a_lower_bound(device: Device) -> None:
    split = device.look().split
    assert split is not None
    n, k = split.u.shape
    values = np.linalg.svd(device.matrix, compute_uv=False)[::-1]
    size = values[-1]
    # interlacing of the eigenvalues of A^+ A under a change of rank k: H. Weyl (textbook)
    assert split.next_sigma <= values[k] + 10 * EPS * size
    assert split.next_sigma >= 0.1 * values[k]
    rest = (np.eye(n) - split.u @ split.u.conj().T) @ device.matrix @ (np.eye(n) - split.v @ split.v.conj().T)
    others = np.linalg.svd(rest, compute_uv=False)[: n - k]
    # derived: what rule S divides by is the smallest singular value of what is left, up to the noise
    assert split.next_sigma <= others[-1] + split.noise + 10 * EPS * size


@pytest.mark.parametrize("device", ALL)
def test_split_and_whole_tell_the_same_reflection(device: Device) -> None:
    seen = device.look()
    split = seen.split
    assert split is not None
    model = split.far + 1j * split.into @ np.diag(1 / split.sigma) @ split.out
    narrow = np.linalg.norm(split.into / split.sigma, 2) * np.linalg.norm(split.out / split.sigma[:, None], 2)
    rest = split.left * split.right + split.left * np.linalg.norm(split.out / split.sigma[:, None], 2)
    rest += split.right * np.linalg.norm(split.into / split.sigma, 2)
    # first order perturbation theory in the noise of either: textbook
    allowed = 2 * (seen.noise + split.noise) * (narrow + rest + seen.out_columns * seen.in_columns) + 1e-13
    assert_allclose(model, seen.reflection, rtol=0, atol=allowed)


@pytest.mark.parametrize("device", ALL)
def test_noise_is_of_the_order_of_rounding(device: Device) -> None:
    seen = device.look()
    size = np.linalg.norm(device.matrix, 2)
    # backward stability of Gaussian elimination (citation from memory), with the factor 20 that the proof allows for
    assert 20 * EPS * size * (1 - 1e-12) <= seen.noise <= 100 * EPS * size


@pytest.mark.parametrize("exponent", range(2, 11))
@pytest.mark.parametrize("copies", [1, 2, 3])
def test_narrow_levels_are_split_off_without_loss(exponent: int, copies: int) -> None:
    """A level of width 10^-exponent at E, or as many as there are copies: its vectors do not lose those digits."""
    device = dimers(16, contact=10 ** (-exponent / 2), far=1.0, level=0.0, copies=copies)
    split = device.look().split
    assert split is not None
    values = np.linalg.svd(device.matrix, compute_uv=False)[::-1]
    size = values[-1]
    assert len(split.sigma) == copies
    # derived: the end state has the weight 8/9 on the last site, and the singular value is half the width; dense ones
    # are accurate to a few eps |A|
    assert_allclose(np.sort(split.sigma), values[:copies], rtol=0, atol=10 * EPS * size)
    assert_allclose(split.sigma, 8 / 9 * 10.0**-exponent / 2, rtol=1e-2, atol=10 * EPS * size)
    assert split.noise <= 200 * EPS * size
    assert 0.6 * values[copies] <= split.next_sigma <= values[copies]
    # derived: all of r that comes from the resonance sits in the split-off part, with strength of order 1
    residue = np.abs(split.into @ np.diag(1 / split.sigma) @ split.out)
    assert_allclose(np.sort(np.linalg.svd(residue, compute_uv=False)), 2, rtol=0.05)


@settings(derandomize=True, deadline=None)
@given(st.integers(0, 10**6), st.integers(2, 30), st.integers(1, 3))
def test_looks_at_random_matrices(seed: int, size: int, channels: int) -> None:
    """Small ones too, where the trial space is the whole space."""
    rng = np.random.default_rng(seed)
    matrix = rng.normal(size=(size, size)) + 1j * rng.normal(size=(size, size))
    probe = np.linalg.qr(rng.normal(size=(size, size)))[0][:, : min(channels, size)] * 10.0 ** rng.uniform(-3, 0)
    device = Device(matrix + matrix.conj().T + 0.5j * probe @ probe.conj().T, probe.astype(complex))
    seen = device.look()
    values, others = (np.linalg.svd(m, compute_uv=False)[::-1] for m in (device.matrix, device.advanced))
    # |A^-1| is one over the smallest singular value: textbook
    assert 1 / seen.g_norm <= values[0] + 10 * EPS * values[-1]
    assert 1 / seen.b_norm <= others[0] + 10 * EPS * others[-1]
    # derived: without a drain B = A^+ and r is unitary
    assert_allclose(values, others, rtol=0, atol=1e-12 * values[-1])
    assert_allclose(np.linalg.svd(seen.reflection, compute_uv=False), 1, rtol=0, atol=1e-11 / values[0])
    assert seen.split is None or seen.split.next_sigma <= values[len(seen.split.sigma)] + 10 * EPS * values[-1]


def test_singular_devices_are_not_looked_at() -> None:
    """A site that nothing touches, at the energy E."""
    device = dimers(4, contact=0.5, far=0.5, level=0.0)
    matrix = np.zeros((9, 9), dtype=complex)
    matrix[:8, :8] = device.matrix
    probe = np.vstack([device.probe, np.zeros((1, 1))])
    # an empty row
    assert look(0.0, Device(matrix, probe).band, probe) is None
