"""H(phi) of a pump as a list of matrix elements, many phases at a time.

The places of the elements follow from the system alone: every site and every hopping, whatever their values at some
phase.  Values at many phases come from calling each value function once with arrays of parameters, of shape (n, 1, 1);
where a function does not take that, or does not give what it gives for a few sites at single phases, kwant builds H
phase by phase.
"""

from __future__ import annotations

from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import SolverError
from scatterpump.pump import Pump
from scatterpump.solver.path import Path, follow

__all__ = ["DrivenHamiltonian", "driven_path"]

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
Indices = NDArray[np.int64]
AGREES = 1e-12
SPOTS = 16


def driven_path(pump: Pump) -> tuple[DrivenHamiltonian, Path]:
    """Return H of a pump and the path it takes along the cycle, found once."""

    def find() -> tuple[DrivenHamiltonian, Path]:
        driven = DrivenHamiltonian(pump)
        return driven, follow(driven.many, pump.cycle)

    found: tuple[DrivenHamiltonian, Path] = pump.once("path", find)
    return found


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
        self.offsets: Indices = _offsets(pump.finalized) if pump.finalized.site_ranges else self._built(0.0)[1]
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
        """Return the elements at each of `phases`, shape (n, nnz), one element's values next to each other."""
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
        if not np.isfinite(found.data).all():
            raise SolverError(phase, parameters, ValueError("the Hamiltonian has elements that are not finite"))
        return found, np.concatenate([[0], np.cumsum(count)])

    def _by_arrays(self, phases: Floats) -> Complex | None:
        """Values from one call a value function, or None if that does not reproduce kwant's."""
        system, places = self.pump.finalized, len(self.rows)
        scalars = [self.pump.parameters(float(phase)) for phase in phases]
        try:
            with np.errstate(all="ignore"):
                found = _walked(system, self._pairs, self.offsets, _stacked(scalars), len(phases), places)
        except Exception:  # anything: the function was not written for arrays, and is asked phase by phase instead
            return None
        if not np.isfinite(found).all():  # asked phase by phase, the failure is told where it happens
            return None
        spots = _spots(system)
        for place in (len(phases) // 2 + 1, len(phases) - 1):
            if not self._agrees(found[place], spots, scalars[place]):
                return None
        return found

    def _agrees(self, found: Complex, spots: list[int], parameters: dict[str, Any]) -> bool:
        """Whether value functions called for one phase give what was found."""
        starts, values = self._starts, _values(self.pump.finalized)
        for spot in spots:
            block = _called(self.pump.finalized, self._pairs[spot], values[spot], parameters)
            truth = np.asarray(block, dtype=complex).ravel()
            difference = np.abs(found[starts[spot] : starts[spot] + truth.size] - truth).max()
            if not difference <= AGREES * max(1e-300, np.abs(truth).max()):
                return False
        return True

    @cached_property
    def _starts(self) -> Indices:
        """Where the block of every pair begins among the elements."""
        return _starts(self._pairs, self.offsets)


def _offsets(system: Any) -> Indices:
    """Every site's first orbital, as kwant knows it without calling value functions."""
    sites, orbitals = (np.array(column) for column in list(zip(*system.site_ranges, strict=True))[:2])
    count = np.repeat(orbitals[:-1], np.diff(sites))
    return np.asarray(np.concatenate([[0], np.cumsum(count)]), dtype=int)


def _spots(system: Any) -> list[int]:
    """For every value function some of the pairs it is called for: the first, the last, and others between."""
    calls: dict[Any, list[int]] = {}
    for place, (value, names) in enumerate(_values(system)):
        if names is not None:
            calls.setdefault(value, []).append(place)
    return [
        places[i] for places in calls.values() for i in np.unique(np.linspace(0, len(places) - 1, SPOTS).astype(int))
    ]


def _starts(pairs: list[tuple[int, int]], offsets: Indices) -> Indices:
    """Where the block of every pair begins among the elements; a hopping's reverse follows its block."""
    both, count = np.array(pairs, dtype=np.int64).reshape(-1, 2), np.diff(offsets)
    sizes = count[both[:, 0]] * count[both[:, 1]] * np.where(both[:, 0] == both[:, 1], 1, 2)
    return np.asarray(np.cumsum(sizes) - sizes)


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


def _values(system: Any) -> list[tuple[Any, Any]]:
    """Value, and names of its parameters or None, of every pair."""
    from kwant.builder import Other

    return [*system.onsites, *(pair for pair in system.hoppings if pair[0] is not Other)]


def _called(system: Any, pair: tuple[int, int], call: tuple[Any, Any], parameters: dict[str, Any]) -> Any:
    """Value of a site (i, i) or hopping (i, j)."""
    value, names = call
    if names is None:
        return value
    i, j = pair
    caught = [parameters[name] for name in names]
    sites = system.sites
    return value(sites[i], *caught) if i == j else value(sites[i], sites[j], *caught)


def _walked(
    system: Any, pairs: list[tuple[int, int]], offsets: Indices, parameters: dict[str, Any], count: int, places: int
) -> Complex:
    """All elements at all phases, shape (count, places), stored element by element."""
    orbitals, sites = np.diff(offsets), system.sites
    found = np.empty((places, count), dtype=complex)
    starts = _starts(pairs, offsets)
    caught: dict[int, list[Any]] = {}
    single = bool((orbitals == 1).all())
    for (i, j), start, (value, names) in zip(pairs, starts.tolist(), _values(system), strict=True):
        if names is not None:
            if id(names) not in caught:
                caught[id(names)] = [parameters[name] for name in names]
            known = caught[id(names)]
            value = value(sites[i], *known) if i == j else value(sites[i], sites[j], *known)
        if single:
            found[start] = value.reshape(-1) if isinstance(value, np.ndarray) else value
            continue
        block = np.broadcast_to(value, (count, orbitals[i], orbitals[j]))
        end = start + block[0].size
        found[start:end] = block.reshape(count, -1).T
        if i != j:
            found[end : 2 * end - start] = block.conj().swapaxes(1, 2).reshape(count, -1).T
    if single:
        hops = starts[len(sites) :]
        found[hops + 1] = found[hops].conj()
    return found.T
