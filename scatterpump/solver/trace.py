"""r(phi) as it was found: the samples a winding is read from."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["ReflectionTrace"]


@dataclass(frozen=True, eq=False)
class ReflectionTrace:
    """Scattering blocks of a pump at given phases, all in one and the same basis of lead modes.

    Attributes
    ----------
    phases : (n,) float array
        Radians, in the order asked for.
    reflection : (n, m, m) complex array
        r, out-mode by in-mode of the probe, in kwant's unit-current modes.  Their phases are arbitrary but the same for
        all phi: det r is comparable between phases, its overall phase has no meaning.
    transmission : (n, m', m) complex array
        t from the probe into all other leads, one below the other in the order of their numbers.
    evaluations : int
        Number of scattering problems solved.
    engine : str
        Which solver did it.
    energy : float
        Energy of the incoming electrons, in the pump's unit.
    """

    phases: NDArray[np.float64]
    reflection: NDArray[np.complex128]
    transmission: NDArray[np.complex128]
    evaluations: int
    engine: str
    energy: float

    @property
    def channels(self) -> int:
        """Number m of open modes of the probe."""
        return int(self.reflection.shape[-1])

    @property
    def determinant(self) -> NDArray[np.complex128]:
        """Det r, shape (n,)."""
        result: Any = np.linalg.det(self.reflection)
        return np.asarray(result, dtype=complex)

    @property
    def smallest(self) -> NDArray[np.float64]:
        """Smallest singular value of r, shape (n,): 1 where all is reflected, 0 where the winding is undefined."""
        return np.asarray(np.linalg.svd(self.reflection, compute_uv=False)[:, -1], dtype=float)

    @property
    def leakage(self) -> NDArray[np.float64]:
        """Largest transmission probability of any incoming state, |t|^2, shape (n,).

        Taken from t itself, not from 1 - |r|^2, so that it stays accurate far below rounding of 1.
        """
        if self.transmission.shape[1] == 0:
            return np.zeros(len(self.phases))
        return np.asarray(np.linalg.norm(self.transmission, ord=2, axis=(1, 2)) ** 2, dtype=float)
