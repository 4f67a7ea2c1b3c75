"""r and t at many energies and phases: energies are lanes of one sweep, like phases.

H(phi) does not know the energy, and neither do the layers as long as the leads have as many modes.  What does know it,
the energy on the diagonal and the borders of the leads, joins the elements that move; energies between which no lead
opens or closes a mode are swept together.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from scatterpump.pump import Pump
from scatterpump.solver.blocks import Blocks
from scatterpump.solver.hamiltonian import driven_path
from scatterpump.solver.layered import factorised, require_finite, solve_elements, solve_prepared
from scatterpump.solver.layers import Border, Layers, bordered, layer
from scatterpump.solver.problem import Problem, assemble, borders
from scatterpump.solver.sweep import swept
from scatterpump.solver.trace import ReflectionTrace

__all__ = ["solve_grid"]

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
MANY = 64  # phases with which one energy alone already fills a sweep


@dataclass(frozen=True, eq=False)
class Lane:
    """One energy: the pump there, the borders of its leads, and where it stands on the list."""

    index: int
    pump: Pump
    probe: Border
    others: list[Border]

    def matches(self, other: Lane) -> bool:
        """Whether both energies have the same numbers of modes in all leads."""
        return len(self.others) == len(other.others) and all(
            mine.matches(theirs)
            for mine, theirs in zip([self.probe, *self.others], [other.probe, *other.others], strict=True)
        )


def solve_grid(pump: Pump, energies: Floats, phases: Floats, *, transmission: bool) -> tuple[ReflectionTrace, ...]:
    """Solve the scattering problem at each of `energies` and `phases`; one trace an energy."""
    driven_path(pump)  # found once, and shared by the pumps at all energies
    lanes = [Lane(i, at, *borders(at)) for i, at in enumerate(pump.at_fermi_level(float(e)) for e in energies)]
    found: dict[int, ReflectionTrace] = {}
    while lanes:
        group = [lane for lane in lanes if lane.matches(lanes[0])]
        lanes = [lane for lane in lanes if not lane.matches(lanes[0])]
        layers = layer(driven_path(pump)[0], group[0].probe, group[0].others)
        found |= (
            _by_phases(group, layers, phases, transmission)
            if len(phases) >= MANY or len(group) == 1
            else (_together(group, layers, phases, transmission))
        )
    return tuple(found[i] for i in range(len(energies)))


def _by_phases(group: list[Lane], layers: Layers, phases: Floats, transmission: bool) -> dict[int, ReflectionTrace]:
    """Energies one by one, all phases together."""
    return {
        lane.index: solve_prepared(
            _alone(lane, layers),
            phases,
            transmission=transmission,
        )
        for lane in group
    }


def _together(group: list[Lane], layers: Layers, phases: Floats, transmission: bool) -> dict[int, ReflectionTrace]:
    """All energies and phases in one sweep, in chunks of whole energies."""
    driven, _ = driven_path(group[0].pump)
    plain = assemble(group[0].pump, group[0].probe, group[0].others, layers)
    model, on_site = _with_energies(plain), _moving_diagonal(plain.blocks)[1]
    moving, size = model.path.many(phases), max(1, model.chunk // len(phases))
    found = {}
    for start in range(0, len(group), size):
        some = group[start : start + size]
        extra = np.array([[-lane.pump.fermi_level, *-bordered(driven.size, lane.others)[2]] for lane in some])
        elements = np.hstack([np.tile(moving, (len(some), 1)), np.repeat(extra, len(phases), axis=0)])
        elements[:, on_site] -= np.repeat([lane.pump.fermi_level for lane in some], len(phases))[:, None]
        problem = replace(model, probe=_stacked([lane.probe for lane in some], len(phases)))

        def redo(row: int, some: list[Lane] = some) -> tuple[Complex, Complex]:
            return factorised(
                _alone(some[row // len(phases)], layers), moving[[row % len(phases)]], transmission=transmission
            )

        r, t = solve_elements(problem, elements, transmission=transmission, sweep=swept, redo=redo)
        for i, lane in enumerate(some):
            own = slice(i * len(phases), (i + 1) * len(phases))
            require_finite(lane.pump, phases, r[own])
            found[lane.index] = ReflectionTrace(phases, r[own], t[own], len(phases), "layered", lane.pump.fermi_level)
    return found


def _alone(lane: Lane, layers: Layers) -> Problem:
    """The problem of one energy."""
    driven, _ = driven_path(lane.pump)
    own = replace(layers, values=bordered(driven.size, lane.others)[2])
    return assemble(lane.pump, lane.probe, lane.others, own)


def _with_energies(problem: Problem) -> Problem:
    """The same with the energy and the borders among the elements that move, after those of H.

    On orbitals whose own element of H moves, the energy is taken off that instead.
    """
    blocks, layers = problem.blocks, problem.layers
    moved, here = int(blocks.place.max(initial=-1)) + 1, np.arange(blocks.orbitals)
    here = np.setdiff1d(here, _moving_diagonal(blocks)[0])
    count = len(here) + len(layers.rows)
    place = np.concatenate([blocks.place, np.full(len(here), moved), moved + 1 + np.arange(len(layers.rows))])
    everything = Blocks(
        replace(layers, values=np.zeros_like(layers.values)),
        0.0,
        np.concatenate([blocks.rows, here, layers.rows]),
        np.concatenate([blocks.columns, here, layers.columns]),
        np.concatenate([blocks.still, np.zeros(count)]),
        place,
        blocks.orbitals,
    )
    return replace(problem, blocks=everything, known=None)


def _moving_diagonal(blocks: Blocks) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Orbitals whose diagonal element moves, and the numbers of those elements among all that move."""
    chosen = np.flatnonzero((blocks.rows == blocks.columns) & (blocks.place >= 0))
    return blocks.rows[chosen], blocks.place[chosen]


def _stacked(probes: list[Border], phases: int) -> Border:
    """One border with the modes of every energy, each for all phases."""
    out, out_bare, into, into_bare = (
        np.repeat([getattr(probe, name) for probe in probes], phases, axis=0)
        for name in ("out", "out_bare", "into", "into_bare")
    )
    return replace(probes[0], out=out, out_bare=out_bare, into=into, into_bare=into_bare)
