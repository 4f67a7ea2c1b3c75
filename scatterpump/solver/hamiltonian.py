"""H(phi) of a pump as a list of matrix elements, many phases at a time.

The places of the elements follow from the system alone: every site and every hopping, whatever their values at some
phase.  Values at many phases come from calling each value function once with arrays of parameters, of shape (n, 1, 1);
where a function does not take that, or does not give what it gives for a few sites at single phases, kwant builds H
phase by phase.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterator
from functools import cached_property
from itertools import chain
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import SolverError
from scatterpump.pump import Pump
from scatterpump.solver.follow import follow
from scatterpump.solver.path import Path

__all__ = ["DrivenHamiltonian", "driven_path"]

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
Indices = NDArray[np.int64]
AGREES = 1e-12
MATCHES = 1e-9  # of the largest element: far above what a fit may miss, far below any mistake
SPOTS = 16


def driven_path(pump: Pump) -> tuple[DrivenHamiltonian, Path]:
    """Return H of a pump and the path it takes along the cycle, found once."""

    def find() -> tuple[DrivenHamiltonian, Path]:
        driven = DrivenHamiltonian(pump)
        return driven, follow(driven.sample, pump.cycle).spread(driven.live, driven.still)

    found: tuple[DrivenHamiltonian, Path] = pump.once("path", find)
    return found


LARGEST = 1e60  # squares and determinants of what is larger leave the range of floating point


class DrivenHamiltonian:
    """Matrix elements of H along a pump's cycle.

    Attributes
    ----------
    offsets : (sites + 1,) int array
        Number of every site's first orbital, with the total at the end.
    rows, columns : (nnz,) int array
        Places of the elements.
    live : int array
        The elements whose value functions take a parameter that the cycle sets.
    still : (nnz,) complex array
        The values of all others.
    calls : int
        Hamiltonians that kwant was asked for.
    """

    def __init__(self, pump: Pump) -> None:
        self.pump, self.calls, system = pump, 0, pump.finalized
        self.offsets: Indices = _offsets(system) if system.site_ranges else self._built(0.0)[1]
        self._pairs, self._values = _pairs(system), _values(system)
        self.rows, self.columns = _places(self._pairs, self.offsets)
        self._sizes = _sizes(self._pairs, self.offsets)
        self._starts = np.cumsum(self._sizes) - self._sizes
        keys = self.rows * self.size + self.columns
        self._order = np.argsort(keys)
        self._keys = keys[self._order]
        driven = set(pump.cycle.names)
        moves = [names is not None and not driven.isdisjoint(names) for _, names in self._values]
        self._driven = np.flatnonzero(moves)
        self.live = np.flatnonzero(np.repeat(moves, self._sizes))
        self._arrays = True
        self.still = self._undriven(np.flatnonzero(np.logical_not(moves)))

    @property
    def size(self) -> int:
        """Number of orbitals."""
        return int(self.offsets[-1])

    def checked(self, path: Path, phase: float) -> Complex:
        """Return kwant's own elements at `phase`, after comparing them all with what `path` says.

        Raises
        ------
        SolverError
            If they differ: a value function gives one thing for arrays of parameters and another for single ones.
        """
        truth = self.at(phase)
        if not np.abs(path.at(phase) - truth).max(initial=0.0) <= MATCHES * max(1e-300, np.abs(truth).max(initial=0.0)):
            cause = ValueError(
                "H is not what its values at other phases say; does a value function sum over its input?"
            )
            raise SolverError(phase, self.pump.parameters(phase), cause)
        return truth

    def at(self, phase: float) -> Complex:
        """Return the elements at `phase`, shape (nnz,)."""
        found = self._built(phase)[0].tocoo()
        result = np.zeros(len(self.rows), dtype=complex)
        keys = found.row.astype(np.int64) * self.size + found.col
        result[self._order[np.searchsorted(self._keys, keys)]] = found.data
        return result

    def sample(self, phases: Floats) -> Complex:
        """Return the live elements at each of `phases`, shape (n, live), one element's values next to each other."""
        if self._arrays and len(phases) > 2:
            found = self._by_arrays(phases)
            if found is not None:
                return found
            self._arrays = False
        return np.array([self.at(float(phase))[self.live] for phase in phases]).reshape(len(phases), len(self.live))

    def many(self, phases: Floats) -> Complex:
        """Return all elements at each of `phases`, shape (n, nnz)."""
        every: Complex = np.repeat(self.still[None], len(phases), axis=0)
        every[:, self.live] = self.sample(phases)
        return every

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

    def _undriven(self, places: Indices) -> Complex:
        """Elements of all pairs that the cycle does not touch, in their places among all elements."""
        parameters = self.pump.parameters(0.0)
        try:
            found = self._walked(places, parameters, 1)[0]
        except Exception:  # whatever is wrong with the value functions, kwant tells it with its place
            return self.at(0.0)
        if not np.isfinite(found).all():
            return self.at(0.0)
        still = np.zeros(len(self.rows), dtype=complex)
        still[np.setdiff1d(np.arange(len(self.rows)), self.live, assume_unique=True)] = found
        return still

    def _by_arrays(self, phases: Floats) -> Complex | None:
        """Values from one call a value function, or None if that does not reproduce the function's own."""
        scalars = [self.pump.parameters(float(phase)) for phase in phases]
        try:
            with np.errstate(all="ignore"):
                found = self._walked(self._driven, _stacked(scalars), len(phases))
        except Exception:  # anything: the function was not written for arrays, and is asked phase by phase instead
            return None
        if not (np.abs(found) < LARGEST).all():  # asked phase by phase, the failure is told where it happens
            return None
        for place in (len(phases) // 2 + 1, len(phases) - 1):
            if not self._agrees(found[place], scalars[place]):
                return None
        return found

    def _agrees(self, found: Complex, parameters: dict[str, Any]) -> bool:
        """Whether value functions called for one phase give what was found, for some pairs of each function."""
        ends = np.searchsorted(self.live, self._starts)
        for place in self._spots:
            truth = np.asarray(self._called(place, parameters), dtype=complex).ravel()
            difference = np.abs(found[ends[place] : ends[place] + truth.size] - truth).max()
            if not difference <= AGREES * max(1e-300, np.abs(truth).max()):
                return False
        return True

    @cached_property
    def _spots(self) -> list[int]:
        """For every value function some of the pairs that it is called for: the first, the last, and others between."""
        calls: dict[Any, list[int]] = defaultdict(list)
        for place in self._driven.tolist():
            calls[self._values[place][0]].append(place)
        even = [np.unique(np.linspace(0, len(places) - 1, SPOTS).astype(int)) for places in calls.values()]
        return [places[i] for places, some in zip(calls.values(), even, strict=True) for i in some]

    def _called(self, place: int, parameters: dict[str, Any]) -> Any:
        """Value of a pair: of a site (i, i) or a hopping (i, j)."""
        value, names = self._values[place]
        if names is None:
            return value
        (i, j), sites = self._pairs[place].tolist(), self.pump.finalized.sites
        caught = [parameters[name] for name in names]
        return value(sites[i], *caught) if i == j else value(sites[i], sites[j], *caught)

    def _walked(self, places: Indices, parameters: dict[str, Any], count: int) -> Complex:
        """All elements of some pairs at all phases, shape (count, elements), stored element by element."""
        sizes = self._sizes[places]
        starts = np.cumsum(sizes) - sizes
        found = np.empty((int(sizes.sum()), count), dtype=complex)
        blocks = self._evaluated(places, parameters)
        if self.size == len(self.offsets) - 1:  # one orbital everywhere
            if count == 1:
                found[starts] = np.array(list(blocks), dtype=complex).reshape(-1, 1)
            else:
                for start, value in zip(starts.tolist(), blocks, strict=True):
                    found[start] = value.reshape(-1) if isinstance(value, np.ndarray) else value
            hops = starts[sizes == 2]
            found[hops + 1] = found[hops].conj()
            return found.T
        orbitals = np.diff(self.offsets)
        for (i, j), start, value in zip(self._pairs[places].tolist(), starts.tolist(), blocks, strict=True):
            block = np.broadcast_to(value, (count, orbitals[i], orbitals[j]))
            end = start + block[0].size
            found[start:end] = block.reshape(count, -1).T
            if i != j:
                found[end : 2 * end - start] = block.conj().swapaxes(1, 2).reshape(count, -1).T
        return found.T

    def _evaluated(self, places: Indices, parameters: dict[str, Any]) -> Iterator[Any]:
        """Values of some pairs, one after the other; what `_called` says, without looking names up again and again."""
        sites, caught = self.pump.finalized.sites, dict[Any, list[Any]]()
        for place, (i, j) in zip(places, self._pairs[places].tolist(), strict=True):
            value, names = self._values[place]
            if names is not None:
                known = caught.get(names)
                if known is None:
                    known = caught[names] = [parameters[name] for name in names]
                value = value(sites[i], *known) if i == j else value(sites[i], sites[j], *known)
            yield value


def _offsets(system: Any) -> Indices:
    """Every site's first orbital, as kwant knows it without calling value functions."""
    sites, orbitals = (np.array(column) for column in list(zip(*system.site_ranges, strict=True))[:2])
    count = np.repeat(orbitals[:-1], np.diff(sites))
    return np.asarray(np.concatenate([[0], np.cumsum(count)]), dtype=int)


def _sizes(pairs: Indices, offsets: Indices) -> Indices:
    """Elements of the block of every pair; with a hopping's block counts that of its reverse, which follows it."""
    count = np.diff(offsets)
    return np.asarray(count[pairs[:, 0]] * count[pairs[:, 1]] * np.where(pairs[:, 0] == pairs[:, 1], 1, 2))


def _pairs(system: Any) -> Indices:
    """Sites as (i, i), then one direction of every hopping, shape (pairs, 2)."""
    from kwant.builder import Other

    edges = np.fromiter(chain.from_iterable(system.graph), dtype=np.int64).reshape(-1, 2)
    sites = np.repeat(np.arange(system.graph.num_nodes), 2).reshape(-1, 2)
    return np.concatenate([sites, edges[[value is not Other for value, _ in system.hoppings]]])


def _places(pairs: Indices, offsets: Indices) -> tuple[Indices, Indices]:
    """Rows and columns: the block of every pair, row by row, and for hoppings that of its reverse right after."""
    count = np.diff(offsets)
    if (count == 1).all():
        hops = pairs[pairs[:, 0] != pairs[:, 1]]
        sites = pairs[: len(pairs) - len(hops), 0]
        turned = np.stack([hops, hops[:, ::-1]], axis=1).reshape(-1, 2)
        return np.concatenate([sites, turned[:, 0]]), np.concatenate([sites, turned[:, 1]])
    rows, columns = [], []
    for i, j in pairs.tolist():
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
