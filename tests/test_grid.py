"""r over energies and phases at once: every lane is what kwant says at that energy.

C. W. Groth, M. Wimmer, A. R. Akhmerov, X. Waintal, New J. Phys. 16, 063065 (2014).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from devices import loop, rice_mele
from test_layered import strip

from scatterpump.errors import ClosedProbeError, InputError
from scatterpump.pump import Pump
from scatterpump.solver import direct
from scatterpump.solver.reflect import reflect_grid
from scatterpump.solver.trace import ReflectionTrace

PHASES = np.array([0.3, 2.0, 4.4])


def invariants(trace: ReflectionTrace) -> np.ndarray:
    """What does not depend on the arbitrary basis of modes at an energy: ratios of r and t between phases."""
    r = trace.reflection @ np.linalg.inv(trace.reflection[:1])
    return np.concatenate([np.linalg.det(r), np.abs(trace.transmission).sum(axis=(1, 2)) ** 2])


@pytest.mark.parametrize(
    ("pump", "energies"),
    [
        (rice_mele(loop(), cells=12), [-0.3, 0.0, 0.1, 0.3, 2.1]),
        (strip(3, 9, flux=0.1), [-2.9, -0.6, 0.2, 0.4, 1.9]),
        (strip(2, 10, third=True), [-0.4, 0.7]),
    ],
    ids=["chain", "modes that open and close", "three leads"],
)
def test_every_energy_is_kwants(pump: Pump, energies: list[float]) -> None:
    found = reflect_grid(pump, energies, PHASES)
    for energy, trace in zip(energies, found, strict=True):
        reference = direct.solve(replace(pump, system=pump.finalized, fermi_level=energy), PHASES)
        assert trace.energy == energy
        assert trace.channels == reference.channels
        np.testing.assert_allclose(invariants(trace), invariants(reference), rtol=0, atol=1e-9)


def test_many_phases_are_swept_an_energy_at_a_time() -> None:
    pump, phases = rice_mele(loop(), cells=12), np.linspace(0, 6, 70)
    for energy, trace in zip([0.0, 0.2], reflect_grid(pump, [0.0, 0.2], phases, transmission=False), strict=True):
        reference = direct.solve(replace(pump, system=pump.finalized, fermi_level=energy), phases[:3])
        ratio = trace.reflection[:3, 0, 0] / trace.reflection[0, 0, 0]
        expected = reference.reflection[:, 0, 0] / reference.reflection[0, 0, 0]
        np.testing.assert_allclose(ratio, expected, rtol=0, atol=1e-10)
        assert trace.transmission.shape == (70, 0, 1)


def test_an_energy_without_open_modes_is_told() -> None:
    with pytest.raises(ClosedProbeError, match="4.5"):
        reflect_grid(rice_mele(loop(), cells=5), [0.0, 4.5], PHASES)


def test_energies_are_finite_numbers() -> None:
    with pytest.raises(InputError, match="energies"):
        reflect_grid(rice_mele(loop(), cells=5), [0.0, np.nan], PHASES)
