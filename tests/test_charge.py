"""The charge of a slow cycle against closed forms, tabulated values, and its own laws."""

from __future__ import annotations

from math import pi

import numpy as np
import pytest
from devices import loop, rice_mele

from scatterpump.builder.description import Lead
from scatterpump.cycle import Cycle
from scatterpump.errors import ClosedProbeError, InputError
from scatterpump.operation.charge import charge
from scatterpump.operation.frozen import frozen_charge
from scatterpump.operation.panels import differentiation, gauss, integrate, lobatto
from scatterpump.operation.slow import SlowCharge, slow_charge
from scatterpump.operation.wires import Wire, wires
from scatterpump.pump import Pump


def two_impurities(cycle: Cycle, *, apart: int = 1, energy: float = 1.0) -> Pump:
    """Return a wire of hopping 1 with impurities x1 on site 0 and x2 on site `apart`."""
    import kwant

    lattice, system = kwant.lattice.chain(norbs=1), kwant.Builder()
    system[(lattice(x) for x in range(-1, apart + 2))] = 0.0
    system[lattice(0)], system[lattice(apart)] = (lambda site, x1: x1), (lambda site, x2: x2)
    system[lattice.neighbors()] = -1.0
    for direction in (-1, 1):
        wire = kwant.Builder(kwant.TranslationalSymmetry((direction,)))
        wire[lattice(0)], wire[lattice.neighbors()] = 0.0, -1.0
        system.attach_lead(wire)
    return Pump(system, cycle, energy)


def circle(middle: float, radius: float) -> Cycle:
    return Cycle.ellipse(x=("x1", middle, radius), y=("x2", middle, radius))


# Brouwer's charge of the dimerised chain of n cells, by a trapezoidal rule with 256 phases over the fields of Green
# functions (derived; spectrally accurate, as in L. N. Trefethen, J. A. C. Weideman, SIAM Rev. 56, 385 (2014))
DIMERISED = {
    1: 0.178885438200,
    2: 0.720396181686,
    4: 0.983868696965,
    8: 0.999851869254,
    15: 0.999999905520,
}


@pytest.mark.parametrize(("cells", "expected"), DIMERISED.items())
def test_charge_of_a_finite_chain_is_known_to_twelve_digits(cells: int, expected: float) -> None:
    found = frozen_charge(rice_mele(loop(), cells=cells))
    assert found.leads[0] == pytest.approx(expected, abs=1e-12)
    assert found.leads.sum() == pytest.approx(0, abs=1e-14)  # charge is conserved


@pytest.mark.parametrize(
    ("middle", "radius", "apart", "expected"),
    [
        (0.0, 1.0, 1, -0.205056),
        (0.0, 1.0, 2, 0.205056),
        (1.0, 0.8, 1, 0.148605),
        (1.0, 0.8, 2, 0.117942),
        (1.5, 1.2, 1, 0.345470),
        (1.5, 1.2, 2, 0.106457),
    ],
)
def test_charge_of_two_impurities_in_a_wire(middle: float, radius: float, apart: int, expected: float) -> None:
    found = slow_charge(two_impurities(circle(middle, radius), apart=apart)).found
    # P. W. Brouwer, Phys. Rev. B 58, R10135 (1998), line and surface integral of the closed form of S (derived)
    assert found.leads[0] == pytest.approx(expected, abs=2e-6)


@pytest.mark.parametrize("size", [0.05, 0.02])
def test_charge_of_a_small_cycle_with_corners_is_its_area_times_the_curvature(size: float) -> None:
    """A diamond: H is straight between its corners, and S has a kink at each."""
    corners = {"x1": [size, 0.0, -size, 0.0, size], "x2": [0.0, size, 0.0, -size, 0.0]}
    found = slow_charge(two_impurities(Cycle.through(corners))).found
    # weak-pumping law Q = (area/pi) sin(2kd)/v^2, with k = 2 pi/3 and v^2 = 3 at E = 1 (derived); error of order size^2
    law = 2 * size**2 / pi * np.sin(4 * pi / 3) / 3
    assert found.leads[0] == pytest.approx(law, rel=size**2)
    assert found.evaluations < 500


def test_leak_is_known_far_below_rounding() -> None:
    shorter, found = (slow_charge(rice_mele(loop(), cells=cells)) for cells in (39, 40))
    assert found.residual is not None
    # evanescent decay |lambda|^2 a cell, 0.3716 where it is slowest, times (n/(n+1))^1/2 (W. Kohn, Phys. Rev. 115, 809
    # (1959), citation from memory; the power by the method of steepest descent, derived)
    assert found.found.leak / shorter.found.leak == pytest.approx(0.3716 * np.sqrt(39 / 40), rel=5e-3)
    assert -1e-17 < found.found.leak < 0
    assert abs(found.residual) < 1e-14


def test_deviation_is_the_sum_of_its_parts() -> None:
    found = charge(rice_mele(loop(), cells=4))
    assert found.leakage is not None and found.quadrature is not None
    # derived: the definition
    assert found.deviation == pytest.approx(found.leakage + found.quadrature + found.thermal + found.speed, abs=1e-15)
    assert found.leakage == pytest.approx(0.983868696965 - 1, abs=1e-11)  # as above


def test_reversed_cycle_carries_the_charge_back() -> None:
    forth, back = (slow_charge(rice_mele(cycle, cells=4)).found.leads for cycle in (loop(), loop().reversed()))
    # derived
    assert back == pytest.approx(-forth, abs=1e-12)


def test_narrow_levels_are_not_passed_by() -> None:
    """Behind a contact of 1e-3 a level is 2e-6 radians wide: panels see it because the proof says where it is."""
    narrow = Lead(hopping=2.0, contact=1e-3)
    found = slow_charge(rice_mele(loop(), cells=14, energy=0.1, probe=narrow, drain=narrow))
    # D. J. Thouless, Phys. Rev. B 27, 6083 (1983) (citation from memory)
    assert found.found.leads == pytest.approx([1, -1], abs=1e-9)
    assert found.error < 1e-9


def test_without_a_proof_the_error_is_a_whole_charge() -> None:
    found = frozen_charge(two_impurities(circle(1.0, 0.8)))
    # derived: nothing tells whether a level was passed by
    assert SlowCharge(found, None, narrow=False, proven=False).error >= 1
    assert SlowCharge(found, None, narrow=False, proven=True).error < 1e-9


def test_three_leads_share_the_charge() -> None:
    import kwant

    pump = two_impurities(circle(1.0, 0.8), apart=2)
    lattice = kwant.lattice.chain(norbs=1)
    wire = kwant.Builder(kwant.TranslationalSymmetry((-1,)))
    wire[lattice(0)], wire[lattice.neighbors()] = 0.0, -1.0
    side = kwant.lattice.chain(norbs=1, name="side")
    pump.system[side(0)] = 0.0
    pump.system[side(0), lattice(2)] = -0.5
    branch = kwant.Builder(kwant.TranslationalSymmetry((-1,)))
    branch[side(0)], branch[side.neighbors()] = 0.0, -1.0
    pump.system.attach_lead(branch)
    found = slow_charge(Pump(pump.system, pump.cycle, 1.0)).found
    # derived: charge is conserved, and no lead is left out
    assert found.leads.sum() == pytest.approx(0, abs=1e-11)
    assert np.abs(found.leads).min() > 1e-3


def test_bad_arguments_are_refused() -> None:
    pump = rice_mele(loop(), cells=2)
    with pytest.raises(InputError, match="temperature is -1"):
        charge(pump, temperature=-1)
    with pytest.raises(InputError, match="frequency is nan"):
        charge(pump, frequency=float("nan"))
    with pytest.raises(ClosedProbeError):
        charge(pump.at_fermi_level(5.0))


def test_panels_integrate_peaks_and_polynomials() -> None:
    def measure(starts: np.ndarray, ends: np.ndarray) -> np.ndarray:
        nodes, weights = gauss(6)
        places = starts[:, None] + (ends - starts)[:, None] / 2 * (1 + nodes)
        values = np.stack([1e-4 / (places**2 + 1e-8), places**3 + 1], axis=-1)
        return np.einsum("pik,i,p->pk", values, weights, (ends - starts) / 2)

    found = integrate(measure, np.array([-1.0, 0.3, 1.0]), absolute=np.full(2, 1e-9))
    # textbook integrals (common practice)
    assert found.values == pytest.approx([2 * np.arctan(1e4), 2], abs=1e-9)
    assert found.converged
    assert (found.errors < 1e-9).all()


def test_exhausted_budget_is_told() -> None:
    def measure(starts: np.ndarray, ends: np.ndarray) -> np.ndarray:
        return (np.sqrt(np.abs(starts)) * (ends - starts))[:, None]

    found = integrate(measure, np.array([0.0, 1.0]), absolute=np.array([1e-12]), budget=30)
    # derived
    assert not found.converged
    assert found.errors[0] > 1e-12


@pytest.mark.parametrize("count", [4, 10])
def test_lobatto_rule_integrates_and_differentiates_polynomials(count: int) -> None:
    nodes, weights = lobatto(count)
    power = count - 1
    # M. Abramowitz, I. A. Stegun, Handbook of Mathematical Functions, 25.4.32 (citation from memory): exact to 2n - 3
    assert weights @ nodes ** (2 * count - 4) == pytest.approx(2 / (2 * count - 3), rel=1e-12)
    assert differentiation(count) @ nodes**power == pytest.approx(power * nodes ** (power - 1), abs=1e-11)


def test_wires_in_closed_form_agree_with_general_modes() -> None:
    """A ribbon lead, whose transverse modes are separate wires, some open and some closed."""
    cell = np.array([[0.3, -0.7j], [0.7j, -0.1]])
    wire = Wire(np.arange(2), cell + 0.0, -1.3 * np.eye(2, dtype=complex))
    energies = np.array([-4.0, -2.5, -0.2, 1.1, 3.4])
    sigma, widths = wire.selfenergy(energies)
    reference, broad = wire._by_kwant(energies)
    # kwant, a general-purpose library
    assert sigma == pytest.approx(reference, abs=1e-12)
    assert widths @ widths.conj().swapaxes(1, 2) == pytest.approx(broad @ broad.conj().swapaxes(1, 2), abs=1e-12)


def test_channels_are_counted() -> None:
    (probe, drain) = wires(rice_mele(loop(), cells=2, probe=Lead(hopping=0.5), drain=Lead(hopping=2.0)))
    # derived: a wire's band ends at twice its hopping
    assert [probe.channels(energy) for energy in (0.9, 1.1)] == [1, 0]
    assert [drain.channels(energy) for energy in (3.9, 4.1)] == [1, 0]
