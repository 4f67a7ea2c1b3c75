"""The fast engine: r(phi) and t(phi) for many phases at once, layer by layer from the far end.

Three ways lead to the device as the probe sees it, a wave returned for each wave that enters:

* a sweep over all layers (`elimination`), in chunks of phases;
* where the device repeats a cell often, the cells are joined by doubling (`doubling`), and only the ends are swept;
* phases at which a sweep lost too many digits are done again by a pivoted sparse factorisation (`pivoted`).

Memory: a chunk of n phases needs about 16 n (E + 6 w^2) bytes, for E elements of H that move and layers of w
unknowns; n is chosen so that this is 128 MiB at most, and so that the blocks of one layer stay in the processor's cache.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from math import log2
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.pump import Pump
from scatterpump.solver.blocks import Blocks, Stack
from scatterpump.solver.cells import Run, layer_table, longest_run
from scatterpump.solver.doubling import Load, behind, closed_by, closed_by_pair, ports, repeated, segment
from scatterpump.solver.elimination import eliminate, eliminate_single
from scatterpump.solver.hamiltonian import driven_path
from scatterpump.solver.layers import Border, Layers, layer, lead_border
from scatterpump.solver.matching import match
from scatterpump.solver.modes import with_modes
from scatterpump.solver.path import Path, StraightPath, TrigonometricPath, moving
from scatterpump.solver.pivoted import factorised
from scatterpump.solver.trace import ReflectionTrace

__all__ = ["Problem", "prepare", "solve", "solve_prepared"]

Complex = NDArray[np.complex128]
Numbers = NDArray[Any]  # float64 where all is real, else complex128
Floats = NDArray[np.float64]
MEMORY = 128 * 2**20
CACHE = 2**20
LOST_DIGITS = 1e5
WIDE = 120
REAL, ENDS, JOIN = 0.6, 5.0, 5.0  # measured for layers of 10 to 100


@dataclass(frozen=True, eq=False)
class Problem:
    """Everything about a pump that does not depend on phi, and its path.

    Attributes
    ----------
    path : Path
        Of the elements of H that move.
    layers : Layers
    probe : Border
    blocks : Blocks
    """

    path: Path
    layers: Layers
    probe: Border
    blocks: Blocks

    @property
    def single(self) -> bool:
        """Whether every layer is one unknown."""
        return bool((self.layers.widths == 1).all())

    @property
    def is_wide(self) -> bool:
        """Whether the layers are so wide that a sparse factorisation is expected to be cheaper."""
        return int(self.layers.widths.max()) > WIDE

    @property
    def chunk(self) -> int:
        """Phases to be solved together."""
        widest = float(self.layers.widths.max()) ** 2
        elements = self.blocks.place.max(initial=0) + 1
        return max(1, min(MEMORY // int(16 * (elements + 6 * widest)), max(16, int(CACHE / (16 * widest)))))

    @cached_property
    def run(self) -> Run | None:
        """The longest run of equal cells, if the path is known so well that equal cells can be told."""
        match self.path:
            case TrigonometricPath():
                known = self.path.harmonics.coefficients
            case StraightPath():
                known = self.path.points
            case _:
                return None
        return longest_run(layer_table(self.blocks, known))

    def reaches_beyond(self, run: Run) -> bool:
        """Whether every lead but the probe is attached beyond the run, up to its last cell."""
        return bool((self.layers.level[self.layers.outgoing] >= run.first + run.length * (run.repeats - 1)).all())

    @property
    def doubling_pays(self) -> bool:
        """Whether joining cells is expected to be cheaper than a sweep, in units of one layer's inversion."""
        if self.run is None or self.single:
            return False
        sweep = self.run.repeats * self.run.length * (REAL if self.blocks.real_below else 1.0)
        return sweep > ENDS * self.run.length + JOIN * log2(self.run.repeats)

    def wanted(self, first: int) -> list[Complex]:
        """For the layers from `first` on, which of their unknowns are open outgoing modes, shapes (k, w)."""
        layers = self.layers
        found = [np.zeros((len(layers.outgoing), width), dtype=complex) for width in layers.widths[first:]]
        for k, unknown in enumerate(layers.outgoing):
            if layers.level[unknown] >= first:
                found[layers.level[unknown] - first][k, layers.place[unknown]] = 1.0
        return found


def solve(pump: Pump, phases: Floats, *, transmission: bool = True) -> ReflectionTrace:
    """Solve the scattering problem at each of `phases` (radians); without `transmission` t is left out (no rows)."""
    return solve_prepared(prepare(pump), phases, transmission=transmission)


def solve_prepared(problem: Problem, phases: Floats, *, transmission: bool) -> ReflectionTrace:
    """Solve a prepared problem at each of `phases`."""
    parts = [
        _solve_chunk(problem, phases[i : i + problem.chunk], transmission) for i in range(0, len(phases), problem.chunk)
    ]
    reflection, passed = (np.concatenate(found) for found in zip(*parts, strict=True))
    return ReflectionTrace(phases, reflection, passed, len(phases), "layered")


def prepare(pump: Pump) -> Problem:
    """Sort a pump into layers, and find its path, modes and blocks."""
    system, (driven, path) = with_modes(pump), driven_path(pump)
    borders = [
        lead_border(lead, interface, driven.offsets, pump.fermi_level)
        for lead, interface in zip(system.leads, system.lead_interfaces, strict=True)
    ]
    probe = borders[pump.probe]
    assert probe is not None  # with_modes has refused a closed probe
    others = [border for i, border in enumerate(borders) if i != pump.probe and border is not None]
    layers = layer(driven, probe, others)
    moves = moving(path) if path.exact else np.ones(len(driven.rows), dtype=bool)
    still = np.where(moves, 0.0, path.at(0.0))
    place = np.where(moves, np.cumsum(moves) - 1, -1)
    blocks = Blocks(layers, pump.fermi_level, driven.rows, driven.columns, still, place, driven.size)
    return Problem(path.only(np.flatnonzero(moves)), layers, probe, blocks)


def _solve_chunk(problem: Problem, phases: Floats, transmission: bool) -> tuple[Complex, Complex]:
    elements = problem.path.many(phases)
    rows = len(problem.layers.outgoing) if transmission else 0
    r, t = (np.zeros((len(phases), k, problem.probe.channels), dtype=complex) for k in (problem.probe.channels, rows))
    with np.errstate(all="ignore"):
        try:
            device, growth = _swept(problem, elements, rows > 0)
            r, t = match(problem.probe, device)
            healthy = (growth < LOST_DIGITS) & np.isfinite(r).all(axis=(1, 2)) & np.isfinite(t).all(axis=(1, 2))
        except np.linalg.LinAlgError:
            healthy = np.zeros(len(phases), dtype=bool)
    wanted = np.hstack(problem.wanted(0))[:rows]
    for i in np.flatnonzero(~healthy):
        r[[i]], t[[i]] = match(problem.probe, factorised(problem.blocks, elements[[i]], problem.probe.hop, wanted))
    return r, t


def _swept(problem: Problem, elements: Numbers, amplitude: bool) -> tuple[Load, Floats]:
    """The device as the probe's load, by a sweep over all layers, and the growth met."""
    blocks, count = problem.blocks, len(elements)
    if problem.single:
        real_below = 0 if np.iscomplexobj(elements) else blocks.real_below
        diagonal, lower, upper = (blocks.band(step, elements) for step in (0, 1, -1))
        found = eliminate_single(diagonal, lower, upper, count, real_below=real_below, amplitude=amplitude)
        return closed_by_pair(found, problem.probe.hop, amplitude), np.ones(count)
    if problem.run and problem.doubling_pays and (problem.reaches_beyond(problem.run) or not amplitude):
        return _joined(problem, elements, problem.run, problem.run.repeats - 2, amplitude)
    here, amplitudes, growth = _eliminated(problem, elements, 0, amplitude)
    return closed_by(here, problem.probe.hop[None], amplitudes), growth


def _eliminated(problem: Problem, elements: Numbers, first: int, amplitude: bool) -> tuple[Numbers, Complex, Floats]:
    """D and T of layer `first`, with all beyond it eliminated, and the growth met."""
    blocks = problem.blocks
    diagonal, lower, upper = (Stack(blocks, step, first, elements) for step in (0, 1, -1))
    found = eliminate(
        diagonal,
        lower,
        upper,
        problem.wanted(first) if amplitude else None,
        real_below=0 if np.iscomplexobj(elements) else blocks.real_below - first,
    )
    return found.block, found.amplitudes, found.growth


def _between(
    problem: Problem, elements: Numbers, first: int, last: int
) -> tuple[list[Numbers], list[Numbers], list[Numbers]]:
    """Blocks of the layers `first` to `last`, and those that couple them."""
    blocks = problem.blocks
    return (
        [blocks.diagonal(n).at(elements) for n in range(first, last + 1)],
        [blocks.lower(n).at(elements) for n in range(first, last)],
        [blocks.upper(n).at(elements) for n in range(first, last)],
    )


def _joined(problem: Problem, elements: Numbers, run: Run, count: int, amplitude: bool) -> tuple[Load, Floats]:
    """The device as the probe's load with `count` of its cells between the first one and the last one."""
    head, tail = run.first + run.length, run.first + run.length * (run.repeats - 1)
    near, far = ports(-problem.blocks.upper(tail - 1).at(elements))
    here, amplitudes, growth = _eliminated(problem, elements, tail, amplitude)
    cell = segment(*_between(problem, elements, head, head + run.length - 1), near, far)
    start = segment(*_between(problem, elements, 0, head - 1), problem.probe.hop[None], far)
    return behind(start, repeated(cell, count, closed_by(here, near, amplitudes))), growth
