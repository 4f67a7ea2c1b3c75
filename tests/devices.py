"""Devices that the tests share, each a line or two away from the literature's notation, and known integers."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Lead, Wave
from scatterpump.cycle import Cycle
from scatterpump.pump import Pump
from scatterpump.solver.modes import with_modes
from scatterpump.solver.reflect import reflect

WIDE = Lead(hopping=2.0)
STAGGER = Wave("stagger", 2, harmonic=0)  # (-1)^x stagger on site x
DELTA = Wave("delta", 2, lag=-pi / 2, harmonic=0)  # (-1)^x delta on the bond between x and x + 1


def loop(*, delta: tuple[float, float] = (0.0, 0.5), stagger: tuple[float, float] = (0.0, 0.5)) -> Cycle:
    """Return the counter-clockwise ellipse in the plane (delta, stagger), each given as (centre, radius)."""
    return Cycle.ellipse(x=("delta", *delta), y=("stagger", *stagger))


def fixed(delta: float, stagger: float) -> Cycle:
    """Return the cycle that rests at one point."""
    return loop(delta=(delta, 0.0), stagger=(stagger, 0.0))


def rice_mele(cycle: Cycle, *, cells: int = 30, energy: float = 0.0, probe: Lead = WIDE, drain: Lead = WIDE) -> Pump:
    """Return the dimerised chain with staggered levels: bonds 1 + (-1)^x delta, sites (-1)^x stagger."""
    return ModulatedChain(
        sites=2 * cells, fermi_level=energy, cycle=cycle, onsite=[STAGGER], bonds=[DELTA], probe=probe, drain=drain
    ).pump()


@dataclass(frozen=True)
class HarperGap:
    """A gap of the chain with potential V cos(2 pi p x / q), and its Hall integer t from r = q s + p t."""

    p: int
    q: int
    number: int
    strength: float
    energy: float
    hall: int

    @property
    def sites(self) -> int:
        """A length at which less than 1e-9 leaks: the second gaps of 1/5 are the narrowest."""
        return (20 if abs(self.hall) == 2 else 12) * self.q

    def __str__(self) -> str:
        return f"{self.p}/{self.q} gap {self.number}"


# D. J. Thouless, M. Kohmoto, M. P. Nightingale, M. den Nijs, Phys. Rev. Lett. 49, 405 (1982): the Hall integers t.
# Fermi levels are the middles of the energy windows that are free of states for every phase of the potential (derived).
HARPER_GAPS = (
    HarperGap(1, 3, 1, 1.5, -1.211, 1),
    HarperGap(1, 3, 2, 1.5, 1.211, -1),
    HarperGap(2, 3, 1, 1.5, -1.211, -1),
    HarperGap(2, 3, 2, 1.5, 1.211, 1),
    HarperGap(1, 4, 1, 1.5, -1.646, 1),
    HarperGap(1, 4, 3, 1.5, 1.646, -1),
    HarperGap(1, 5, 1, 1.8, -2.024, 1),
    HarperGap(1, 5, 2, 1.8, -0.614, 2),
    HarperGap(1, 5, 3, 1.8, 0.614, -2),
    HarperGap(1, 5, 4, 1.8, 2.024, -1),
    HarperGap(2, 5, 2, 1.8, -0.898, 1),
    HarperGap(2, 5, 3, 1.8, 0.898, -1),
)


def harper(gap: HarperGap, *, harmonic: int = 1, sites: int | None = None) -> Pump:
    """Return the chain with potential V cos(2 pi p x / q - harmonic phi).

    The literature writes + phi, which is harmonic -1; with harmonic 1 the potential slides away from the probe.
    """
    wave = Wave(gap.strength, gap.q / gap.p, harmonic=harmonic)
    return ModulatedChain(
        sites=sites or gap.sites, fermi_level=gap.energy, onsite=[wave], probe=WIDE, drain=WIDE
    ).pump()


# Loops of the dimerised chain in the plane (delta, stagger), and how often each goes round the gapless origin.
# M. J. Rice, E. J. Mele, Phys. Rev. Lett. 49, 1455 (1982) (citation from memory); integers derived.
RICE_MELE_LOOPS = {
    "counter-clockwise": (loop(), 1),
    "clockwise": (loop(stagger=(0.0, -0.5)), -1),
    "trivial side": (loop(delta=(0.8, 0.3), stagger=(0.0, 0.3)), 0),
    "edge-state side": (loop(delta=(-0.6, 0.3), stagger=(0.0, 0.3)), 0),
    "above the origin": (Cycle.ellipse(x=("stagger", 0.8, 0.3), y=("delta", 0.0, 0.3)), 0),
    "twice": (loop().repeated(2), 2),
    "three times backwards": (loop(stagger=(0.0, -0.5)).repeated(3), -3),
}


def absolute_reflection(pump: Pump, phases: Any, *, endless: bool = False) -> NDArray[np.complex128]:
    """Return r of a one-channel probe, referred to the last lead-like site before the device, shape (n,).

    The solver's r is free by the phases of its lead modes; their amplitudes at the interface take that freedom away.
    """
    out, into = _mode_amplitudes(pump, pump.probe)
    return reflect(pump, phases, endless=endless).reflection[:, 0, 0] * out / into


def _mode_amplitudes(pump: Pump, lead: int) -> tuple[complex, complex]:
    modes = with_modes(pump).leads[lead].modes(pump.fermi_level)[0]
    amplitudes, incoming = modes.wave_functions[0], modes.velocities < 0
    (out,), (into,) = amplitudes[~incoming], amplitudes[incoming]
    return complex(out), complex(into)


def lead_amplitude(energy: float, hopping: float) -> complex:
    """Return z = hopping e^{ik} of the wave that runs away from the device, for a lead of on-site level 0."""
    return complex(energy, -np.sqrt(4 * hopping**2 - energy**2)) / 2
