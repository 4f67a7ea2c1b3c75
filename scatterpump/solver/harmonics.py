"""A periodic array as a few Fourier coefficients: f(phi) = sum_k c_k exp(i k phi).

Most pumps are trigonometric polynomials of low degree in phi.  Then 2K+1 samples say all there is to know, and the
bounds a proof needs on the change of H are exact.  The degree is found by doubling, and every candidate is verified
at angles that the fit has not seen.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["HIGHEST", "Harmonics", "fit"]

CHECKS = tuple(2 * math.pi * ((i + 0.5) * 0.6180339887498949 % 1) for i in range(16))  # far from any even spacing
TOLERANCE = 1e-11
HIGHEST = 16


@dataclass(frozen=True, eq=False)
class Harmonics:
    """Fourier coefficients of a 2 pi-periodic array.

    Attributes
    ----------
    coefficients : (2K+1, ...) complex array
        c_-K ... c_K.
    evaluations : int
        Samples spent on finding and verifying them.
    """

    coefficients: NDArray[np.complex128]
    evaluations: int = 0

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

    def derivative(self) -> Harmonics:
        """Return d/dphi."""
        shape = (-1,) + (1,) * (self.coefficients.ndim - 1)
        return Harmonics(1j * self.orders.reshape(shape) * self.coefficients)


def fit(sample: Callable[[float], NDArray[Any]]) -> Harmonics | None:
    """Find the Fourier coefficients of `sample`, or None if they do not end at degree 16.

    Parameters
    ----------
    sample : callable
        phi in radians to an array whose shape does not depend on phi.
    """
    checks = [np.asarray(sample(phase), dtype=complex) for phase in CHECKS]
    scale = max(1e-300, *(float(np.abs(value).max(initial=0.0)) for value in checks))
    spent, degree = len(CHECKS), 0
    while degree <= HIGHEST:
        count = 2 * degree + 1
        angles = 2 * np.pi * np.arange(count) / count
        values = np.array([sample(float(angle)) for angle in angles], dtype=complex)
        spent += count
        found = Harmonics(np.fft.fftshift(np.fft.fft(values, axis=0) / count, axes=0), spent)
        if all(
            np.abs(found.at(p) - v).max(initial=0.0) < TOLERANCE * scale for p, v in zip(CHECKS, checks, strict=True)
        ):
            return found
        degree = max(1, 2 * degree)
    return None
