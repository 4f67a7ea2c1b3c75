"""How little reaches the drain, near one look: t with the decay of the gap built in (arrays only).

With D = diag(e^{alpha n}), n the number of hops from the probe, A^alpha = D A D^-1 is the same banded matrix with
hoppings times e^{+-alpha}, and t = W_R^+ G W = (W_R^+ D^-1) G^alpha W.  The first factor is as small as e^{-alpha
N}, so

    |t(phi_i + s)| <= |t_i| + |W_R^+ D^-1 G_i^alpha| |G_i^alpha W| x / (1 - g x),   x >= |A^alpha(phi_i + s) -
    A^alpha_i|,  g = |G_i^alpha|

is a small number as soon as g x < 1 (the argument of J. M. Combes, L. Thomas, Commun. Math. Phys. 34, 251 (1973),
citation from memory). g is proven by a Cholesky factorisation; t_i and the columns rest on floating point, whose
noise is part of x.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.band import EPS, apply, factor, gram, row_sum_norm, spectral_norm
from scatterpump.solver.folded import FoldedDevice
from scatterpump.winding.look import ROUNDING, inverse_norm, small_singular

__all__ = ["Damped", "damped", "sideways_slope"]

Complex = NDArray[np.complex128]


@dataclass(frozen=True)
class Damped:
    """Ingredients of the bound on |t| around one look.

    Attributes
    ----------
    alpha : float
        Damping per hop.
    through : float
        |t| at the look.
    growth, g_norm : float
        |W_R^+ D^-1 G^alpha| |G^alpha W| and the proven bound on |G^alpha|.
    extra_rate : float
        By how much alpha lets |A^alpha| change faster than |A|, per radian.
    noise : float
        Norm of what the matrix these are exact for may differ by.
    """

    alpha: float
    through: float
    growth: float
    g_norm: float
    extra_rate: float
    noise: float

    def at(self, distance: float, length: float) -> float:
        """Return the bound on |t| up to `distance` (radians) from the look, H's path there being at most `length`."""
        x = length + self.extra_rate * distance + self.noise
        return self.through + self.growth * x / (1 - self.g_norm * x) if self.g_norm * x < 1 else float("inf")


def damped(device: FoldedDevice, band: Complex, alpha: float, sideways: float) -> Damped | None:
    """Look at A^alpha, A = `band`; None if nothing can be proven about it.

    Parameters
    ----------
    sideways : float
        `sideways_slope` of the device.
    """
    scaled = _scaled(band, alpha * device.distance)
    lu = factor(scaled)
    if lu is None:
        return None
    hops = int(device.distance[np.abs(device.drain).max(axis=1) > 0].min())
    leaving = np.exp(-alpha * (device.distance - hops))[:, None] * device.drain
    right, left = lu.solve(device.probe), lu.solve(leaving, adjoint=True)
    estimate, _ = small_singular(scaled, lu)
    g_norm = inverse_norm(gram(scaled), float(estimate[0]), len(band) // 2)
    if not (np.isfinite(g_norm) and np.isfinite(right).all() and np.isfinite(left).all()):
        return None
    small = float(np.exp(-alpha * hops))
    residual = spectral_norm(apply(scaled, right) - device.probe) / max(spectral_norm(right), 1e-300)
    return Damped(
        alpha,
        small * spectral_norm(leaving.conj().T @ right),
        small * spectral_norm(left) * spectral_norm(right),
        g_norm,
        2 * float(np.sinh(alpha)) * sideways,
        ROUNDING * EPS * row_sum_norm(scaled) + residual,
    )


def sideways_slope(device: FoldedDevice) -> float:
    """Return a bound on the part of |H'| that leads one hop outward: the part that damping multiplies by e^alpha."""
    outward = device.distance[device.rows] > device.distance[device.columns]

    def norm(entries: Complex) -> float:
        return row_sum_norm(device.band(np.where(outward, entries, 0)))

    return device.path.slopes(norm).largest


def _scaled(band: Complex, exponents: NDArray[Any]) -> Complex:
    """Band of D A D^-1 with D = diag(exp(exponents))."""
    half, n = len(band) // 2, band.shape[1]
    result = np.zeros_like(band)
    for p in range(2 * half + 1):
        columns = np.arange(max(0, half - p), min(n, n + half - p))
        result[p, columns] = band[p, columns] * np.exp(exponents[columns + p - half] - exponents[columns])
    return result
