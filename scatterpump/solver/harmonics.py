"""A periodic array as a few Fourier coefficients: f(phi) = sum_k c_k exp(i k phi).

Most pumps are trigonometric polynomials of low degree in phi.  Then 2K+1 samples say all there is to know, and the
bounds a proof needs on the change of H are exact.  The degree is found by doubling, and every candidate is verified
at angles that the fit has not seen.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
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
        waves = np.exp(1j * np.multiply.outer(np.asarray(phases, dtype=float), self.orders))
        return np.tensordot(waves, self.coefficients, axes=(-1, 0))

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
    size = np.abs(known).max(axis=0)
    checks, tolerance = known[3:], TOLERANCE * size + ROUNDING * size.max(initial=0.0) + 1e-300
    values, degree = known[:3], 1
    while True:
        found = Harmonics(np.fft.fftshift(np.fft.fft(values, axis=0) / len(values), axes=0))
        if (np.abs(found.at(CHECKS) - checks) <= tolerance).all():
            return found.trimmed(tolerance)
        degree *= 2
        if degree > HIGHEST:
            return None
        values = np.asarray(sample(_even(degree)), dtype=complex)


def _even(degree: int) -> NDArray[np.float64]:
    """Angles that determine a trigonometric polynomial of `degree`."""
    count = 2 * degree + 1
    return 2 * np.pi * np.arange(count) / count
