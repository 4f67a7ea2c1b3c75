"""An independent referee of value and sign: the time-dependent Schroedinger equation, driven slowly.

Nothing here but numpy and scipy computes the charges that are compared with the winding.  hbar = 1; the lower band is
filled; the dimerised chain runs round delta + i stagger = 0.5 e^{i phi}, whose smallest gap is 1.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from devices import RICE_MELE_LOOPS, rice_mele
from numpy.typing import NDArray
from scipy.linalg import solve_banded

from scatterpump.winding.certificate import certify

TURN = 2 * np.pi
Floats = NDArray[np.float64]


def bloch(k: Floats, phi: float) -> tuple[Any, float, Any]:
    """Return off-diagonal element and level of the dimerised chain, and the derivative of the former by k."""
    onward = (1 - 0.5 * np.cos(phi)) * np.exp(-1j * k)
    return -(1 + 0.5 * np.cos(phi)) - onward, 0.5 * np.sin(phi), 1j * onward


def charge_through_a_bond(period: float, *, sense: int = 1, momenta: int = 400, step: float = 0.02) -> float:
    """Return the charge that one cycle of duration `period` carries to the right in an endless chain."""
    k = TURN * (np.arange(momenta) + 0.5) / momenta
    off, level, _ = bloch(k, 0.0)
    energy = np.sqrt(np.abs(off) ** 2 + level**2)
    upper, lower = off / np.sqrt(2 * energy * (energy + level)), -np.sqrt((energy + level) / (2 * energy)) + 0j
    charge, steps = 0.0, round(period / step)
    for number in range(steps):
        off, level, slope = bloch(k, sense * TURN * (number + 0.5) / steps)
        energy = np.sqrt(np.abs(off) ** 2 + level**2)
        turn, over = np.cos(energy * step / 2), -1j * np.sin(energy * step / 2) / energy
        for half in range(2):  # the current is taken in the middle of the exact step
            upper, lower = (
                (turn + over * level) * upper + over * off * lower,
                over * off.conj() * upper + (turn - over * level) * lower,
            )
            if half == 0:
                charge += step * np.mean(2 * np.real(upper.conj() * slope * lower))
    return charge


@pytest.mark.parametrize(("period", "tolerance"), [(20, 4e-2), (40, 3e-3), (80, 2e-4), (160, 2e-4)])
def test_slow_drive_of_an_endless_chain_carries_the_winding(period: float, tolerance: float) -> None:
    winding = certify(rice_mele(RICE_MELE_LOOPS["counter-clockwise"][0]))
    # D. J. Thouless, Phys. Rev. B 27, 6083 (1983) (citation from memory); what is lost at each period derived
    assert charge_through_a_bond(period) == pytest.approx(winding.number, abs=tolerance)


def test_slow_drive_backwards_carries_the_winding_of_the_reversed_loop() -> None:
    winding = certify(rice_mele(RICE_MELE_LOOPS["clockwise"][0]))
    # Thouless as above
    assert charge_through_a_bond(160, sense=-1) == pytest.approx(winding.number, abs=1e-3)


def open_chain(phi: float, wire: int, cells: int) -> tuple[Floats, Floats]:
    """Return levels and hoppings of wire, dimerised chain, wire: hopping 2 in the wires, 1 at the contacts."""
    sign = (-1.0) ** np.arange(2 * cells)
    levels = np.concatenate([np.zeros(wire), 0.5 * np.sin(phi) * sign, np.zeros(wire)])
    inside = 1 + 0.5 * np.cos(phi) * sign[:-1]
    bonds = np.concatenate([np.full(wire - 1, 2.0), [1.0], inside, [1.0], np.full(wire - 1, 2.0)])
    return levels, -bonds


def charges_of_an_open_device(period: float, *, sense: int, step: float = 0.05) -> tuple[float, float]:
    """Return what one cycle adds to the left and to the right half: wire of 150, device of 12 cells, wire of 150.

    Crank-Nicolson steps: (1 + i H dt / 2) psi' = (1 - i H dt / 2) psi with H in the middle of the step.
    """
    levels, bonds = open_chain(0.0, 150, 12)
    states = np.linalg.eigh(np.diag(levels) + np.diag(bonds, 1) + np.diag(bonds, -1))[1]
    states = states[:, : len(levels) // 2].astype(complex)
    before, steps = (np.abs(states) ** 2).sum(axis=1), round(period / step)
    for number in range(steps):
        levels, bonds = open_chain(sense * TURN * (number + 0.5) / steps, 150, 12)
        banded = np.zeros((3, len(levels)), dtype=complex)
        banded[0, 1:] = banded[2, :-1] = 0.5j * step * bonds
        banded[1] = 1 + 0.5j * step * levels
        states = 2 * solve_banded((1, 1), banded, states, check_finite=False) - states
    left, right = ((np.abs(states) ** 2).sum(axis=1) - before).reshape(2, -1).sum(axis=1)
    return float(left), float(right)


@pytest.mark.parametrize(("name", "sense"), [("counter-clockwise", 1), ("clockwise", -1)])
def test_positive_winding_moves_charge_from_probe_to_drain(name: str, sense: int) -> None:
    """The probe is the left wire: it loses what the right one gains."""
    winding = certify(rice_mele(RICE_MELE_LOOPS[name][0]))
    left, right = charges_of_an_open_device(50, sense=sense)
    # derived; after one cycle of duration 50 the two halves differ by -0.99904 and +0.99904
    assert left == pytest.approx(-winding.number, abs=5e-3)
    assert right == pytest.approx(winding.number, abs=5e-3)
    assert abs(right) == pytest.approx(0.99904, abs=1e-4)
