"""What is left of a banded matrix between a few columns, against the dense inverse."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.sparse import csc_matrix

from scatterpump.operation.corner import corner


@pytest.mark.parametrize(("size", "width"), [(12, 3), (13, 3), (5, 5), (7, 0)])
def test_corner_is_that_of_the_inverse(size: int, width: int) -> None:
    """Columns at both ends and in the middle, not in their order; the last block filled or not."""
    numbers = np.random.default_rng(3)
    matrix = numbers.normal(size=(size, size)) + 1j * numbers.normal(size=(size, size))
    matrix[np.abs(np.subtract.outer(np.arange(size), np.arange(size))) > width] = 0.0
    columns = np.zeros((size, 4), dtype=complex)
    columns[[size - 1, size - 2, 0, size // 2, 1], [0, 0, 1, 2, 3]] = [1, 2j, 3, 1 - 1j, 0.5]
    # numpy, a general-purpose library
    expected = columns.conj().T @ np.linalg.inv(matrix) @ columns
    assert corner(csc_matrix(matrix), csc_matrix(columns)) == pytest.approx(expected, rel=1e-10)
