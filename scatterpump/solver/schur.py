"""Wide devices, phase by phase: what all leads see of the device, from one sparse Schur complement each.

With the Schur complement C of `augmented` on the ports, U = -(1 + 2i C) is the wave that the device returns to its
leads for each wave b - i f that enters, f and b being what a lead and the device lend each other.  A lead without
incoming waves answers (l_out - i u_out) s for (l_out + i u_out) s that leaves the device (`matching`, for kwant's
modes), so the probe sees the device with the other leads as its load.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.augmented import augmented
from scatterpump.solver.blocks import Blocks
from scatterpump.solver.complement import Complement, complement
from scatterpump.solver.doubling import Load, Scattering, behind
from scatterpump.solver.layers import Border

__all__ = ["SparseDevice"]

Numbers = NDArray[Any]  # float64 where all is real, else complex128
Complex = NDArray[np.complex128]


class SparseDevice:
    """A device and its leads as one sparse problem, analysed once.

    Parameters
    ----------
    blocks : Blocks
    borders : sequence of Border
        The leads, the probe first.
    analyse : callable
        Which factorisation is used; the default is the best that is installed.
    """

    def __init__(
        self, blocks: Blocks, borders: Sequence[Border], analyse: Callable[..., Complement] = complement
    ) -> None:
        self._matrix = augmented(blocks, borders)
        self._channels = borders[0].hop.shape[1]
        self._others = _others(borders[1:])
        self._analyse = analyse

    def load(self, elements: Numbers, *, transmission: bool) -> Load:
        """Return the device as the probe's load, for each row of `elements`, the moving elements of H."""
        found = self._general if np.iscomplexobj(elements) else self._real
        waves = np.stack([-2j * found.of(self._matrix.at(row)) for row in elements])
        waves -= np.eye(self._matrix.ports)
        near, far = np.split(waves, [self._channels], axis=1)
        device = Scattering(*np.split(near, [self._channels], axis=2), *np.split(far, [self._channels], axis=2))
        passed = self._others.passed if transmission else self._others.passed[:, :0]
        return behind(device, Load(self._others.returned, passed))

    @cached_property
    def _general(self) -> Complement:
        return self._analyse(self._matrix, symmetric=False)

    @cached_property
    def _real(self) -> Complement:
        """For real moving elements."""
        return self._analyse(self._matrix, symmetric=True) if self._matrix.is_symmetric else self._general


def _others(borders: Sequence[Border]) -> Load:
    """All leads but the probe as one load, and the open outgoing amplitudes that a wave leaving the device excites."""
    from scipy.linalg import block_diag

    size = sum(border.hop.shape[1] for border in borders)
    if not borders:
        return Load(np.zeros((1, 0, 0), dtype=complex), np.zeros((1, 0, 0), dtype=complex))
    excited = [np.linalg.inv(border.out_bare + 1j * border.out) for border in borders]
    returned = block_diag(
        *((border.out_bare - 1j * border.out) @ inverse for border, inverse in zip(borders, excited, strict=True))
    )
    passed = block_diag(*(inverse[: border.channels] for border, inverse in zip(borders, excited, strict=True)))
    assert returned.shape == (size, size)
    return Load(returned[None], passed[None])
