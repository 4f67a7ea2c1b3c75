"""Rounding.

Where double precision cannot tell, the proof refuses or takes another way, and never states a wrong number.
"""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
import pytest
from devices import loop, rice_mele

from scatterpump.builder.description import Lead
from scatterpump.solver.band import norm_bound, row_sum_norm
from scatterpump.solver.folded import FoldedDevice, fold
from scatterpump.winding.certificate import certify
from scatterpump.winding.cover import cover_cycle, join

SEEDS = 250
NOISE = 2e-16


@dataclass(frozen=True, eq=False)
class NoisyDevice(FoldedDevice):
    """A device whose matrix is wrong by a fresh complex perturbation of rounding size at every look."""

    seed: int = 0

    def matrix(self, phase: float) -> np.ndarray:
        exact = super().matrix(phase)
        rng = np.random.default_rng([self.seed, int(phase * 2**40)])
        noise = rng.standard_normal(exact.shape) + 1j * rng.standard_normal(exact.shape)
        return exact + NOISE * row_sum_norm(exact) * noise * (exact != 0)


def noisy(device: FoldedDevice, seed: int) -> NoisyDevice:
    return NoisyDevice(**{f.name: getattr(device, f.name) for f in fields(FoldedDevice)}, seed=seed)


@pytest.mark.parametrize("width", [1e-13, 1e-14, 1e-15, 1e-16])
def test_noise_never_makes_a_wrong_number(width: float) -> None:
    # derived: half-width contact^2 (8/9) / (lead hopping * 0.5) of the resonance; the loop goes round the gapless
    # origin once
    pump = rice_mele(loop(), cells=20, probe=Lead(2.0, contact=float(np.sqrt(width * 9 / 8))))
    device = fold(pump)
    slopes = device.path.slopes(lambda entries: norm_bound(device.band(entries)))
    covers = [cover_cycle(noisy(device, seed), slopes, budget=30) for seed in range(SEEDS)]
    numbers = {round(sum(join(list(cover.centres))) / (2 * np.pi)) for cover in covers if cover.closed}
    assert numbers <= {1}
    if width <= 1e-15:
        assert not numbers  # there is nothing left to see, and the guard says so


@pytest.mark.parametrize("contact", [3e-7, 1e-7, 3e-8, 1e-8, 3e-9, 1e-9])
def test_open_reference_needs_no_width(contact: float) -> None:
    winding = certify(rice_mele(loop(), cells=40, probe=Lead(2.0, contact=contact)))
    # the loop goes round the gapless origin once
    assert (winding.number, winding.certified) == (1, True)
    assert winding.crossings[0].width == pytest.approx(contact**2 * 8 / 9, rel=1e-3)


def test_refusal_names_the_reason_and_the_place() -> None:
    winding = certify(rice_mele(loop(), cells=10, probe=Lead(2.0, contact=1e-7)))
    assert (winding.number, winding.certified) == (None, False)
    assert "contact" in winding.reason
    assert winding.unproven


def test_budget_is_a_reason() -> None:
    winding = certify(rice_mele(loop(), cells=20), budget=6)
    assert winding.number is None
    assert "budget" in winding.reason
    assert all(0 <= start < end for start, end in winding.unproven)
