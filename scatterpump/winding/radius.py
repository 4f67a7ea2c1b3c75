"""How far around one look r stays invertible and its turning is known (arrays only).

Notation: x is an upper bound on |A(phi + s) - A_i|, the path length of H plus the noise of the look.

Rule L (path length).  r^-1 r' = -i W^+ B^-1 H' G W, so while x < 1/max(g, b) the matrix r_i^-1 r(phi + s) turns
every vector by at most w_a w_b ln((1 - g x)/(1 - b x)) / (b - g), with g = |G_i|, b = |B_i^-1| and w_a, w_b the
norms of the columns.  Below a right angle it is accretive, and then the principal arguments of its eigenvalues add
up to exactly the turn of det r.

Rule S (split).  With the k smallest singular values split off, r is close to r_m(s) = r_c + i X (S - sK)^-1 Y, a
rational function of s; Schur's complement bounds the rest, and where |r_m^-1| times that rest stays below 1, r_m^-1
r is accretive.  Then det r turns as det r_m does, whose zeros and poles are those of k x k pencils.  Near a
resonance of width gamma the rest is of order gamma: the reach does not shrink with the width.

Both are theorems in exact arithmetic about the matrix that the look is exact for; floating point enters through the
noise alone.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.band import spectral_norm
from scatterpump.winding.look import Look, Split

__all__ = ["RIGHT_ANGLE", "Model", "Rates", "length_limit", "split_reach"]

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
RIGHT_ANGLE = np.pi / 2 * (1 - 1e-6)
STEP = 1.1


def length_limit(seen: Look) -> float:
    """Return the largest path length x that rule L allows; 0 if there is none.

    The noise of the look has still to be taken off.
    """
    g, b, product = seen.g_norm, seen.b_norm, seen.a_columns * seen.b_columns
    if not np.isfinite(g + b):
        return 0.0
    if abs(b - g) < 1e-9 * g:
        b = g * (1 + 1e-9)
    # product log(1 + (b - g) x / (1 - b x)) / (b - g) = RIGHT_ANGLE, solved for x
    with np.errstate(over="ignore"):
        grown = np.expm1(RIGHT_ANGLE * (b - g) / max(product, 1e-300))
    end = 1 / (b + (b - g) / grown) if grown != 0 else 0.0
    return float(min(end * (1 - 1e-12), (1 - 1e-9) / max(g, b)))


@dataclass(frozen=True, eq=False)
class Rates:
    """How the split-off part of A changes to one side of the look.

    Attributes
    ----------
    core : (k, k) complex array
        K = U^+ H' V.
    into, out : float
        |H' V| and |U^+ H'|.
    curved : float
        |U^+ H'' V|.
    second, third : float
        Bounds on |H''| and |H'''|.
    """

    core: Complex
    into: float
    out: float
    curved: float
    second: float
    third: float


@dataclass(frozen=True, eq=False)
class Model:
    """A stand-in for r near one look whose turning is known in closed form.

    r_m(s) = far + i into (sigma - s core)^-1 out; without a split it is constant.
    """

    far: Complex
    sigma: Complex
    core: Complex
    into: Complex
    out: Complex

    @classmethod
    def constant(cls, reflection: Complex) -> Model:
        """Return the model that stays at `reflection`."""
        m = len(reflection)
        empty = np.zeros((0, 0), dtype=complex)
        return cls(reflection, empty, empty, np.zeros((m, 0), dtype=complex), np.zeros((0, m), dtype=complex))

    @classmethod
    def of(cls, split: Split, core: Complex) -> Model:
        """Return the model of a split look."""
        return cls(split.far, np.diag(split.sigma).astype(complex), core, split.into, split.out)

    def at(self, s: float) -> Complex:
        """Return r_m(s)."""
        if not len(self.sigma):
            return self.far
        return np.asarray(self.far + 1j * self.into @ np.linalg.solve(self.sigma - s * self.core, self.out))

    @cached_property
    def poles(self) -> Complex:
        """Where sigma - s core is singular; an s for every split level, in general complex."""
        if len(self.sigma) == 1:
            return np.array([self.sigma[0, 0] / self.core[0, 0] if self.core[0, 0] != 0 else 0.0], dtype=complex)
        return np.asarray(np.linalg.eigvals(np.linalg.pinv(self.core) @ self.sigma), dtype=complex)

    @property
    def zeros_part(self) -> Complex:
        """q_z(0) = sigma + i out far^-1 into, whose pencil with core has the zeros of det r_m."""
        return np.asarray(self.sigma + 1j * self.out @ np.linalg.solve(self.far, self.into))

    def turned(self, s: float) -> float:
        """Return the exact change of arg det r_m from 0 to s, in radians."""
        if not len(self.sigma):
            return 0.0
        zeros = np.linalg.eigvals(np.linalg.solve(self.zeros_part, self.core))
        poles = np.linalg.eigvals(np.linalg.solve(self.sigma, self.core))
        return float(np.angle(1 - s * zeros).sum() - np.angle(1 - s * poles).sum())


def split_reach(
    split: Split, rates: Rates, length: Callable[[Floats], Floats], side: int, limit: float
) -> tuple[float, float]:
    """Return how far to one side rule S holds, at most `limit` radians, and a floor of the singular values of r there.

    Parameters
    ----------
    length : callable
        Distances t >= 0 to bounds on the path length of H.
    side : +1 or -1
    """
    model = Model.of(split, rates.core)
    if limit <= 0 or not np.isfinite(model.zeros_part).all():
        return 0.0, 0.0
    ends = _pieces(model, side, limit)
    starts = np.concatenate([[0.0], ends[:-1]])
    floors = _floors(split, rates, model, length, side, starts, ends)
    failed = np.flatnonzero(floors <= 0)
    if failed.size == 0:
        return float(ends[-1]), float(floors.min())
    return float(starts[failed[0]]), float(floors[: failed[0]].min(initial=1.0))


def _pieces(model: Model, side: int, limit: float) -> Floats:
    """Ends of pieces of [0, limit], fine around the look itself and around the resonances of the model."""
    marks = [np.linspace(0.0, limit, 65)[1:], limit / 64 * 0.75 ** np.arange(48)]
    for pole in model.poles.tolist():
        centre, width = side * pole.real, max(abs(pole.imag), 1e-16)
        if np.isfinite(centre) and width < limit:
            grown = width * STEP ** np.arange(-18.0, np.log(4 * limit / width) / np.log(STEP))
            marks += [centre + grown, centre - grown, np.array([centre])]
    every = np.unique(np.concatenate(marks))
    return every[(every > 0) & (every <= limit)]


def _floors(
    split: Split,
    rates: Rates,
    model: Model,
    length: Callable[[Floats], Floats],
    side: int,
    starts: Floats,
    ends: Floats,
) -> Floats:
    """Check rule S on each piece: growing bounds at its far end, the model's resonance at its nearest point.

    Returns sigma_min(r_m) - |r - r_m|, a lower bound on the smallest singular value of r; 0 where the rule fails.
    """
    noise, rest = split.noise, split.next_sigma
    x = length(ends) + noise
    inside = x < rest * (1 - 1e-9)
    th = 1 / (1 - np.where(inside, x, 0.0) / rest)
    into = rates.into * ends + rates.second * ends**2 / 2 + noise
    out = rates.out * ends + rates.second * ends**2 / 2 + noise
    background = split.left * split.right * x * th
    change_in, change_out = split.left * into * th, split.right * out * th
    q_rest = rates.curved * ends**2 / 2 + rates.third * ends**3 / 6 + into * out * th / rest + noise
    q, x_over_q, y_over_q = _over_pieces(model.sigma, side * model.core, model.into, model.out, starts, ends)
    known = inside & (q > q_rest * (1 + 1e-9))
    room = np.where(known, 1 - q_rest / np.where(known, q, 1.0), 1.0)
    error = (
        background
        + x_over_q * y_over_q * q_rest / room
        + (change_in * y_over_q + x_over_q * change_out + change_in * change_out / np.where(known, q, 1.0)) / room
    )
    least = np.maximum(
        _by_zeros(model, side, starts, ends), _by_middles(model, side, starts, ends, x_over_q * y_over_q)
    )
    return np.where(known & (error < least * (1 - 1e-6)), least - error, 0.0)


def _by_zeros(model: Model, side: int, starts: Floats, ends: Floats) -> Floats:
    """Lower bound on sigma_min(r_m) over each piece, by Woodbury's formula for r_m^-1."""
    inverse = np.linalg.inv(model.far)
    z, x_over_z, _ = _over_pieces(model.zeros_part, side * model.core, inverse @ model.into, model.out, starts, ends)
    bound = spectral_norm(inverse) + np.where(z > 0, x_over_z, 0.0) * spectral_norm(model.out @ inverse)
    return np.where(z > 0, 1 / bound, 0.0)


def _by_middles(model: Model, side: int, starts: Floats, ends: Floats, square: Floats) -> Floats:
    """The same, by r_m in the middle of each piece; `square` bounds |X q^-1| |q^-1 Y|, which times |K| is its slope."""
    middles = side * (starts + ends) / 2
    q = model.sigma - middles[:, None, None] * model.core
    singular = np.abs(np.linalg.det(q)) == 0
    q[singular] = np.eye(len(model.sigma))
    values = model.far + 1j * model.into @ np.linalg.solve(q, np.broadcast_to(model.out, (len(q), *model.out.shape)))
    least = np.linalg.svd(values, compute_uv=False)[:, -1] - (ends - starts) / 2 * spectral_norm(model.core) * square
    return np.where(singular, 0.0, least)


def _over_pieces(
    constant: Complex, slope: Complex, left: Complex, right: Complex, starts: Floats, ends: Floats
) -> tuple[Floats, Floats, Floats]:
    """Bounds that hold over each piece t in [start, end], for q = constant - t slope.

    Returns a lower bound on the smallest singular value of q, and upper bounds on |left q^-1| and |q^-1 right|.
    For one split level q is a number and the nearest point of a straight line to 0 is known; else q^-1 is expanded
    around the middle of the piece.
    """
    if len(constant) == 1:
        a, k = complex(constant[0, 0]), complex(slope[0, 0])
        best = (a * np.conj(k)).real / max(abs(k) ** 2, 1e-300)
        q = np.abs(a - np.clip(best, starts, ends) * k)
        safe = np.maximum(q, 1e-300)
        return q, spectral_norm(left) / safe, spectral_norm(right) / safe
    middles, reach = (starts + ends) / 2, (ends - starts) / 2
    stack = constant - middles[:, None, None] * slope
    q = np.linalg.svd(stack, compute_uv=False)[:, -1] - reach * spectral_norm(slope)
    inverse = np.linalg.inv(np.where((q > 0)[:, None, None], stack, np.eye(len(constant))))
    room = np.maximum(1 - reach * np.maximum(_norms(slope @ inverse), _norms(inverse @ slope)), 1e-300)
    return q, _norms(left @ inverse) / room, _norms(inverse @ right) / room


def _norms(stack: Complex) -> Floats:
    return np.asarray(np.linalg.norm(stack, ord=2, axis=(-2, -1)), dtype=float)
