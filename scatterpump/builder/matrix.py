"""Matrices on the orbitals of a site, as a description or a device file gives them."""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import InputError

__all__ = ["Matrix", "as_array", "as_hermitian", "as_rows"]

# Rows of numbers, or of text such as "0.5j" where a number is complex; or the name of a Pauli matrix.
Matrix: TypeAlias = Any
PAULI: dict[str, list[list[complex]]] = {
    "sigma_0": [[1, 0], [0, 1]],
    "sigma_x": [[0, 1], [1, 0]],
    "sigma_y": [[0, -1j], [1j, 0]],
    "sigma_z": [[1, 0], [0, -1]],
}
ALLOWED = 'rows of numbers, of text like "0.5j" where they are complex, or one of ' + ", ".join(PAULI)
HERMITIAN = 1e-12  # relative: rounding of numbers written with all their digits


def as_rows(matrix: Matrix) -> Matrix:
    """Return a matrix in a form that can be compared and hashed: the name as it is, rows as tuples."""
    if matrix is None or isinstance(matrix, str):
        return matrix
    rows = matrix.tolist() if isinstance(matrix, np.ndarray) else matrix
    if not isinstance(rows, list | tuple):
        raise InputError(f"a matrix is {matrix!r}", allowed=ALLOWED)
    return tuple(tuple(row) if isinstance(row, list | tuple) else row for row in rows)


def as_array(matrix: Matrix, orbitals: int, name: str) -> NDArray[np.complex128]:
    """Return a matrix on `orbitals` orbitals, shape (orbitals, orbitals); `name` is what to call it in an error."""
    if isinstance(matrix, str) and matrix not in PAULI:
        raise InputError(f"{name} is {matrix!r}", allowed=ALLOWED)
    rows = PAULI[matrix] if isinstance(matrix, str) else matrix
    try:
        found = np.array([[complex(entry) for entry in row] for row in rows], dtype=complex)
    except (TypeError, ValueError, OverflowError) as error:
        raise InputError(f"{name} holds something that is no number ({error})", allowed=ALLOWED) from None
    if found.shape != (orbitals, orbitals):
        shape = " by ".join(map(str, found.shape))
        raise InputError(f"{name} is {shape}", allowed=f"{orbitals} by {orbitals}, as the device has so many orbitals")
    if not np.isfinite(found).all():
        raise InputError(f"{name} holds a number that is not finite", allowed=ALLOWED)
    return found


def as_hermitian(matrix: Matrix, orbitals: int, name: str) -> NDArray[np.complex128]:
    """Return a matrix as `as_array` does, after making sure that it is its own adjoint."""
    found = as_array(matrix, orbitals, name)
    if np.abs(found - found.conj().T).max() > HERMITIAN * np.abs(found).max():
        raise InputError(f"{name} is not Hermitian", allowed="a matrix equal to its conjugate transpose")
    return found
