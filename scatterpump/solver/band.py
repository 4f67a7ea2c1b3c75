"""Banded matrices: solving with them, and proving that their singular values are not small (arrays only).

A matrix of n rows and half-bandwidth b is held as ``band``, shape (2b+1, n), with ``band[b + i - j, j] = A_ij``;
places outside the matrix are zero.  A Hermitian one is also held as ``lower``, shape (d+1, n), with ``lower[i - j,
j] = M_ij`` for i >= j.

A proof of positivity is one Cholesky factorisation.  If it runs through in floating point, M + E is positive
definite for some |E_ij| <= gamma sqrt(M_ii M_jj) with gamma = (d+3) eps, hence |E| <= gamma (2d+1) max M_ii; the
callers' shifts include that.

References: N. J. Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed., SIAM 2002, theorem 10.3; S. M.
Rump, BIT 46, 433 (2006) (citations from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = [
    "BandLU",
    "apply",
    "apply_adjoint",
    "factor",
    "gram",
    "is_positive",
    "norm_bound",
    "pack",
    "row_sum_norm",
    "spectral_norm",
]

Complex = NDArray[np.complex128]
SLENDER = 4
EPS = float(np.finfo(float).eps)


def pack(rows: NDArray[np.int64], columns: NDArray[np.int64], values: Complex, size: int, half: int) -> Complex:
    """Return the band of the matrix with `values` at (`rows`, `columns`); values at the same place are added."""
    band = np.zeros((2 * half + 1, size), dtype=complex)
    np.add.at(band, (half + rows - columns, columns), values)
    return band


def apply(band: Complex, vectors: Complex) -> Complex:
    """Return A x for `vectors` of shape (n, k)."""
    half, n = len(band) // 2, band.shape[1]
    padded = np.zeros((n + 2 * half, vectors.shape[1]), dtype=complex)
    for p in range(2 * half + 1):
        padded[p : p + n] += band[p][:, None] * vectors
    return padded[half : half + n]


def apply_adjoint(band: Complex, vectors: Complex) -> Complex:
    """Return A^+ x for `vectors` of shape (n, k)."""
    half, n = len(band) // 2, band.shape[1]
    padded = np.zeros((n + 2 * half, vectors.shape[1]), dtype=complex)
    padded[half : half + n] = vectors
    result = np.zeros((n, vectors.shape[1]), dtype=complex)
    for p in range(2 * half + 1):
        result += band[p].conj()[:, None] * padded[p : p + n]
    return result


@dataclass(frozen=True, eq=False)
class BandLU:
    """LU factors of a banded matrix, with partial pivoting (LAPACK gbtrf)."""

    factors: Complex
    pivots: NDArray[np.int32]
    half: int

    def solve(self, right: Complex, *, adjoint: bool = False) -> Complex:
        """Return A^-1 x, or A^-+ x, for `right` of shape (n, k)."""
        from scipy.linalg import lapack

        result, info = lapack.zgbtrs(self.factors, self.half, self.half, right, self.pivots, trans=2 if adjoint else 0)
        assert info == 0
        return np.asarray(result)


def factor(band: Complex) -> BandLU | None:
    """Factorise a banded matrix; None if it is singular to the last digit."""
    from scipy.linalg import lapack

    half, n = len(band) // 2, band.shape[1]
    storage = np.zeros((3 * half + 1, n), dtype=complex, order="F")
    storage[half:] = band
    factors, pivots, info = lapack.zgbtrf(storage, half, half, overwrite_ab=1)
    return None if info else BandLU(factors, pivots, half)


def gram(band: Complex) -> Complex:
    """Return A^+ A in lower form, shape (2b+1, n)."""
    width, n = band.shape
    lower = np.zeros((width, n), dtype=complex)
    for d in range(min(width, n)):
        lower[d, : n - d] = np.einsum("pj,pj->j", band[d:, : n - d], band[: width - d, d:].conj())
    return lower


def is_positive(lower: Complex, shift: float, half: int | None = None) -> bool:
    """Prove that M - `shift` is positive definite; False means that no proof was found.

    Parameters
    ----------
    lower : (d+1, n) complex array
        M, Hermitian.
    half : int, optional
        Half-bandwidth of the factors of a Gram matrix, whose own rounding is then allowed for as well.
    """
    from scipy.linalg import lapack

    d = len(lower) - 1
    largest = float(lower[0].real.max(initial=0.0))
    rounding = (d + 3) * (2 * d + 1) * EPS * max(largest, 0.0)
    if half is not None:
        rounding += (2 * half + 3) * (2 * d + 1) * EPS * largest
    moved = np.array(lower, order="F")
    moved[0] -= shift + rounding
    _, info = lapack.zpbtrf(moved, lower=1, overwrite_ab=1)
    return bool(info == 0 and np.isfinite(moved[0]).all())


def spectral_norm(matrix: NDArray[Any]) -> float:
    """Return the largest singular value of a dense matrix; 0 if it is empty."""
    if matrix.size == 0:
        return 0.0
    if 1 in matrix.shape:
        return float(np.sqrt(np.vdot(matrix, matrix).real))
    if max(matrix.shape) > SLENDER * min(matrix.shape):  # the largest eigenvalue of the small product, to rounding
        tall = matrix if matrix.shape[0] > matrix.shape[1] else matrix.conj().T
        return float(np.sqrt(max(0.0, np.linalg.eigvalsh(tall.conj().T @ tall)[-1])))
    return float(np.linalg.norm(matrix, ord=2))


def row_sum_norm(band: Complex) -> float:
    """Return sqrt(|A|_1 |A|_inf), an upper bound on the spectral norm."""
    half, n = len(band) // 2, band.shape[1]
    size, rows = np.abs(band), np.zeros(n + 2 * half)
    for p in range(2 * half + 1):
        rows[p : p + n] += size[p]
    return float(np.sqrt(size.sum(axis=0).max(initial=0.0) * rows.max(initial=0.0)))


def norm_bound(band: Complex) -> float:
    """Return a proven upper bound on the spectral norm of a Hermitian banded matrix, mostly within 1 %.

    A Lanczos estimate proposes a value, and the positivity of value - A and value + A proves it.
    """
    half = len(band) // 2
    ceiling = row_sum_norm(band)
    if ceiling == 0.0:
        return 0.0
    lower, estimate = band[half:], _lanczos_norm(band)
    for slack in (1.003, 1.01, 1.03, 1.1):
        value = slack * estimate
        if value < ceiling and all(is_positive(_shifted(sign * lower, value), 0.0) for sign in (1, -1)):
            return value
    return ceiling


def _shifted(lower: Complex, value: float) -> Complex:
    result = lower.copy()
    result[0] += value
    return result


def _lanczos_norm(band: Complex, steps: int = 24) -> float:
    n = band.shape[1]
    vector: Any = np.random.default_rng(7).standard_normal((n, 1)).astype(complex)
    basis, alphas, betas = [vector / np.linalg.norm(vector)], [], []
    for _ in range(min(steps, n)):
        ahead = apply(band, basis[-1])
        alphas.append(float(np.vdot(basis[-1], ahead).real))
        known = np.hstack(basis)
        ahead -= known @ (known.conj().T @ ahead)
        size = float(np.linalg.norm(ahead))
        if size < 1e-12 * abs(alphas[0] or 1.0):
            break
        betas.append(size)
        basis.append(ahead / size)
    k = len(alphas)
    tri = np.diag(alphas) + np.diag(betas[: k - 1], 1) + np.diag(betas[: k - 1], -1)
    return float(np.abs(np.linalg.eigvalsh(tri)).max())
