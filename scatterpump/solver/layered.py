"""The fast engine: r(phi) and t(phi) for many phases from one batched elimination, layer by layer from the far end.

D, the Schur complement of E - H and all other leads on the probe's interface, is matched with the probe's modes in
unitary form,

    U = -(1 - 2i V^+ (D + i V V^+)^-1 V),
    s = -[U (i u_out - l_out) + (i u_out + l_out)]^-1 [U (i u_in - l_in) + (i u_in + l_in)],

which has no pole for a passive device: |U| <= 1 whatever levels the device has.  r is the part of s that belongs to
open modes.

Phases whose elimination lost too many digits are done again by a pivoted sparse factorisation of the same matrix.
Memory: a chunk of phases needs 16 bytes times (elements of H + 4 times the sum of squared layer widths / number of
layers) for each phase; chunks are cut to 128 MiB.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.pump import Pump
from scatterpump.solver.blocks import Blocks
from scatterpump.solver.elimination import Eliminated, eliminate, eliminate_single
from scatterpump.solver.hamiltonian import driven_path
from scatterpump.solver.layers import Border, Layers, layer, lead_border
from scatterpump.solver.modes import with_modes
from scatterpump.solver.path import Path, moving
from scatterpump.solver.trace import ReflectionTrace

__all__ = ["Problem", "prepare", "solve", "solve_prepared"]

Complex = NDArray[np.complex128]
Numbers = NDArray[Any]  # float64 where all is real, else complex128
Floats = NDArray[np.float64]
Indices = NDArray[np.int64]
MEMORY = 128 * 2**20
LOST_DIGITS = 1e5
WIDE = 120


@dataclass(frozen=True, eq=False)
class Problem:
    """Everything about a pump that does not depend on phi, and its path."""

    path: Path  # of the elements of H that move
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
    def wanted(self) -> tuple[Complex, ...]:
        """For every layer, which of its unknowns are open outgoing modes, shape (k, w)."""
        layers = self.layers
        found = [np.zeros((len(layers.outgoing), width), dtype=complex) for width in layers.widths]
        for k, unknown in enumerate(layers.outgoing):
            if layers.level[unknown] >= 0:
                found[layers.level[unknown]][k, layers.place[unknown]] = 1.0
        return tuple(found)


def solve(pump: Pump, phases: Floats, *, transmission: bool = True) -> ReflectionTrace:
    """Solve the scattering problem at each of `phases` (radians); without `transmission` t is left out (no rows)."""
    return solve_prepared(prepare(pump), phases, transmission=transmission)


def solve_prepared(problem: Problem, phases: Floats, *, transmission: bool) -> ReflectionTrace:
    """Solve a prepared problem at each of `phases`."""
    chunk = max(1, MEMORY // _bytes_a_phase(problem))
    parts = [_solve_chunk(problem, phases[i : i + chunk], transmission) for i in range(0, len(phases), chunk)]
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


def _bytes_a_phase(problem: Problem) -> int:
    widths = problem.layers.widths.astype(float)
    return 16 * int(2 * problem.blocks.place.max(initial=0) + 4 * (widths**2).max() + (widths**2).sum())


def _solve_chunk(problem: Problem, phases: Floats, transmission: bool) -> tuple[Complex, Complex]:
    entries = problem.path.many(phases)
    wanted = len(problem.layers.outgoing) if transmission else 0
    m = problem.probe.channels
    r, t = (np.zeros((len(phases), k, m), dtype=complex) for k in (m, wanted))
    with np.errstate(all="ignore"):
        try:
            found = _eliminated(problem, entries, wanted > 0)
            r, t = _matched(problem.probe, found, single=problem.single)
            healthy = (found.growth < LOST_DIGITS) & np.isfinite(r).all(axis=(1, 2)) & np.isfinite(t).all(axis=(1, 2))
        except np.linalg.LinAlgError:
            healthy = np.zeros(len(phases), dtype=bool)
    for i in np.flatnonzero(~healthy):
        r[i], t[i] = _pivoted(problem, entries[[i]], wanted > 0)
    return r, t


def _eliminated(problem: Problem, entries: Numbers, amplitude: bool) -> Eliminated:
    blocks, count = problem.blocks, len(entries)
    real_below = 0 if np.iscomplexobj(entries) else blocks.real_below
    if problem.single:
        diagonal, lower, upper = (blocks.band(step, entries) for step in (0, 1, -1))
        return eliminate_single(diagonal, lower, upper, count, real_below=real_below, amplitude=amplitude)
    here = [block.at(entries) for block in blocks.diagonal]
    here = [np.broadcast_to(block, (count, *block.shape[1:])) for block in here]
    down, up = ([block.at(entries) for block in part] for part in (blocks.lower, blocks.upper))
    return eliminate(here, down, up, problem.wanted if amplitude else None, real_below=real_below)


def _matched(probe: Border, found: Eliminated, *, single: bool) -> tuple[Complex, Complex]:
    """Match what is left on the interface with the probe's modes."""
    hop, back = probe.hop, probe.hop.conj().T
    inverse = found.q @ np.linalg.inv(found.p + 1j * (hop @ back) @ found.q)
    amplitudes, driving = _amplitudes(probe, back @ inverse @ hop)
    reflection = amplitudes[:, : probe.channels]
    if found.amplitudes is None:
        return reflection, np.zeros((len(reflection), 0, probe.channels), dtype=complex)
    state = inverse @ hop @ driving
    if single:
        state = state / found.q
    return reflection, np.asarray(found.amplitudes @ state, dtype=complex)


def _amplitudes(probe: Border, response: Complex) -> tuple[Complex, Complex]:
    """Outgoing amplitudes s, and what psi = (D + i V V^+)^-1 V x is to be formed with; `response` is V^+ (...)^-1 V."""
    kernel = 2j * response - np.eye(response.shape[-1])
    outward = kernel @ (1j * probe.out - probe.out_bare) + (1j * probe.out + probe.out_bare)
    inward = kernel @ (1j * probe.into - probe.into_bare) + (1j * probe.into + probe.into_bare)
    amplitudes: Complex = np.asarray(-np.linalg.solve(outward, inward), dtype=complex)
    ahead = probe.into + probe.out @ amplitudes
    behind = probe.into_bare + probe.out_bare @ amplitudes
    return amplitudes, np.asarray(ahead + 1j * behind)


def _pivoted(problem: Problem, entries: Numbers, amplitude: bool) -> tuple[Complex, Complex]:
    """The same for one phase, by a pivoted sparse factorisation of all layers at once."""
    from scipy.sparse import bmat, csc_matrix
    from scipy.sparse.linalg import splu

    probe, widths = problem.probe, problem.layers.widths
    steps = len(widths)
    grid: list[list[Any]] = [[None] * steps for _ in range(steps)]
    for n in range(steps):
        grid[n][n] = csc_matrix(problem.blocks.diagonal[n].at(entries)[0])
    for n in range(steps - 1):
        grid[n + 1][n] = csc_matrix(problem.blocks.lower[n].at(entries)[0])
        grid[n][n + 1] = csc_matrix(problem.blocks.upper[n].at(entries)[0])
    grid[0][0] = grid[0][0] + csc_matrix(1j * probe.hop @ probe.hop.conj().T)
    right = np.zeros((int(widths.sum()), probe.hop.shape[1]), dtype=complex)
    right[: widths[0]] = probe.hop
    inverse = splu(bmat(grid, format="csc")).solve(right)
    amplitudes, driving = _amplitudes(probe, probe.hop.conj().T @ inverse[: widths[0]])
    picked = np.hstack(problem.wanted) if amplitude else np.zeros((0, len(inverse)))
    return amplitudes[: probe.channels], picked @ inverse @ driving
