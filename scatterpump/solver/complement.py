"""The Schur complement of a sparse matrix on its last unknowns, for many matrices of one pattern.

Ordering and symbolic analysis are done once.  Of a long and narrow device the inner unknowns form a narrow band, which
LAPACK factorises faster than anything that has to be analysed first.  Else MUMPS does it all where kwant was built with
it, through kwant's private interface if that is as expected, else through its public one, which repeats the analysis;
without MUMPS it is read from the trailing blocks of SuperLU's factors.

MUMPS is by P. R. Amestoy, I. S. Duff, J. Koster, J.-Y. L'Excellent, SIAM J. Matrix Anal. Appl. 23, 15 (2001); SuperLU
by J. W. Demmel et al., ibid. 20, 720 (1999) (citations from memory).
"""

from __future__ import annotations

from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.augmented import Augmented
from scatterpump.solver.band import factor, pack
from scatterpump.solver.dissection import dissected

__all__ = ["Banded", "Complement", "Mumps", "PublicMumps", "SuperLU", "complement"]

Complex = NDArray[np.complex128]
Indices = NDArray[np.int64]
PIVOT = 0.01  # a diagonal element is kept as pivot if it is so large against its column: kwant's choice as well
NARROW = 16  # half-bandwidth up to which a band costs no more for each matrix than the others do
SHORT_OF_MEMORY = (-8, -9)  # what MUMPS says when its estimate was too small


class Complement(Protocol):
    """How the complement of one matrix of a known pattern is found."""

    def of(self, values: Complex) -> Complex:
        """Return it, shape (k, k), for the values of one matrix.

        Raises
        ------
        numpy.linalg.LinAlgError
            If the matrix is singular.
        """


def complement(matrix: Augmented, *, symmetric: bool) -> Complement:
    """Analyse a pattern with the best of what is installed; `symmetric` if all its matrices equal their transposes."""
    banded = Banded(matrix)
    if banded.half <= NARROW:
        return banded
    try:
        return Mumps(matrix, symmetric=symmetric)
    except Exception:  # private: it may be absent or anything else than what it is today
        pass
    try:
        return PublicMumps(matrix)
    except ImportError:
        return SuperLU(matrix)


class Banded:
    """LAPACK's banded factorisation, the inner unknowns ordered once from end to end.

    Attributes
    ----------
    half : int
        Half-bandwidth of the inner unknowns in their order.
    """

    def __init__(self, matrix: Augmented) -> None:
        from scipy.sparse import csr_matrix
        from scipy.sparse.csgraph import reverse_cuthill_mckee

        inner, rows, columns = matrix.size - matrix.ports, matrix.indices, matrix.columns
        inside = (rows < inner) & (columns < inner)
        pattern = csr_matrix((np.ones(inside.sum()), (rows[inside], columns[inside])), shape=(inner, inner))
        rank = np.arange(matrix.size)
        rank[reverse_cuthill_mckee(pattern, symmetric_mode=True)] = np.arange(inner)
        self._size, self._inner, self._rows, self._columns = matrix.size, inner, rank[rows], rank[columns]
        self.half = int(np.abs(self._rows - self._columns)[inside].max(initial=0))
        self._ends = np.flatnonzero(~inside)
        self._inside = np.flatnonzero(inside)

    def of(self, values: Complex) -> Complex:
        """Return the complement."""
        inner, size = self._inner, self._size
        rows, columns = self._rows[self._inside], self._columns[self._inside]
        factors = factor(pack(rows, columns, values[self._inside], inner, self.half))
        if factors is None:
            raise np.linalg.LinAlgError("singular to the last digit")
        rows, columns, values = self._rows[self._ends], self._columns[self._ends], values[self._ends]
        into, out = (np.zeros((size, size - inner), dtype=complex) for _ in range(2))
        ahead, down = columns >= inner, rows >= inner
        into[rows[ahead], columns[ahead] - inner] = values[ahead]
        out[columns[down], rows[down] - inner] = values[down]
        return np.asarray(into[inner:] - out[:inner].T @ factors.solve(into[:inner]))


class Mumps:
    """MUMPS, analysed once; of a symmetric matrix it takes the lower half, for half the work."""

    def __init__(self, matrix: Augmented, *, symmetric: bool) -> None:
        from kwant.linalg import _mumps

        rows, columns = matrix.indices, matrix.columns
        self._kept = np.flatnonzero(rows >= columns) if symmetric else np.arange(len(rows))
        self._symmetric, self._public = symmetric, PublicMumps(matrix)
        self._found = np.zeros((matrix.ports, matrix.ports), dtype=complex)
        self._values = np.asfortranarray(matrix.fixed[self._kept])
        # MUMPS keeps pointers to these arrays: they have to live as long as it does
        self._places = [np.asfortranarray(x[self._kept] + 1, dtype=_mumps.int_dtype) for x in (rows, columns)]
        self._ports = np.arange(matrix.size - matrix.ports + 1, matrix.size + 1, dtype=_mumps.int_dtype)
        self._solver = _mumps.zmumps(False, 2 if symmetric else 0)
        self._solver.set_assembled_matrix(matrix.size, *self._places, self._values)
        self._solver.icntl[19], self._solver.icntl[31], self._solver.cntl[1] = 1, 1, PIVOT
        self._solver.set_schur(self._found, self._ports)
        self._call(1)

    def of(self, values: Complex) -> Complex:
        """Return the complement; where MUMPS fails it is tried again from the beginning, with a new analysis."""
        self._values[:] = values[self._kept]
        try:
            self._call(2)
        except np.linalg.LinAlgError:
            return self._public.of(values)
        if self._symmetric:
            return np.tril(self._found) + np.tril(self._found, -1).T
        return self._found.copy()

    def _call(self, job: int) -> None:
        self._solver.job = job
        self._solver.call()
        while self._solver.infog[1] in SHORT_OF_MEMORY:
            self._solver.icntl[14] *= 2
            self._solver.call()
        if self._solver.infog[1] < 0:
            raise np.linalg.LinAlgError(f"MUMPS error {self._solver.infog[1]}")


class PublicMumps:
    """MUMPS through kwant's public interface."""

    def __init__(self, matrix: Augmented) -> None:
        from kwant.linalg import mumps

        self._mumps, self._matrix = mumps, matrix

    def of(self, values: Complex) -> Complex:
        """Return the complement, with an analysis of its own."""
        from scipy.sparse import coo_matrix

        size = self._matrix.size
        matrix = coo_matrix((values, (self._matrix.indices, self._matrix.columns)), shape=(size, size))
        try:
            found = self._mumps.schur_complement(matrix, np.arange(size - self._matrix.ports, size), pivot_tol=PIVOT)
        except self._mumps.MUMPSError as error:
            raise np.linalg.LinAlgError(str(error)) from error
        return np.asarray(found)


class SuperLU:
    """SciPy's SuperLU, the inner unknowns ordered once by nested dissection."""

    def __init__(self, matrix: Augmented) -> None:
        self._ports = matrix.ports
        self._take, self._empty = _reordered(matrix)

    def of(self, values: Complex) -> Complex:
        """Return the complement: from the factors' last blocks if pivoting has kept the ports last, else by solving."""
        matrix = self._empty.copy()
        matrix.data[self._take] = values
        try:
            factors = _factors(matrix)
        except RuntimeError as error:
            raise np.linalg.LinAlgError(str(error)) from error
        inner = matrix.shape[0] - self._ports
        rows, columns = factors.perm_r[inner:], factors.perm_c[inner:]
        if rows.min() < inner or columns.min() < inner:
            return self._solved(matrix, inner)
        last = factors.L[inner:, inner:].toarray() @ factors.U[inner:, inner:].toarray()
        return np.asarray(last[rows - inner][:, columns - inner])

    @staticmethod
    def _solved(matrix: Any, inner: int) -> Complex:
        reached = _factors(matrix[:inner, :inner].tocsc()).solve(matrix[:inner, inner:].toarray())
        return np.asarray(matrix[inner:, inner:] - matrix[inner:, :inner] @ reached)


def _factors(matrix: Any) -> Any:
    from scipy.sparse.linalg import splu

    return splu(matrix, permc_spec="NATURAL", diag_pivot_thresh=PIVOT, options={"SymmetricMode": True})


def _reordered(matrix: Augmented) -> tuple[Indices, Any]:
    """Where each value goes, and a matrix to put them in: the inner unknowns in order, the ports a full last block.

    SuperLU sorts columns by their elimination tree; with the last block full of zeros the ports are the end of it.
    """
    from scipy.sparse import csc_matrix

    size, inner = matrix.size, matrix.size - matrix.ports
    pattern = csc_matrix((np.ones(len(matrix.indices)), matrix.indices, matrix.indptr), shape=(size, size))
    rank = np.arange(size)
    rank[dissected(pattern[:inner, :inner])] = np.arange(inner)
    ports = np.arange(inner, size)
    places = rank[matrix.columns] * size + rank[matrix.indices]
    every = np.unique(np.concatenate([places, (ports[:, None] * size + ports).ravel()]))
    pointers = np.searchsorted(every, np.arange(size + 1) * size)
    empty = csc_matrix((np.zeros(len(every), dtype=complex), every % size, pointers), shape=(size, size))
    return np.searchsorted(every, places), empty
