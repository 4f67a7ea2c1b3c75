"""A pump made ready for the layered engine: all that does not depend on phi, and the path of what does."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from scatterpump.pump import Pump
from scatterpump.solver import cost
from scatterpump.solver.blocks import Blocks
from scatterpump.solver.cells import layer_table, repeated_cells
from scatterpump.solver.elimination import has_compiler
from scatterpump.solver.hamiltonian import driven_path
from scatterpump.solver.layers import Border, Layers, layer, lead_border
from scatterpump.solver.modes import with_modes
from scatterpump.solver.path import Path, description, moving
from scatterpump.solver.period import Run
from scatterpump.solver.schur import SparseDevice

__all__ = ["Problem", "assemble", "borders", "prepare"]

Complex = NDArray[np.complex128]
MEMORY = 128 * 2**20
CACHE = 2**20


@dataclass(frozen=True, eq=False)
class Problem:
    """Everything about a pump that does not depend on phi, and its path.

    Attributes
    ----------
    path : Path
        Of the elements of H that move.
    layers : Layers
    probe : Border
    others : list of Border
        All leads but the probe that have any modes.
    blocks : Blocks
    pump : Pump
    known : (s, elements) complex array or None
        What describes the moving elements along the whole cycle, if so little does.
    """

    path: Path
    layers: Layers
    probe: Border
    others: list[Border]
    blocks: Blocks
    pump: Pump
    known: Complex | None

    @property
    def single(self) -> bool:
        """Whether every layer is one unknown."""
        return bool((self.layers.widths == 1).all())

    @property
    def chunk(self) -> int:
        """Phases to be solved together."""
        widest = float(self.layers.widths.max()) ** 2
        elements = self.blocks.place.max(initial=0) + 1
        return max(1, min(MEMORY // int(16 * (elements + 6 * widest)), max(16, int(CACHE / (16 * widest)))))

    @cached_property
    def hopping(self) -> float:
        """The largest hopping: the energy that inverses are measured by."""
        blocks, values = self.blocks, np.abs(self.blocks.still)
        moves = np.flatnonzero(blocks.place >= 0)
        turns = np.abs(self.path.many(np.arange(4) * np.pi / 2)).max(axis=0, initial=0.0)
        moves = moves[blocks.place[moves] < len(turns)]
        values[moves] = turns[blocks.place[moves]]
        largest = values[(blocks.rows != blocks.columns)].max(initial=0.0)
        return float(largest or np.abs(self.probe.hop).max() ** 2)

    @cached_property
    def sparse(self) -> SparseDevice:
        """The whole device as one sparse problem."""
        return SparseDevice(self.blocks, [self.probe, *self.others])

    @cached_property
    def run(self) -> Run | None:
        """The longest run of equal cells, if the path is known so well that equal cells can be told."""
        return None if self.known is None else repeated_cells(layer_table(self.blocks, self.known))

    def reaches_beyond(self, run: Run) -> bool:
        """Whether every lead but the probe is attached beyond the run, up to its last cell."""
        return bool((self.layers.level[self.layers.outgoing] >= run.first + run.length * (run.repeats - 1)).all())

    @property
    def doubling_pays(self) -> bool:
        """Whether joining cells is expected to be cheaper than a sweep."""
        widths = self.layers.widths
        least = cost.joins(widths.min(keepdims=True), len(widths))  # were all layers alike
        if self.single or self._sweep_cost(widths, transmission=False) < least or self.run is None:
            return False
        inside = self.layers.widths[self.run.first :][: self.run.repeats * self.run.length]
        swept = self._sweep_cost(inside, transmission=False)
        return swept > cost.joins(inside[: self.run.length], self.run.repeats)

    def schur_pays(self, *, transmission: bool) -> bool:
        """Whether a sparse Schur complement for each phase is expected to be cheaper than the other ways."""
        widths = self.layers.widths
        if self.single:
            return False
        others = self._sweep_cost(widths, transmission=transmission)
        if self.doubling_pays and self.run and (self.reaches_beyond(self.run) or not transmission):
            others = cost.joins(widths[self.run.first :][: self.run.length], self.run.repeats)
        return cost.complement(widths) < others

    def _sweep_cost(self, widths: NDArray[np.int64], *, transmission: bool) -> float:
        is_real = self.blocks.real_below > 0
        return cost.sweep(widths, is_real=is_real, transmission=transmission, compiled=has_compiler())

    def wanted(self, first: int) -> list[Complex]:
        """For the layers from `first` on, the open outgoing amplitudes of their unknowns, shapes (k, w)."""
        layers = self.layers
        found = [np.zeros((len(layers.outgoing), width), dtype=complex) for width in layers.widths[first:]]
        for k, unknown in enumerate(layers.outgoing):
            if layers.level[unknown] >= first:
                found[layers.level[unknown] - first][k, layers.place[unknown]] = layers.weights[k]
        return found


def prepare(pump: Pump) -> Problem:
    """Sort a pump into layers, and find its path, modes and blocks."""
    probe, others = borders(pump)
    return assemble(pump, probe, others, layer(driven_path(pump)[0], probe, others))


def borders(pump: Pump) -> tuple[Border, list[Border]]:
    """Return the borders of the probe and of all other leads that have any, with their modes at the Fermi level."""
    system, (driven, _) = with_modes(pump), driven_path(pump)
    found = [
        lead_border(lead, interface, driven.offsets, pump.fermi_level)
        for lead, interface in zip(system.leads, system.lead_interfaces, strict=True)
    ]
    probe = found[pump.probe]
    assert probe is not None  # with_modes has refused a closed probe
    return probe, [border for i, border in enumerate(found) if i != pump.probe and border is not None]


def assemble(pump: Pump, probe: Border, others: list[Border], layers: Layers) -> Problem:
    """Put the blocks between `layers` together."""
    driven, path = driven_path(pump)
    moves = moving(path) if path.exact else np.ones(len(driven.rows), dtype=bool)
    still = np.where(moves, 0.0, path.at(0.0))
    place = np.where(moves, np.cumsum(moves) - 1, -1)
    blocks = Blocks(layers, pump.fermi_level, driven.rows, driven.columns, still, place, driven.size)
    own = path.only(np.flatnonzero(moves))
    return Problem(own, layers, probe, others, blocks, pump, description(own))
