"""What the probe's modes see of the device: r and t from the wave that the device returns.

The device beyond the probe's hopping V is known as a load: U returns what enters.  With kwant's stabilised modes
u = (into, out) and l = (into_bare, out_bare) the outgoing amplitudes are

    s = -[U (i u_out - l_out) + (i u_out + l_out)]^-1 [U (i u_in - l_in) + (i u_in + l_in)],

which has no pole for a passive device: |U| <= 1 whatever levels it has.  r is the part of s that belongs to open modes.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.doubling import Load
from scatterpump.solver.layers import Border

__all__ = ["match"]

Complex = NDArray[np.complex128]


def match(probe: Border, device: Load) -> tuple[Complex, Complex]:
    """Return r, shape (n, m, m), and t, shape (n, k, m), of a device behind the probe's modes."""
    waves = device.returned
    outward = _times(waves, 1j * probe.out - probe.out_bare) + (1j * probe.out + probe.out_bare)
    inward = _times(waves, 1j * probe.into - probe.into_bare) + (1j * probe.into + probe.into_bare)
    amplitudes: Any = -np.linalg.solve(outward, inward)
    passed = np.zeros((len(amplitudes), device.passed.shape[1], probe.channels), dtype=complex)
    if device.passed.shape[1]:
        entering = probe.into_bare - 1j * probe.into + (probe.out_bare - 1j * probe.out) @ amplitudes
        passed = device.passed @ entering
    return np.asarray(amplitudes[:, : probe.channels]), passed


def _times(stack: Complex, matrix: Complex) -> Complex:
    """Product of each of many small matrices with one matrix, or with one each."""
    if matrix.ndim > 2:
        return np.asarray(stack @ matrix)
    return np.asarray((stack.reshape(-1, stack.shape[-1]) @ matrix).reshape(*stack.shape[:-1], matrix.shape[-1]))
