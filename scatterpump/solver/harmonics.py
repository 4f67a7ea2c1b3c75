"""A periodic array as a few Fourier coefficients: f(phi) = sum_k c_k exp(i k phi).

Most pumps are trigonometric polynomials of low degree in phi.  Then 2K+1 samples say all there is to know, and the
bounds a proof needs on the change of H are exact.  The degree is found by doubling, and every candidate is verified
at angles that the fit has not seen.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["HIGHEST", "Harmonics", "fit"]

CHECKS = 2 * np.pi * ((np.arange(64) + 0.5) * 0.6180339887498949 % 1)  # far from any even spacing
TOLERANCE = 1e-11
ROUNDING = 1e-15  # of the largest element: less than the noise that a look allows for
HIGHEST = 16


@dataclass(frozen=True, eq=False)
class Harmonics:
    """Fourier coefficients of a 2 pi-periodic array.

    Attributes
    ----------
    coefficients : (2K+1, ...) complex array
        c_-K ... c_K.
    """

    coefficients: NDArray[np.complex128]

    @property
    def degree(self) -> int:
        """The highest harmonic K."""
        return (len(self.coefficients) - 1) // 2

    @property
    def orders(self) -> NDArray[np.int64]:
        """-K ... K."""
        return np.arange(-self.degree, self.degree + 1)

    def at(self, phases: Any) -> NDArray[np.complex128]:
        """Return the array at each of `phases`, shape (n, ...)."""
        return np.asarray(self.values(phases), dtype=complex)

    def values(self, phases: Any) -> NDArray[Any]:
        """Return the same, as float64 if the array is real at all phases; an element's values lie together."""
        angles = np.multiply.outer(np.asarray(phases, dtype=float), self.orders)
        shape = self.coefficients.shape[1:]
        weights: NDArray[Any] = self.coefficients.reshape(len(self.coefficients), -1)
        waves: NDArray[Any] = np.exp(1j * angles)
        if self._halves is not None:
            ahead = angles[..., self.degree + 1 :]
            weights = self._halves
            waves = np.concatenate([np.ones((*angles.shape[:-1], 1)), np.cos(ahead), np.sin(ahead)], axis=-1)
        found: NDArray[Any] = (weights.T @ waves.reshape(-1, waves.shape[-1]).T).T
        return found.reshape(*angles.shape[:-1], *shape)

    @cached_property
    def _halves(self) -> NDArray[np.float64] | None:
        """Weights of 1, cos k phi and sin k phi of a real array, shape (2K+1, elements); None if it is complex."""
        c = self.coefficients.reshape(len(self.coefficients), -1)
        if not (c[::-1].conj() == c).all():
            return None
        ahead = c[self.degree + 1 :]
        return np.concatenate([c[[self.degree]].real, 2 * ahead.real, -2 * ahead.imag])

    def trimmed(self, tolerance: NDArray[np.float64]) -> Harmonics:
        """Return the same without outer harmonics of which no element exceeds its own `tolerance`."""
        above = (np.abs(self.coefficients) > tolerance).reshape(len(self.coefficients), -1).any(axis=1)
        large = np.flatnonzero(above)
        degree = int(np.abs(large - self.degree).max(initial=0))
        return Harmonics(self.coefficients[self.degree - degree : self.degree + degree + 1])

    def derivative(self) -> Harmonics:
        """Return d/dphi."""
        shape = (-1,) + (1,) * (self.coefficients.ndim - 1)
        return Harmonics(1j * self.orders.reshape(shape) * self.coefficients)


def fit(sample: Callable[[NDArray[np.float64]], NDArray[Any]]) -> Harmonics | None:
    """Find the Fourier coefficients of `sample`, or None if they do not end at degree 16.

    Parameters
    ----------
    sample : callable
        Phases in radians, shape (n,), to values of shape (n, ...).
    """
    known = np.asarray(sample(np.concatenate([_even(1), CHECKS])), dtype=complex)
    shape, known = known.shape[1:], known.reshape(len(known), -1)
    real = not known.imag.any()
    known = known.real if real else known
    varies = (known != known[0]).any(axis=0)
    size = np.abs(known[:, varies]).max(axis=0, initial=0.0)
    largest = np.abs(known[0]).max(initial=size.max(initial=0.0))
    checks, tolerance = known[3:, varies], TOLERANCE * size + ROUNDING * largest + 1e-300
    values, degree = known[:3, varies], 1
    while True:
        found = Harmonics(_coefficients(values, real))
        if (np.abs(found.values(CHECKS) - checks) <= tolerance).all():
            return _with_constants(found.trimmed(tolerance), known[0], varies, shape)
        degree *= 2
        if degree > HIGHEST:
            return None
        values = np.asarray(sample(_even(degree)), dtype=complex).reshape(2 * degree + 1, -1)[:, varies]


def _coefficients(values: NDArray[np.complex128], real: bool) -> NDArray[np.complex128]:
    """c_-K ... c_K from 2K+1 even samples; of real ones c_-k is the exact conjugate of c_k."""
    if not real:
        return np.asarray(np.fft.fftshift(np.fft.fft(values, axis=0) / len(values), axes=0))
    half = np.fft.rfft(values.real, axis=0) / len(values)
    return np.concatenate([half[:0:-1].conj(), half])


def _with_constants(
    found: Harmonics, known: NDArray[np.complex128], varies: NDArray[np.bool_], shape: tuple[int, ...]
) -> Harmonics:
    """Put the elements that never changed beside those that were fitted."""
    every = np.zeros((len(found.coefficients), len(known)), dtype=complex)
    every[found.degree] = known
    every[:, varies] = found.coefficients
    return Harmonics(every.reshape(len(every), *shape))


def _even(degree: int) -> NDArray[np.float64]:
    """Angles that determine a trigonometric polynomial of `degree`."""
    count = 2 * degree + 1
    return 2 * np.pi * np.arange(count) / count
