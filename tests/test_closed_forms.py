"""r and t against formulas that need no scattering code.

All r here are psi_n = e^{ikn} + r e^{-ikn} with n = 0 at the last lead-like site before the device.  A chain that shows
the self-energy Sigma to that site has r = -(z - Sigma) / (conj(z) - Sigma), z = hopping e^{ik} of the lead.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import pi, sqrt
from typing import Any

import kwant
import numpy as np
import pytest
from devices import HARPER_GAPS, HarperGap, absolute_reflection, fixed, harper, lead_amplitude, loop, rice_mele
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from scatterpump.builder.description import Lead
from scatterpump.bulk.cell import bloch_cell
from scatterpump.bulk.decay import decay_per_cell, slowest
from scatterpump.cycle import Cycle
from scatterpump.pump import Pump
from scatterpump.solver.direct import scattering_matrices
from scatterpump.solver.reflect import reflect
from scatterpump.winding.unwrap import steps

EXACT = 1e-10  # rounding of a sparse solution, with two decades to spare


def reflection(z: complex, contact: float, over: Any, under: Any) -> Any:
    """Return r of a chain whose first site has the surface Green function over / under, which may be infinite."""
    return -(z * under - contact**2 * over) / (np.conj(z) * under - contact**2 * over)


# --- dimerised chain with staggered levels ---


@dataclass(frozen=True)
class Dimer:
    """An endless dimerised chain, delta = width cos phi, stagger = height sin phi, and the lead it is seen from."""

    energy: float
    hopping: float
    contact: float
    width: float
    height: float

    def pump(self) -> Pump:
        return rice_mele(
            loop(delta=(0, self.width), stagger=(0, self.height)),
            cells=60,
            energy=self.energy,
            probe=Lead(self.hopping, contact=self.contact),
        )

    def reflection(self, phases: NDArray[np.float64]) -> NDArray[np.complex128]:
        level, delta = self.height * np.sin(phases), self.width * np.cos(phases)
        inside, between = 1 + delta, 1 - delta
        decay = decay_of_dimer(self.energy, level, inside, between)
        from_level = (self.energy + level) * decay, between * (between * decay + inside)
        from_bond = inside * decay + between, between * (self.energy - level)
        # two equal forms; each is 0/0 where the other is not
        over, under = np.where(np.abs(inside) >= np.abs(between), from_level, from_bond)
        return np.asarray(reflection(lead_amplitude(self.energy, self.hopping), self.contact, over, under))


def decay_of_dimer(
    energy: float, level: NDArray[np.float64], inside: NDArray[np.float64], between: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return the root of decay + 1 / decay = X with |decay| < 1, as 1 over the large root."""
    half = (energy**2 - level**2 - inside**2 - between**2) / (2 * inside * between)
    return np.asarray(1 / (half + np.sign(half) * np.sqrt(half**2 - 1)))


DIMERS = (
    Dimer(energy=0, hopping=2, contact=1, width=0.5, height=0.5),
    Dimer(energy=0, hopping=1, contact=0.7, width=0.5, height=0.5),
    Dimer(energy=0.2, hopping=1.5, contact=0.4, width=0.3, height=0.6),
    Dimer(energy=-0.3, hopping=1, contact=1, width=0.5, height=0.5),
    Dimer(energy=0, hopping=1, contact=0.02, width=0.5, height=0.5),
)


@pytest.mark.parametrize("dimer", DIMERS, ids=str)
def test_reflection_of_the_dimerised_chain(dimer: Dimer) -> None:
    phases = np.linspace(0, 2 * pi, 41)
    # derived: surface Green function of the half-infinite chain
    for endless in (False, True):
        found = absolute_reflection(dimer.pump(), phases, endless=endless)
        np.testing.assert_allclose(found, dimer.reflection(phases), rtol=0, atol=EXACT)


def test_reflection_of_the_dimerised_chain_by_value() -> None:
    expected = [
        1,
        0.991727400687 + 0.128361842952j,
        0.952975774279 + 0.303046487585j,
        0.345113413427 + 0.938560989959j,
        -0.948549152049 + 0.316629919854j,
        0.006483069394 - 0.999978984685j,
        0.88949527249 - 0.456944373221j,
        0.997519332058 - 0.070393054849j,
    ]
    found = absolute_reflection(DIMERS[1].pump(), [0, 0.5, 1, 2, 3, 4, 5, 6])
    # derived: the formula above, evaluated independently
    np.testing.assert_allclose(found, expected, rtol=0, atol=EXACT)


@pytest.mark.parametrize("probe", [Lead(2.0), Lead(1.0, contact=0.7), Lead(1.5, contact=0.4)], ids=str)
@pytest.mark.parametrize(("delta", "expected"), [(0.5, 1), (-0.5, -1)])
def test_edge_state_turns_the_sign_of_reflection(probe: Lead, delta: float, expected: int) -> None:
    found = absolute_reflection(rice_mele(fixed(delta, 0.0), cells=40, probe=probe), [0.0])
    # W. P. Su, J. R. Schrieffer, A. J. Heeger, Phys. Rev. Lett. 42, 1698 (1979) (citation from memory); r derived
    np.testing.assert_allclose(found, [expected], rtol=0, atol=EXACT)


# --- sliding cosine ---


def cosine_reflection(gap: HarperGap, phase: float, hopping: float = 2.0, contact: float = 1.0) -> complex:
    """Return r from the transfer matrix over one period: the half-infinite chain holds its decaying eigenvector."""
    over_period = np.eye(2)
    for site in range(gap.q):
        level = gap.strength * np.cos(2 * pi * gap.p * site / gap.q - phase)
        over_period = np.array([[gap.energy - level, -1], [1, 0]]) @ over_period
    factors, vectors = np.linalg.eig(over_period)
    first, before = vectors[:, np.abs(factors).argmin()]
    return complex(reflection(lead_amplitude(gap.energy, hopping), contact, first, before))


@pytest.mark.parametrize("gap", HARPER_GAPS, ids=str)
def test_reflection_of_the_sliding_cosine(gap: HarperGap) -> None:
    phases = np.linspace(0, 2 * pi, 18)[:-1]
    expected = [cosine_reflection(gap, phase) for phase in phases]  # transfer matrices: common practice
    for cells, endless in ((20, False), (4, True)):
        found = absolute_reflection(harper(gap, sites=cells * gap.q), phases, endless=endless)
        np.testing.assert_allclose(found, expected, rtol=0, atol=EXACT)


@pytest.mark.parametrize(("index", "expected"), [(0, 0.965829224 - 0.259179301j), (7, 0.9869742982 + 0.160878012j)])
def test_reflection_of_the_sliding_cosine_by_value(index: int, expected: complex) -> None:
    found = absolute_reflection(harper(HARPER_GAPS[index]), [0.0])
    # derived: the transfer matrices above, evaluated independently and printed to nine decimals
    np.testing.assert_allclose(found, [expected], rtol=0, atol=1e-9)


@pytest.mark.parametrize(("index", "expected"), [(0, 0.3725), (7, 0.4107)])
def test_decay_of_the_sliding_cosine(index: int, expected: float) -> None:
    # derived: largest |eigenvalue| < 1 of the transfer matrix over the cycle, printed to four decimals
    assert decay_per_cell(harper(HARPER_GAPS[index]), phases=240) == pytest.approx(expected, abs=6e-5)


# --- one impurity on an endless wire ---


def impurity_wire(strengths: list[float], energy: float, hopping: float, *, first: int = 0, last: int = 0) -> Pump:
    """Return a wire with an impurity on site 0; its strength takes the values `strengths` at equally spaced phases."""
    lattice, system = kwant.lattice.chain(norbs=1), kwant.Builder()
    system[(lattice(x) for x in range(first, last + 1))] = 0
    system[lattice(0)] = lambda site, strength: strength
    system[lattice.neighbors()] = hopping
    for direction in (-1, 1):
        wire = kwant.Builder(kwant.TranslationalSymmetry((direction,)))
        wire[lattice(0)] = 0
        wire[lattice.neighbors()] = hopping
        system.attach_lead(wire)
    return Pump(system, Cycle.through({"strength": [*strengths, strengths[0]]}), energy)


ENERGIES = pytest.mark.parametrize("energy", [-2.0, -0.7, 0.0, 1.1, 2.3])
STRENGTHS = pytest.mark.parametrize("strength", [-1.7, 0.4, 3.0])
HOPPINGS = pytest.mark.parametrize("hopping", [-1.3, 1.3])


@HOPPINGS
@STRENGTHS
@ENERGIES
def test_impurity_on_a_wire(energy: float, strength: float, hopping: float) -> None:
    trace = reflect(impurity_wire([strength, 0.0, 1.0], energy, hopping), 2 * pi * np.arange(3) / 3)
    r, t = trace.reflection[:, 0, 0], trace.transmission[:, 0, 0]
    v = sqrt(4 * hopping**2 - energy**2)
    # E. N. Economou, Green's Functions in Quantum Physics, Springer (citation from memory)
    assert t[0] / t[1] == pytest.approx(1j * v / (1j * v - strength), abs=1e-11)
    assert r[0] / r[2] == pytest.approx(strength * (1j * v - 1) / (1j * v - strength), abs=1e-11)
    assert abs(r[0]) ** 2 == pytest.approx(strength**2 / (strength**2 + v**2), abs=1e-11)


@HOPPINGS
@STRENGTHS
@pytest.mark.parametrize("first", [0, -3])
def test_reflection_of_an_impurity_is_referred_to_the_interface(strength: float, hopping: float, first: int) -> None:
    energy = 0.7
    found = absolute_reflection(impurity_wire([strength, 0.0, 1.0], energy, hopping, first=first, last=2), [0.0])
    v, step = sqrt(4 * hopping**2 - energy**2), lead_amplitude(energy, abs(hopping)) / hopping
    # Economou as above; the way to the leftmost site and back is derived
    np.testing.assert_allclose(found, [strength / (1j * v - strength) * step ** (-2 * first)], rtol=0, atol=EXACT)


def test_impurity_on_a_wire_by_value() -> None:
    trace = reflect(impurity_wire([0.4, 0.0, 1.0], 0.0, 1.3), [0.0, 2 * pi / 3])
    r, t = trace.reflection[:, 0, 0], trace.transmission[:, 0, 0]
    # Economou as above, evaluated by hand
    assert t[0] / t[1] == pytest.approx(0.976878612717 - 0.150289017341j, abs=1e-11)
    assert abs(r[0]) ** 2 == pytest.approx(0.0231213872832, abs=1e-11)


# --- decay inside the gap ---


def still_dimer(cells: int, energy: float) -> Pump:
    """Return the dimerised chain with bonds 1.3 and 0.7 and levels +-0.2, at rest."""
    return rice_mele(fixed(0.3, 0.2), cells=cells, energy=energy, probe=Lead(1.5), drain=Lead(1.5, contact=0.8))


def transmission(cells: int, energy: float) -> float:
    return float(reflect(still_dimer(cells, energy), [0.0]).leakage[0])


@pytest.mark.parametrize(
    ("energy", "cells", "expected", "relative"),
    [
        (0.0, 4, 0.273028, 2e-6),
        (0.0, 8, 0.271768680, 2e-9),
        (0.0, 12, 0.271761813, 2e-9),
        (0.25, 12, 0.301218586, 2e-9),
    ],
)
def test_one_more_cell_lets_less_through(energy: float, cells: int, expected: float, relative: float) -> None:
    ratio = transmission(cells + 1, energy) / transmission(cells, energy)
    # derived; computed independently and printed to as many decimals as `relative` says
    assert ratio == pytest.approx(expected, rel=relative)


@pytest.mark.parametrize(("energy", "decay_squared"), [(0.0, 0.271761775), (0.25, 0.301218491)])
def test_transmission_falls_at_the_decay_of_the_complex_band(energy: float, decay_squared: float) -> None:
    # W. Kohn, Phys. Rev. 115, 809 (1959) (citation from memory); the number derived
    assert decay_per_cell(still_dimer(1, energy)) ** 2 == pytest.approx(decay_squared, rel=2e-9)
    assert transmission(13, energy) / transmission(12, energy) == pytest.approx(decay_squared, rel=5e-7)


def test_transmission_through_four_cells_by_value() -> None:
    # derived; computed independently
    assert transmission(4, 0.0) == pytest.approx(1.269702e-2, rel=5e-7)


@settings(derandomize=True, deadline=None)
@given(delta=st.floats(-0.9, 0.9), stagger=st.floats(-1, 1), share=st.floats(-0.95, 0.95))
def test_slowest_state_of_the_dimerised_chain(delta: float, stagger: float, share: float) -> None:
    inside, between, energy = 1 + delta, 1 - delta, share * sqrt(stagger**2 + 4 * delta**2)
    cell, hop = np.array([[stagger, -inside], [-inside, -stagger]]), np.array([[0, -between], [0, 0]])
    x = (energy**2 - stagger**2 - inside**2 - between**2) / (inside * between)
    found = slowest(cell.astype(complex), hop.astype(complex), energy)
    # derived: decay + 1 / decay = X; compared as X, which is smooth where the decay is not
    assert found <= 1
    assert -(found + 1 / found) == pytest.approx(x, rel=1e-7)


def test_decay_of_a_pump_is_its_slowest_over_the_cycle() -> None:
    pump = rice_mele(loop(), cells=3)
    phases = 2 * pi * np.arange(64) / 64
    h, hop = np.moveaxis(bloch_cell(pump).blocks(phases), 1, 0)
    largest = max(slowest(a, b, 0.0) for a, b in zip(h, hop, strict=True))
    # derived: the loop's largest decay, squared, is 0.3716 a cell
    assert decay_per_cell(pump) == largest
    assert largest**2 == pytest.approx(0.3716, abs=5e-5)


# --- phase and density of states ---


def slope(function: Callable[[float], float], point: float, step: float) -> float:
    """Return the derivative of an angle by a five-point rule; angles are compared on the circle."""
    middle = function(point)
    near, far = (angle(function(point + d) - middle) - angle(function(point - d) - middle) for d in (step, 2 * step))
    return (8 * near - far) / (12 * step)


def angle(difference: float) -> float:
    return float(np.angle(np.exp(1j * difference)))


@pytest.mark.parametrize(("energy", "expected"), [(-0.8, 0.02998313), (0.3, -0.00920839), (1.2, -0.06375643)])
def test_phase_of_an_impurity_counts_the_states_it_adds(energy: float, expected: float) -> None:
    def phase(level: float) -> float:
        pump = impurity_wire([0.9, 0.0, 0.0], level, 1.0)
        with_impurity, without = np.linalg.det(scattering_matrices(pump, np.array([0.0, 2 * pi / 3])))
        return float(np.angle(with_impurity / without))

    # J. Friedel, Phil. Mag. 43, 153 (1952) (citation from memory): -U E / (pi v (v^2 + U^2)), printed to eight decimals
    assert slope(phase, energy, 1e-2) / (2 * pi) == pytest.approx(expected, abs=1e-8)


def edge_resonance(contact: float, energies: NDArray[np.float64]) -> NDArray[np.complex128]:
    """Return r of a dimerised chain with an edge level at 0.1, over energies."""
    chain = rice_mele(fixed(-0.5, 0.1), cells=30, probe=Lead(1.0, contact=contact))
    return np.array([absolute_reflection(chain.at_fermi_level(float(e)), [0.0])[0] for e in energies])


@pytest.mark.parametrize(("contact", "turn"), [(0.3, 0.9571543634), (0.1, 0.9953830466), (0.05, 0.9988491586)])
def test_an_edge_level_turns_the_phase_once_round(contact: float, turn: float) -> None:
    width = contact**2 * (1 - (1 / 3) ** 2)
    # from -0.95 to 0.95, finest at the level
    energies = 0.1 + width * np.sinh(np.linspace(*np.arcsinh([-1.05 / width, 0.85 / width]), 40))
    z = np.array([lead_amplitude(energy, 1.0) for energy in energies])
    against_wall = edge_resonance(contact, energies) / (-z / z.conj())
    # E. P. Wigner, Phys. Rev. 98, 145 (1955); F. T. Smith, Phys. Rev. 118, 349 (1960) (citations from memory): one
    # state, one turn, in the positive sense with growing energy; the little that falls outside the window derived
    assert steps(against_wall[:, None, None]).turns == pytest.approx(turn, abs=1e-9)


@pytest.mark.parametrize(
    ("contact", "peak", "height", "relative"),
    [(0.3, 0.10445, 3.984, 3e-4), (0.1, 0.10045, 35.855, 3e-5), (0.05, 0.10011, 143.42, 4e-5)],
)
def test_delay_on_an_edge_level(contact: float, peak: float, height: float, relative: float) -> None:
    def phase(energy: float) -> float:
        return float(np.angle(edge_resonance(contact, np.array([energy]))[0]))

    # Wigner and Smith as above; height 1 / (pi w), w = tc^2 (1 - (t1/t2)^2) v / (2 tl^2), derived up to O(tc^4)
    width = contact**2 * (1 - (1 / 3) ** 2) * sqrt(4 - 0.1**2) / 2
    assert 1 / (pi * width) == pytest.approx(height, rel=relative)
    assert slope(phase, peak, width / 50) / (2 * pi) == pytest.approx(height, rel=relative)
