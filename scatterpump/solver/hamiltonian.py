"""H(phi) of a pump as a list of matrix elements, many phases at a time.

The places of the elements follow from the system alone: every site and every hopping, whatever their values at some
phase.  Values at many phases come from calling each value function once with arrays of parameters, of shape (n, 1, 1);
where a function does not take that, or the result is not what kwant itself says at two of the phases, kwant builds H
phase by phase.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import SolverError
from scatterpump.pump import Pump

__all__ = ["DrivenHamiltonian"]

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
Indices = NDArray[np.int64]
AGREES = 1e-12
LARGEST = 1e60  # squares and determinants of what is larger leave the range of floating point


class DrivenHamiltonian:
    """Matrix elements of H along a pump's cycle.

    Attributes
    ----------
    offsets : (sites + 1,) int array
        Number of every site's first orbital, with the total at the end.
    rows, columns : (nnz,) int array
        Places of the elements.
    calls : int
        Hamiltonians that kwant was asked for.
    """

    def __init__(self, pump: Pump) -> None:
        self.pump, self.calls = pump, 0
        _, self.offsets = self._built(0.0)
        self._pairs = _pairs(pump.finalized)
        self.rows, self.columns = _places(self._pairs, self.offsets)
        keys = self.rows * self.size + self.columns
        self._order = np.argsort(keys)
        self._keys = keys[self._order]
        self._arrays = True

    @property
    def size(self) -> int:
        """Number of orbitals."""
        return int(self.offsets[-1])

    def matrix(self, phase: float) -> Any:
        """Return H at `phase` as a sparse matrix, with failures told where they happened."""
        return self._built(phase)[0].tocsr()

    def at(self, phase: float) -> Complex:
        """Return the elements at `phase`, shape (nnz,)."""
        found = self._built(phase)[0].tocoo()
        result = np.zeros(len(self.rows), dtype=complex)
        keys = found.row.astype(np.int64) * self.size + found.col
        result[self._order[np.searchsorted(self._keys, keys)]] = found.data
        return result

    def many(self, phases: Floats) -> Complex:
        """Return the elements at each of `phases`, shape (n, nnz)."""
        if self._arrays and len(phases) > 2:
            found = self._by_arrays(phases)
            if found is not None:
                return found
            self._arrays = False
        return np.array([self.at(float(phase)) for phase in phases]).reshape(len(phases), len(self.rows))

    def _built(self, phase: float) -> tuple[Any, Indices]:
        parameters = self.pump.parameters(phase)
        self.calls += 1
        try:
            found, count, _ = self.pump.finalized.hamiltonian_submatrix(
                params=parameters, sparse=True, return_norb=True
            )
        except Exception as cause:  # a user's value function may raise anything
            raise SolverError(phase, parameters, cause) from cause
        if not (np.abs(found.data) < LARGEST).all():
            raise SolverError(
                phase, parameters, ValueError(f"the Hamiltonian has elements that are not finite, or above {LARGEST:g}")
            )
        return found, np.concatenate([[0], np.cumsum(count)])

    def _by_arrays(self, phases: Floats) -> Complex | None:
        """Values from one call a value function, or None if that does not reproduce kwant's at two phases."""
        try:
            parameters = _stacked([self.pump.parameters(float(phase)) for phase in phases])
            with np.errstate(all="ignore"):
                found = _walked(self.pump.finalized, self._pairs, self.offsets, parameters, len(phases))
        except Exception:  # anything: the function was not written for arrays, and is asked phase by phase instead
            return None
        if not (np.abs(found) < LARGEST).all():  # asked phase by phase, the failure is told where it happens
            return None
        for i in (0, len(phases) // 2 + 1):
            truth = self.at(float(phases[i]))
            if not np.abs(found[i] - truth).max(initial=0.0) <= AGREES * max(1e-300, np.abs(truth).max(initial=0.0)):
                return None
        return found


def _pairs(system: Any) -> list[tuple[int, int]]:
    """Sites as (i, i), then one direction of every hopping."""
    from kwant.builder import Other

    sites = [(i, i) for i in range(system.graph.num_nodes)]
    return sites + [
        (int(i), int(j)) for (i, j), (value, _) in zip(system.graph, system.hoppings, strict=True) if value is not Other
    ]


def _places(pairs: list[tuple[int, int]], offsets: Indices) -> tuple[Indices, Indices]:
    """Rows and columns: the block of every pair, row by row, and for hoppings that of its reverse right after."""
    both = np.array(pairs, dtype=np.int64).reshape(-1, 2)
    count = np.diff(offsets)
    if (count == 1).all():
        hops = both[both[:, 0] != both[:, 1]]
        sites = both[: len(both) - len(hops), 0]
        turned = np.stack([hops, hops[:, ::-1]], axis=1).reshape(-1, 2)
        return np.concatenate([sites, turned[:, 0]]), np.concatenate([sites, turned[:, 1]])
    rows, columns = [], []
    for i, j in pairs:
        a, b = np.arange(offsets[i], offsets[i + 1]), np.arange(offsets[j], offsets[j + 1])
        for one, other in ((a, b),) if i == j else ((a, b), (b, a)):
            rows.append(np.repeat(one, len(other)))
            columns.append(np.tile(other, len(one)))
    return np.concatenate(rows), np.concatenate(columns)


def _stacked(parameters: list[dict[str, Any]]) -> dict[str, Any]:
    """Numbers that change become arrays of shape (n, 1, 1); anything else has to stay the same."""
    result: dict[str, Any] = {}
    for name, first in parameters[0].items():
        values = [p[name] for p in parameters]
        if isinstance(first, float | int | np.number) and not isinstance(first, bool):
            result[name] = np.array(values)[:, None, None]
        elif all(value is first for value in values):
            result[name] = first
        else:
            raise TypeError(f"{name} is no number")
    return result


def _walked(
    system: Any, pairs: list[tuple[int, int]], offsets: Indices, parameters: dict[str, Any], count: int
) -> Complex:
    from kwant.builder import Other

    orbitals = np.diff(offsets).tolist()
    sites, blocks = system.sites, []
    caught: dict[int, tuple[Any, ...]] = {}
    values = [*system.onsites, *(pair for pair in system.hoppings if pair[0] is not Other)]
    for (i, j), (value, names) in zip(pairs, values, strict=True):
        if names is not None:
            key = id(names)
            if key not in caught:
                caught[key] = tuple(parameters[name] for name in names)
            value = value(sites[i], *caught[key]) if i == j else value(sites[i], sites[j], *caught[key])
        shape = (count, orbitals[i], orbitals[j])
        block = np.broadcast_to(value, shape)
        blocks.append(block.reshape(count, -1))
        if i != j:
            blocks.append(block.conj().swapaxes(1, 2).reshape(count, -1))
    return np.concatenate(blocks, axis=1, dtype=complex)
