"""One look at the device: everything a single factorisation at one phi tells a proof.

Proven here (by Cholesky factorisations, in floating point with a rounding allowance): lower bounds on the smallest
singular values of A and of B = A - i Gamma, and on the next ones once the k smallest are split off.  Estimated only
to propose values for those proofs: the singular vectors, whose residual is handed on as part of `noise`.  Resting
on floating point: r and the columns W^+ G, G W are those of a matrix within `noise` of A; `noise` is 20 eps |A|
plus what the residuals show.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.band import (
    EPS,
    BandLU,
    apply,
    apply_adjoint,
    factor,
    gram,
    is_positive,
    pack,
    row_sum_norm,
    spectral_norm,
)

__all__ = ["ROUNDING", "Look", "Split", "inverse_norm", "look", "small_singular"]

Complex = NDArray[np.complex128]
BLOCK, DEPTH = 4, 3
LADDER = (0.99, 0.95, 0.88, 0.75, 0.6, 0.45, 0.3, 0.15)
ROUNDING = 20.0
REGULAR = 0.3


@dataclass(frozen=True, eq=False)
class Split:
    """The k smallest singular values taken out of A (k is the length of `sigma`).

    With A = U diag(sigma) V^+ and G_c = A^-1 without its k largest parts: left = W^+ G_c, right = G_c W, far = -1 +
    i W^+ G_c W, into = W^+ V_k, out = U_k^+ W.

    Attributes
    ----------
    sigma : (k,) float array
    u, v : (n, k) complex array
    next_sigma : float
        Proven lower bound on the (k+1)-th smallest singular value.
    left, right : float
        Spectral norms of W^+ G_c and G_c W.
    far : (m, m) complex array
    into, out : (m, k) and (k, m) complex array
    noise : float
        Norm of what the matrix these are exact for may differ from A by.
    """

    sigma: NDArray[np.float64]
    u: Complex
    v: Complex
    next_sigma: float
    left: float
    right: float
    far: Complex
    into: Complex
    out: Complex
    noise: float


@dataclass(frozen=True, eq=False)
class Look:
    """What is known at one phase.

    Attributes
    ----------
    phase : float
    reflection : (m, m) complex array
        r in the basis of W.
    g_norm, b_norm : float
        Proven upper bounds on |A^-1| and |B^-1|; infinite where no proof was found.
    a_columns, b_columns : float
        A pair whose product bounds |r^-1 r'| per unit of |H'|: |W^+ G| and |B^-1 W|, or |W^+ B^-1| and |G W|.
    out_columns, in_columns : float
        |W^+ G| and |G W|.
    noise : float
        Norm of what the matrix these are exact for may differ from A by.
    split : Split or None
    """

    phase: float
    reflection: Complex
    g_norm: float
    b_norm: float
    a_columns: float
    b_columns: float
    out_columns: float
    in_columns: float
    noise: float
    split: Split | None

    @property
    def smallest(self) -> float:
        """Smallest singular value of r."""
        return float(np.linalg.svd(self.reflection, compute_uv=False)[-1])


def look(phase: float, band: Complex, probe: Complex, *, splitting: bool = True) -> Look | None:
    """Evaluate A = `band` at `phase`; None if A or B is singular to the last digit.

    Parameters
    ----------
    band : (2b+1, n) complex array
    probe : (n, m) complex array
        Columns W of the probe's broadening.
    splitting : bool
        Whether to look for near-resonant levels to split off.
    """
    other = _advanced(band, probe)
    lu, lu_b = factor(band), factor(other)
    if lu is None or lu_b is None:
        return None
    right, left = lu.solve(probe), lu.solve(probe, adjoint=True)
    right_b, left_b = lu_b.solve(probe), lu_b.solve(probe, adjoint=True)
    if not all(np.isfinite(x).all() for x in (right, left, right_b, left_b)):
        return None
    reflection = 1j * (probe.conj().T @ right) - np.eye(probe.shape[1])
    pairs = [(spectral_norm(left), spectral_norm(right_b)), (spectral_norm(left_b), spectral_norm(right))]
    a_columns, b_columns = min(pairs, key=lambda pair: pair[0] * pair[1])
    size = row_sum_norm(band)
    noise = ROUNDING * EPS * size + _residual(band, right, probe) + _residual(other, right_b, probe)
    sigma, v = small_singular(band, lu)
    sigma_b, _ = small_singular(other, lu_b, damped=True)
    squared = gram(band)
    half = len(band) // 2
    g_norm = inverse_norm(squared, sigma[0], half)
    return Look(
        phase,
        reflection,
        g_norm,
        inverse_norm(gram(other), sigma_b[0], half),
        a_columns,
        b_columns,
        spectral_norm(left),
        spectral_norm(right),
        noise,
        _split(band, lu, squared, probe, sigma, v, noise, 1 / g_norm) if splitting else None,
    )


def _advanced(band: Complex, probe: Complex) -> Complex:
    """B = A - i W W^+."""
    touched = np.flatnonzero(probe.any(axis=1))
    columns = probe[touched]
    rows, across = np.meshgrid(touched, touched, indexing="ij")
    broadening = -1j * (columns @ columns.conj().T)
    inside = np.abs(rows - across) <= len(band) // 2  # beyond it the broadening is 0: the band holds all of it
    return np.asarray(band + pack(rows[inside], across[inside], broadening[inside], band.shape[1], len(band) // 2))


def _residual(band: Complex, solution: Complex, right: Complex) -> float:
    """Backward error of a solve: the smallest change of A that makes it exact."""
    return spectral_norm(apply(band, solution) - right) / max(spectral_norm(solution), 1e-300)


def small_singular(band: Complex, lu: BandLU, *, damped: bool = False) -> tuple[NDArray[np.float64], Complex]:
    """Upper estimates of the smallest singular values of A, with right vectors, from a Krylov space of (A^+ A)^-1.

    Where A is `damped` no value is so small against the next that it would be all that is left of the vectors.
    """
    n = band.shape[1]
    block = np.random.default_rng(11).standard_normal((n, min(BLOCK, n))).astype(complex)
    blocks = []
    for _ in range(DEPTH):
        block = lu.solve(lu.solve(block, adjoint=True))
        block = block / np.linalg.norm(block, axis=0) if damped else np.linalg.qr(block)[0]
        blocks.append(block)
    basis = np.linalg.qr(np.hstack(blocks))[0]
    _, sigma, v = np.linalg.svd(apply(band, basis), full_matrices=False)
    order = np.argsort(sigma)
    return sigma[order], basis @ v.conj().T[:, order]


def inverse_norm(squared: Complex, estimate: float, half: int) -> float:
    for share in LADDER:
        if is_positive(squared, (share * estimate) ** 2, half):
            return 1 / (share * estimate)
    return float("inf")


def _split(
    band: Complex,
    lu: BandLU,
    squared: Complex,
    probe: Complex,
    sigma: NDArray[np.float64],
    v: Complex,
    noise: float,
    proven: float,
) -> Split | None:
    candidates = sigma[: min(4, len(sigma))]
    if len(candidates) < 2:
        return None
    k = 1 + int(np.flatnonzero(candidates[1:] >= REGULAR * candidates[-1])[0])
    u, v, smallest = _refined(band, lu, v[:, :k])
    next_sigma = _next_sigma(squared, v, float(sigma[k]), len(band) // 2)
    residual = spectral_norm(apply(band, v) - u * smallest) + spectral_norm(apply_adjoint(band, u) - v * smallest)
    if smallest.max() + residual >= next_sigma:  # the levels split off need not be the smallest ones
        next_sigma = min(next_sigma, proven)
    if next_sigma == 0.0:
        return None
    right = _deflated(lu, probe, u, v, adjoint=False)
    left = _deflated(lu, probe, v, u, adjoint=True)
    return Split(
        smallest,
        u,
        v,
        next_sigma,
        spectral_norm(left),
        spectral_norm(right),
        1j * (probe.conj().T @ right) - np.eye(probe.shape[1]),
        probe.conj().T @ v,
        u.conj().T @ probe,
        noise + residual,
    )


def _refined(band: Complex, lu: BandLU, v: Complex) -> tuple[Complex, Complex, NDArray[np.float64]]:
    """Sharpen singular vectors by inverse iteration; u = A v / sigma alone loses as many digits as sigma is small."""
    for _ in range(2):
        u = np.linalg.qr(lu.solve(v, adjoint=True))[0]
        v = np.linalg.qr(lu.solve(u))[0]
    x, smallest, y = np.linalg.svd(u.conj().T @ apply(band, v))
    return u @ x, v @ y.conj().T, smallest


def _deflated(lu: BandLU, right: Complex, u: Complex, v: Complex, *, adjoint: bool) -> Complex:
    """G_c applied to `right`: what lies along u is taken out before, what lies along v after the solve.

    Solving with a nearly singular matrix errs along v only, so the projection leaves an accurate rest.
    """
    x = lu.solve(right - u @ (u.conj().T @ right), adjoint=adjoint)
    return x - v @ (v.conj().T @ x)


def _next_sigma(squared: Complex, v: Complex, estimate: float, half: int) -> float:
    """Proven lower bound on the (k+1)-th smallest singular value, 0 if none was found.

    If A^+ A + R is larger than mu^2 for an R of rank k, then by interlacing at most k singular values of A lie
    below mu.  R is made of the vectors v cut to the window that holds most of their weight, so that the matrix
    stays banded.
    """
    lifted = _lifted(squared, _localised(v), 10 * estimate**2)
    for share in LADDER:
        if is_positive(lifted, (share * estimate) ** 2, half):
            return share * estimate
    return 0.0


def _localised(v: Complex) -> Complex:
    """Rotate the vectors among themselves so that each sits in one place."""
    if v.shape[1] == 1:
        return v
    place = np.arange(len(v))[:, None]
    return np.asarray(v @ np.linalg.eigh(v.conj().T @ (place * v))[1])


def _lifted(lower: Complex, vectors: Complex, weight: float) -> Complex:
    windows = [_window(np.abs(vector) ** 2, len(lower) + 24) for vector in vectors.T]
    span = max(end - start for start, end in windows)
    result = np.zeros((max(len(lower), span), lower.shape[1]), dtype=complex)
    result[: len(lower)] = lower
    for vector, (start, end) in zip(vectors.T, windows, strict=True):
        piece = vector[start:end]
        for d in range(end - start):
            result[d, start : end - d] += weight * piece[d:] * piece[: end - start - d].conj()
    return result


def _window(weight: NDArray[np.float64], longest: int, share: float = 0.995) -> tuple[int, int]:
    """Shortest stretch that holds `share` of the weight, or the heaviest of length `longest`."""
    n = len(weight)
    total = np.concatenate([[0.0], np.cumsum(weight)])
    ends = np.searchsorted(total, total[:-1] + share * total[-1])
    lengths = np.where(ends <= n, ends - np.arange(n), n + 1)
    start = int(lengths.argmin())
    if lengths[start] <= longest:
        return start, start + int(lengths[start])
    longest = min(longest, n)
    start = int((total[longest:] - total[: n - longest + 1]).argmax())
    return start, start + longest
