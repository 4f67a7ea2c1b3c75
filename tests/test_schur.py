"""The sparse Schur complement against kwant's own solver, element by element, through every factorisation.

C. W. Groth, M. Wimmer, A. R. Akhmerov, X. Waintal, New J. Phys. 16, 063065 (2014).
"""

from __future__ import annotations

import sys
from typing import Any

import kwant
import kwant.linalg
import numpy as np
import pytest
from devices import WIDE, loop, rice_mele
from scipy.sparse import csr_matrix, diags, kronsum
from test_layered import strip

from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Wave
from scatterpump.cycle import Cycle
from scatterpump.pump import Pump
from scatterpump.solver import complement, cost, direct, layered
from scatterpump.solver.dissection import dissected
from scatterpump.solver.layered import Problem, prepare
from scatterpump.solver.matching import match
from scatterpump.solver.schur import SparseDevice

PHASES = np.linspace(0.1, 6.2, 5)
CLOSE = 1e-10
MUMPS = "mumps" in kwant.solvers.default.smodule.__name__
needs_mumps = pytest.mark.skipif(not MUMPS, reason="kwant was built without MUMPS")
BACKENDS = {
    "mumps": complement.Mumps,
    "public mumps": lambda matrix, symmetric: complement.PublicMumps(matrix),
    "superlu": lambda matrix, symmetric: complement.SuperLU(matrix),
    "banded": lambda matrix, symmetric: complement.Banded(matrix),
}
each_backend = pytest.mark.parametrize(
    "backend", ["superlu", "banded", *(pytest.param(name, marks=needs_mumps) for name in ("mumps", "public mumps"))]
)


def sparse(problem: Problem, backend: str) -> SparseDevice:
    return SparseDevice(problem.blocks, [problem.probe, *problem.others], BACKENDS[backend])


def agree(pump: Pump, backend: str, phases: Any = PHASES) -> None:
    problem, reference = prepare(pump), direct.solve(pump, np.asarray(phases))
    elements = problem.path.many(np.asarray(phases))
    r, t = match(problem.probe, sparse(problem, backend).load(elements, transmission=True))
    np.testing.assert_allclose(r, reference.reflection, rtol=0, atol=CLOSE)
    np.testing.assert_allclose(t, reference.transmission, rtol=0, atol=CLOSE)


@each_backend
@pytest.mark.parametrize(
    "pump",
    [
        strip(3, 9),
        strip(3, 9, flux=0.11),
        strip(4, 8, side=True),
        strip(2, 10, third=True),
        strip(8, 20, flux=0.07),
        rice_mele(loop(), cells=12),
        ModulatedChain(sites=30, fermi_level=-1.2, onsite=[Wave(1.5, 3)], probe=WIDE, drain="wall").pump(),
    ],
    ids=["strip", "flux", "holes and side sites", "three leads", "wide", "chain", "no drain"],
)
def test_agrees_with_kwant(pump: Pump, backend: str) -> None:
    agree(pump, backend)


@each_backend
@pytest.mark.parametrize("probe", [1, 2])
def test_any_lead_may_be_the_probe(backend: str, probe: int) -> None:
    pump = strip(2, 10, third=True)
    agree(Pump(pump.finalized, pump.cycle, pump.fermi_level, probe=probe, drain=0), backend)


@each_backend
@pytest.mark.parametrize("distance", [0.0, 1e-12, 1e-10, 1e-8, 1e-6, 1e-4])
def test_next_to_an_edge_level_of_the_closed_segment(distance: float, backend: str) -> None:
    """Without the absorbing ports the matrix would be singular there."""
    level = np.arcsin(0.4)  # derived: the edge levels of the dimerised chain are +-0.5 sin phi, the Fermi level is 0.2
    agree(
        rice_mele(loop(), cells=30, energy=0.2),
        backend,
        [level + distance, np.pi - level + distance, np.pi + level - distance, -level - distance],
    )


def rashba(width: int, length: int) -> Pump:
    """Spin-orbit coupling on a square lattice: two orbitals a site, complex hoppings, degenerate modes."""
    lattice, system, one = kwant.lattice.square(norbs=2), kwant.Builder(), np.eye(2)
    sigma_x, sigma_y = np.array([[0, 1], [1, 0]]), np.array([[0, -1j], [1j, 0]])
    system[(lattice(x, y) for x in range(length) for y in range(width))] = lambda site, phi: (
        0.8 * np.cos(2 * np.pi * (site.tag[0] % 3) / 3 - phi) * one
    )
    along, across = (kwant.builder.HoppingKind(step, lattice) for step in ((1, 0), (0, 1)))
    system[along], system[across] = -one + 0.2j * sigma_y, -one - 0.2j * sigma_x
    for direction in (-1, 1):
        lead = kwant.Builder(kwant.TranslationalSymmetry((direction, 0)))
        lead[(lattice(0, y) for y in range(width))] = 0 * one
        lead[along], lead[across] = -1.5 * one, -one
        system.attach_lead(lead)
    return Pump(system, Cycle.angle(), 0.37)


@each_backend
def test_spin_orbit_coupling(backend: str) -> None:
    agree(rashba(3, 8), backend)


def test_superlu_solves_where_pivoting_moves_the_ports(monkeypatch: pytest.MonkeyPatch) -> None:
    """With a diagonal that partial pivoting never keeps, ports become pivots of inner columns."""
    problem = prepare(strip(4, 8))
    elements = problem.path.many(PHASES[:1])
    device = sparse(problem, "superlu")
    expected = device.load(elements, transmission=True)
    solved = []
    original = complement.SuperLU._solved
    monkeypatch.setattr(complement, "PIVOT", 1.0)
    monkeypatch.setattr(
        complement.SuperLU, "_solved", staticmethod(lambda *given: solved.append(given) or original(*given))
    )
    found = device.load(elements, transmission=True)
    assert solved
    np.testing.assert_allclose(found.returned, expected.returned, rtol=0, atol=1e-13)


@needs_mumps
def test_without_kwants_private_interface(monkeypatch: pytest.MonkeyPatch) -> None:
    problem = prepare(strip(3, 9))
    matrix = sparse(problem, "superlu")._matrix
    monkeypatch.setattr(complement, "NARROW", 0)
    assert isinstance(complement.complement(matrix, symmetric=True), complement.Mumps)
    monkeypatch.delattr("kwant.linalg._mumps.zmumps")
    assert isinstance(complement.complement(matrix, symmetric=True), complement.PublicMumps)


def test_without_mumps(monkeypatch: pytest.MonkeyPatch) -> None:
    for name in ("mumps", "_mumps"):
        monkeypatch.setitem(sys.modules, f"kwant.linalg.{name}", None)
        monkeypatch.delattr(kwant.linalg, name, raising=False)
    matrix = sparse(prepare(strip(3, 9)), "superlu")._matrix
    assert isinstance(complement.complement(matrix, symmetric=True), complement.Banded)
    monkeypatch.setattr(complement, "NARROW", 0)
    assert isinstance(complement.complement(matrix, symmetric=True), complement.SuperLU)


def test_dissection_fills_in_less_than_a_general_ordering() -> None:
    """A. George, SIAM J. Numer. Anal. 10, 345 (1973): like n log n on a square lattice; COLAMD is SuperLU's own."""
    from scipy.sparse.linalg import splu

    shares = []
    for side in (16, 32, 64):
        line = diags([-1.0, 2.5, -1.0], [-1, 0, 1], shape=(side, side))
        matrix = csr_matrix(kronsum(line, line))
        order = dissected(matrix)
        assert sorted(order) == list(range(side**2))
        ours = splu(matrix[order][:, order].tocsc(), permc_spec="NATURAL", options={"SymmetricMode": True}).nnz
        assert ours < splu(matrix.tocsc(), permc_spec="COLAMD", options={"SymmetricMode": True}).nnz
        shares.append(ours / (side**2 * np.log2(side**2)))
    # derived: n^3/2 would double it at each step
    assert max(shares) < 1.2 * min(shares)


def test_dissection_of_parts_that_do_not_hang_together() -> None:
    order = dissected(csr_matrix(np.kron(np.eye(3), np.diag(np.ones(39), 1))))
    assert sorted(order) == list(range(120))


@each_backend
def test_every_chunk_gets_its_own_numbers(backend: str) -> None:
    """Values are overwritten in place; what was returned before must not change with them."""
    problem = prepare(strip(3, 9))
    device, elements = sparse(problem, backend), problem.path.many(PHASES)
    together = device.load(elements, transmission=False).returned
    for i in (2, 0):
        np.testing.assert_array_equal(device.load(elements[[i]], transmission=False).returned[0], together[i])


def test_cost_grows_with_width_and_with_size() -> None:
    """Measured on the benchmark's sliding wave: they are even at a width of about 75."""
    for length in (100, 400):
        narrow, wide = (np.full(length, width) for width in (40, 150))
        assert cost.sweep(narrow, is_real=True, transmission=False, compiled=False) < cost.complement(narrow)
        assert cost.sweep(wide, is_real=True, transmission=False, compiled=False) > cost.complement(wide)


def test_wide_devices_take_it(monkeypatch: pytest.MonkeyPatch) -> None:
    """Where the sparse complement is expected to be cheaper it answers, with t and without."""
    pump, asked = strip(3, 9), []
    original = SparseDevice.load
    monkeypatch.setattr("scatterpump.solver.cost.PER_UNKNOWN", 0.0)
    monkeypatch.setattr("scatterpump.solver.cost.PER_UNKNOWN_AND_WIDTH", 0.0)
    monkeypatch.setattr(SparseDevice, "load", lambda *a, **k: asked.append(1) or original(*a, **k))
    for transmission in (True, False):
        ours, theirs = (engine.solve(pump, PHASES, transmission=transmission) for engine in (layered, direct))
        np.testing.assert_allclose(ours.reflection, theirs.reflection, rtol=0, atol=CLOSE)
        np.testing.assert_allclose(ours.transmission, theirs.transmission, rtol=0, atol=CLOSE)
    assert asked == [1, 1]


def test_fallback_of_the_sweep(monkeypatch: pytest.MonkeyPatch) -> None:
    """Phases at which the sweep is not trusted are solved by the sparse complement."""
    pump = strip(3, 9)
    monkeypatch.setattr("scatterpump.solver.layered.LOST_DIGITS", 0.0)
    np.testing.assert_allclose(
        layered.solve(pump, PHASES).reflection, direct.solve(pump, PHASES).reflection, rtol=0, atol=CLOSE
    )
