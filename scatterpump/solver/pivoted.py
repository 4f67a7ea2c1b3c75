"""One phase by a pivoted sparse factorisation of all layers at once, where a sweep without pivots lost digits."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.blocks import Blocks
from scatterpump.solver.doubling import Load

__all__ = ["factorised"]

Numbers = NDArray[Any]


def factorised(blocks: Blocks, moving: Numbers, hop: NDArray[np.complex128], wanted: NDArray[np.complex128]) -> Load:
    """Return the device as the probe's load, for one phase.

    Parameters
    ----------
    blocks : Blocks
    moving : (1, elements) array
        The moving elements of H.
    hop : (w_0, k) complex array
        V, from the first layer into the probe.
    wanted : (m, N) complex array
        Which unknowns, layer by layer, are wanted amplitudes.
    """
    from scipy.sparse.linalg import splu

    inside = hop.shape[0]
    matrix = _sparse(blocks, moving, hop)
    right = np.zeros((matrix.shape[0], hop.shape[1]), dtype=complex)
    right[:inside] = hop
    reached = splu(matrix).solve(right)
    returned = 2j * hop.conj().T @ reached[:inside] - np.eye(hop.shape[1])
    return Load(returned[None], 1j * (wanted @ reached)[None])


def _sparse(blocks: Blocks, moving: Numbers, hop: NDArray[np.complex128]) -> Any:
    """E - H, the borders and the probe's absorbing port, layer by layer."""
    from scipy.sparse import csc_matrix

    layers = blocks.layers
    starts = np.cumsum(layers.widths) - layers.widths
    rows, columns, values = blocks.fixed
    some = np.flatnonzero(blocks.place >= 0)
    rows, columns = np.concatenate([rows, blocks.rows[some]]), np.concatenate([columns, blocks.columns[some]])
    values = np.concatenate([values, -moving[0, blocks.place[some]]])
    kept = (layers.level[rows] >= 0) & (layers.level[columns] >= 0)
    rows, columns = (starts[layers.level[x[kept]]] + layers.place[x[kept]] for x in (rows, columns))
    port = 1j * hop @ hop.conj().T
    down, across = np.indices(port.shape).reshape(2, -1)
    size = int(layers.widths.sum())
    return csc_matrix(
        (
            np.concatenate([values[kept], port.ravel()]),
            (np.concatenate([rows, down]), np.concatenate([columns, across])),
        ),
        shape=(size, size),
    )
