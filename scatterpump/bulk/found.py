"""The cell that repeats along a device, recognised from the matrix elements of H in layers from the probe.

The interior is the longest run of equal cells among the layers that change along the cycle.  Its elements are H's own,
so a gap or Chern number of it belongs to this very device, continued without end.  Where most of what changes does not
repeat, as with disorder or in an irregular shape, there is no interior to speak of: the integer, the leak and their
proof stand for themselves then, as they are about the device as it is.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import NoBulkError
from scatterpump.pump import Pump
from scatterpump.solver.hamiltonian import DrivenHamiltonian, driven_path
from scatterpump.solver.harmonics import Harmonics
from scatterpump.solver.layers import distances
from scatterpump.solver.path import Path, TrigonometricPath, description, moving
from scatterpump.solver.period import Run, blocks_held, longest_run

__all__ = ["LARGEST", "FoundCell", "find_cell"]

Complex = NDArray[np.complex128]
Indices = NDArray[np.int64]

LARGEST = 240  # orbitals: the bands of a larger cell take longer to search than the device takes to prove
MOST = 0.5  # share of the blocks that change that a run has to hold to count as the interior
SAMPLES = 24
BATCH = 32
REPLACED = "what is proven of integer and leak holds for this very device, without a gap to go with it"


@dataclass(frozen=True, eq=False)
class FoundCell:
    """One of the repeating cells.

    Attributes
    ----------
    run : Run
        Where the cells are, in layers from the probe.
    orbitals : (repeats, q) int array
        Numbers of the device's orbitals in each cell, in the same order.
    path : Path
        H's elements along the cycle.
    elements : (e,) int array
        Which of them belong to the cell, or couple it to the next one.
    block, rows, columns : (e,) int array
        Their places in the stack (h, V).
    """

    run: Run
    orbitals: Indices
    path: Path
    elements: Indices
    block: Indices
    rows: Indices
    columns: Indices

    @property
    def size(self) -> int:
        """Number q of orbitals in a cell."""
        return int(self.orbitals.shape[1])

    @property
    def origin(self) -> str:
        """Where the cells are, in words."""
        orbitals = f"{self.size} orbital{'s' if self.size > 1 else ''}"
        return f"a cell of {orbitals}, found {self.run.repeats} times in a row along the device"

    @cached_property
    def harmonics(self) -> Harmonics | None:
        """Fourier coefficients of (h, V), shape (2K+1, 2, q, q), or None if phi enters otherwise."""
        if not isinstance(self.path, TrigonometricPath):
            return None
        return Harmonics(self._placed(self.path.harmonics.coefficients))

    def sample(self, phases: NDArray[np.float64]) -> Complex:
        """Return (h, V) at each of `phases`, shape (n, 2, q, q)."""
        batches = [phases[i : i + BATCH] for i in range(0, len(phases), BATCH)]
        return np.concatenate([self._placed(self.path.many(batch)) for batch in batches])

    def _placed(self, entries: Complex) -> Complex:
        result = np.zeros((len(entries), 2, self.size, self.size), dtype=complex)
        result[:, self.block, self.rows, self.columns] = entries[:, self.elements]
        return result


def find_cell(pump: Pump) -> FoundCell:
    """Find the cell that repeats along the device; looked for once, also on behalf of other Fermi levels.

    Raises
    ------
    NoBulkError
        If none does, or not over most of what changes, or it is too large to search its bands.
    """
    found = pump.once("found cell", lambda: _tried(pump))
    if isinstance(found, NoBulkError):
        raise found
    assert isinstance(found, FoundCell)  # nothing else is remembered under this name
    return found


def _tried(pump: Pump) -> FoundCell | NoBulkError:
    try:
        return _looked_for(pump)
    except NoBulkError as error:
        return error


def _looked_for(pump: Pump) -> FoundCell:
    driven, path = driven_path(pump)
    level, place, widths = _layers(pump, driven)
    changing = _changing(level, driven, moving(path), len(widths))
    known = description(path, SAMPLES)
    assert known is not None  # samples are asked for
    own, ahead = _blocks(level, place, widths, driven, known)
    run = longest_run(own, ahead, changing, longest_cell=LARGEST // int(widths.min()))
    _require_most(run, changing)
    assert run is not None  # _require_most has refused None
    return _cell(run, path, driven, level, place, widths)


def _layers(pump: Pump, driven: DrivenHamiltonian) -> tuple[Indices, Indices, Indices]:
    """Layer of every orbital, its number within the layer, and the layers' widths."""
    interface = pump.finalized.lead_interfaces[pump.probe]
    start = np.concatenate([np.arange(driven.offsets[i], driven.offsets[i + 1]) for i in interface])
    level = distances(driven.rows, driven.columns, driven.size, start)
    order = np.argsort(level, kind="stable")
    order = order[level[order] >= 0]
    widths = np.bincount(level[order])
    place = np.full(driven.size, -1)
    place[order] = np.arange(len(order)) - np.repeat(np.cumsum(widths) - widths, widths)
    return level, place, widths


def _changing(
    level: Indices, driven: DrivenHamiltonian, moves: NDArray[np.bool_], count: int
) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    """Which blocks of layers, and of hops to the next layer, change along the cycle; all of them if none does."""
    below, above = level[driven.columns[moves]], level[driven.rows[moves]]
    own, ahead = below[(below == above) & (below >= 0)], below[(above - below == 1) & (below >= 0)]
    found = np.bincount(own, minlength=count) > 0, np.bincount(ahead, minlength=count)[: count - 1] > 0
    return found if any(part.any() for part in found) else (~found[0], ~found[1])


def _blocks(
    level: Indices, place: Indices, widths: Indices, driven: DrivenHamiltonian, known: Complex
) -> tuple[list[Complex], list[Complex]]:
    """The blocks of layers, and those that couple each to the next one, as `longest_run` takes them."""
    below, above = level[driven.columns], level[driven.rows]
    found: list[list[Complex]] = []
    for step in (0, 1):
        wanted = np.flatnonzero((above - below == step) & (below >= 0))
        wanted = wanted[np.argsort(below[wanted], kind="stable")]
        edges = np.searchsorted(below[wanted], np.arange(len(widths) - step + 1))
        blocks = []
        for n, (begin, end) in enumerate(pairwise(edges)):
            mine = wanted[begin:end]
            block = np.zeros((len(known), widths[n + step], widths[n]), dtype=complex)
            block[:, place[driven.rows[mine]], place[driven.columns[mine]]] = known[:, mine]
            blocks.append(block)
        found.append(blocks)
    return found[0], found[1]


def _require_most(run: Run | None, changing: tuple[NDArray[np.bool_], NDArray[np.bool_]]) -> None:
    if run is None:
        raise NoBulkError(
            f"no cell that changes repeats along the device, by disorder or by its shape: {REPLACED}",
            allowed="a device that repeats, or Pump(..., bulk=cell) with one cell of the interior as a kwant Builder "
            "with a translational symmetry",
        )
    share = blocks_held(run, changing) / sum(int(part.sum()) for part in changing)
    if share < MOST:
        raise NoBulkError(
            f"equal cells hold only {share:.0%} of what changes, so the device has no one interior: {REPLACED}",
            allowed="a device that repeats, or Pump(..., bulk=cell) with one cell of the interior",
        )


def _cell(
    run: Run, path: Path, driven: DrivenHamiltonian, level: Indices, place: Indices, widths: Indices
) -> FoundCell:
    """The first of the repeating cells, with its coupling to the second."""
    cell = range(run.first, run.first + run.length)
    start = np.concatenate([[0], np.cumsum(widths[cell.start : cell.stop])])
    size = int(start[-1])
    if size > LARGEST:
        raise NoBulkError(
            f"the repeating cell has {size} orbitals, more than the {LARGEST} whose bands can be searched: {REPLACED}",
            allowed=f"a cell of at most {LARGEST} orbitals",
        )
    above, below = level[driven.rows] - run.first, level[driven.columns] - run.first
    inside = (below >= 0) & (below < run.length) & (above >= 0) & (above < run.length)
    onward = (below == run.length - 1) & (above == run.length)
    chosen = np.flatnonzero(inside | onward)
    rows = start[above[chosen] % run.length] + place[driven.rows[chosen]]
    columns = start[below[chosen]] + place[driven.columns[chosen]]
    held = np.flatnonzero((level >= run.first) & (level < run.layers.stop))
    orbitals = held[np.lexsort((place[held], level[held]))].reshape(run.repeats, size)
    return FoundCell(run, orbitals, path, chosen, onward[chosen].astype(int), rows, columns)
