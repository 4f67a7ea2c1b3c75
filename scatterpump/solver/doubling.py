"""Runs of equal cells: n of them in log2 n joins, and endlessly many (arrays only).

A cell A psi = R f + L b feels its left neighbour through f and its right one through b, where V = L R^+ is the hopping
from a cell to the next, H_n,n+1.  With absorbing ports, A' = A + i R R^+ + i L L^+, and waves a = (R^+ psi - i f,
b + i L^+ psi) coming in, o = (R^+ psi + i f, b - i L^+ psi) going out,

    S = [[2i R^+ X R - 1, 2 R^+ X L], [2 L^+ X R, 1 - 2i L^+ X L]],     X = A'^-1,

is unitary for a Hermitian cell, whatever levels it has: nothing here has a pole.  Two cells join by the star product
(R. Redheffer, J. Math. Phys. (MIT) 41, 1 (1962), citation from memory); what lies to the right of a cell is a load that
returns U times the wave that enters it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.blocks import picked
from scatterpump.solver.elimination import EliminatedSingle, backward

__all__ = [
    "Load",
    "Scattering",
    "behind",
    "closed_by",
    "closed_by_pair",
    "endless",
    "join",
    "ports",
    "repeated",
    "segment",
]

Numbers = NDArray[Any]  # float64 where all is real, else complex128
Complex = NDArray[np.complex128]
SQUARINGS = 60
FAINT = 1e-17


@dataclass(frozen=True, eq=False)
class Scattering:
    """S of a stretch, for n systems: left and right ports of k and k' waves.

    Attributes
    ----------
    left, back : (n, k, k) and (n, k, k') complex arrays
        S_11, S_12: what leaves to the left.
    forth, right : (n, k', k) and (n, k', k') complex arrays
        S_21, S_22: what leaves to the right.
    """

    left: Complex
    back: Complex
    forth: Complex
    right: Complex

    @property
    def passing(self) -> float:
        """Largest product of the elements that pass to and fro: how much the far side can matter."""
        return float((_largest(self.back) * _largest(self.forth)).max())


@dataclass(frozen=True, eq=False)
class Load:
    """What lies beyond a port.

    Attributes
    ----------
    returned : (n, k, k) complex array
        U: wave that comes back for each wave that enters.
    passed : (n, m, k) complex array
        The wanted amplitudes for each wave that enters.
    """

    returned: Complex
    passed: Complex


def segment(
    diagonal: Sequence[Numbers], lower: Sequence[Numbers], upper: Sequence[Numbers], near: Numbers, far: Numbers
) -> Scattering:
    """S of layers in a row.

    Parameters
    ----------
    diagonal : L arrays of shape (n or 1, w_i, w_i)
    lower, upper : L-1 arrays of shape (n or 1, w_i+1, w_i) and (n or 1, w_i, w_i+1)
    near, far : (n or 1, w_0, k) and (n or 1, w_L-1, k') arrays
        R on the first layer and L on the last.
    """
    blocks: list[Numbers] = list(diagonal)
    blocks[0] = blocks[0] + 1j * near @ _adjoint(near)
    blocks[-1] = blocks[-1] + 1j * far @ _adjoint(far)
    entering, leaving, met = far, _adjoint(far), np.zeros((1, 1, 1), dtype=complex)
    inverse: Complex = np.asarray(np.linalg.inv(blocks[-1]))
    here = blocks[-1]
    for n in range(len(blocks) - 2, -1, -1):
        reached = inverse @ entering
        met = met + leaving @ reached
        picks = picked(upper[n]), picked(lower[n].swapaxes(1, 2))
        here, leaving = backward(blocks[n], lower[n], upper[n], inverse, leaving, picks)
        entering = -upper[n] @ reached
        inverse = np.asarray(np.linalg.inv(here))
    seen, reached = inverse @ near, inverse @ entering
    one, other = np.eye(near.shape[-1]), np.eye(far.shape[-1])
    return Scattering(
        2j * _adjoint(near) @ seen - one,
        2 * _adjoint(near) @ reached,
        2 * leaving @ seen,
        other - 2j * (met + leaving @ reached),
    )


def ports(hopping: Numbers) -> tuple[Numbers, Numbers]:
    """R and L of V = L R^+, shape (n or 1, w, w'), with a wave for each orbital touched, on the side that has fewer."""
    size = float(np.abs(hopping).max(initial=0.0)) ** 0.5 or 1.0
    rows, columns = (np.flatnonzero(hopping.any(axis=(0, axis))) for axis in (2, 1))
    if len(rows) <= len(columns):
        return _adjoint(hopping[:, rows, :]) / size, size * np.eye(hopping.shape[1])[None, :, rows]
    return size * np.eye(hopping.shape[2])[None, :, columns], hopping[:, :, columns] / size


def closed_by(block: Numbers, near: Numbers, amplitudes: Complex) -> Load:
    """What lies beyond a port R = `near` on a layer whose Schur complement is D = `block`, with T = `amplitudes`."""
    reached: Numbers = np.linalg.solve(block + 1j * near @ _adjoint(near), near + 0j)
    return Load(2j * _adjoint(near) @ reached - np.eye(near.shape[-1]), 1j * amplitudes @ reached)


def closed_by_pair(found: EliminatedSingle, near: Complex, amplitude: bool) -> Load:
    """The same for a layer of one unknown, from the pair D = p/q, without dividing by q."""
    kept = found.passed if amplitude else np.zeros((0, len(found.p)))
    total = found.p + 1j * (near @ _adjoint(near)).item() * found.q
    response: Complex = (found.q / total)[:, None, None].astype(complex)
    return Load(
        np.asarray(2j * _adjoint(near) * response * near - np.eye(near.shape[1]), dtype=complex),
        np.asarray(np.moveaxis(np.atleast_2d(1j * kept / total), 0, -1)[..., None] * near),
    )


def behind(stretch: Scattering, load: Load) -> Load:
    """The stretch with the load beyond it, as a load."""
    one = np.eye(stretch.right.shape[-1])
    inside = np.linalg.solve(one - stretch.right @ load.returned, stretch.forth)
    return Load(stretch.left + stretch.back @ (load.returned @ inside), load.passed @ inside)


def join(a: Scattering, b: Scattering) -> Scattering:
    """Two stretches in a row, `a` on the left."""
    k = a.right.shape[-1]
    both = np.concatenate([a.forth, a.right @ b.back], axis=-1)
    between = np.linalg.solve(np.eye(k) - a.right @ b.left, both)
    first, second = between[..., : a.forth.shape[-1]], between[..., a.forth.shape[-1] :]
    return Scattering(
        a.left + a.back @ (b.left @ first),
        a.back @ (b.back + b.left @ second),
        b.forth @ first,
        b.right + b.forth @ second,
    )


def repeated(cell: Scattering, count: int, load: Load) -> Load:
    """`count` equal cells with the load beyond them."""
    while count > 0:
        if count % 2:
            load = behind(cell, load)
        count //= 2
        if count and cell.passing < FAINT:  # what lies behind one cell of this size no longer matters
            return Load(cell.left, np.zeros_like(load.passed))
        if count:
            cell = join(cell, cell)
    return load


def endless(cell: Scattering) -> tuple[Load, NDArray[np.bool_]]:
    """Endlessly many equal cells, and for which systems nothing passes through them: elsewhere there is no answer."""
    for _ in range(SQUARINGS):
        if cell.passing < FAINT:
            break
        cell = join(cell, cell)
    dark = _largest(cell.back) * _largest(cell.forth) < FAINT
    return Load(cell.left, np.zeros((len(cell.left), 0, cell.left.shape[-1]), dtype=complex)), dark


def _adjoint(columns: Numbers) -> Numbers:
    return columns.conj().swapaxes(-1, -2)


def _largest(blocks: Complex) -> NDArray[np.float64]:
    """Largest modulus in each block."""
    return np.asarray(np.abs(blocks).max(axis=(1, 2), initial=0.0))
