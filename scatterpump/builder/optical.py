"""A superlattice of light for cold atoms: a short lattice at rest and a long one, of twice its spacing, that slides.

    V(x, phi) = V_s sin^2(pi x/d_s + pi/2) + V_l sin^2(pi x/d_l - phi/2),      d_l = 2 d_s

(form from memory), as in M. Lohse et al., Nature Phys. 12, 350 (2016), and S. Nakajima et al., Nature Phys. 12, 296
(2016).  Energies in recoils of the short lattice, E_r = hbar^2 pi^2/(2 m d_s^2), lengths in d_s, on a grid (`grid`).
In a cycle the long lattice moves on by d_l, away from the probe.

Atoms in a trap have neither probe nor drain: the two free wires stand for whatever is beyond the ends.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from math import pi
from typing import Annotated, Any, ClassVar

import numpy as np

from scatterpump.builder.description import LARGEST, LONGEST, require
from scatterpump.builder.grid import Landscape, centres, endless, wired
from scatterpump.builder.quantity import Unit, read_quantities
from scatterpump.builder.values import box_noise
from scatterpump.cycle import Cycle
from scatterpump.errors import InputError
from scatterpump.pump import Continuum, Pump, Units

__all__ = ["OpticalLattice"]

COARSEST, FINEST = 3, 1000
RATIO = 2  # of the two spacings


@dataclass(frozen=True, kw_only=True)
class OpticalLattice:
    """Atoms in a sliding superlattice of light.

    Parameters
    ----------
    cells : int
        Length of the lattice, in spacings of the long lattice.
    short_depth, long_depth : float
        V_s and V_l in recoils of the short lattice.
    fermi_level : float
        Energy of the atoms sent in, in recoils; 0 is where all light is off.
    lead_level : float
        Potential beyond both ends, in recoils; below the Fermi level.
    points : int
        Points of the grid in a spacing of the short lattice, 3 to 1000.
    disorder, seed : float and int
        Full width in recoils of a box from which a static energy is drawn at each point of the grid, and which sample.
    spacing, mass : float, optional
        d_s in nm and the atom's mass in atomic mass units.  Given both, results come in the laboratory's units too.
    cycle : Cycle
        What the pump is driven round, a cycle that sets ``phi``.
    name : str
        What to call the device in a report.

    Raises
    ------
    InputError
        If a value is out of range, or the cycle does not set ``phi``.
    """

    cells: int
    short_depth: float
    long_depth: float
    fermi_level: float
    lead_level: float = 0.0
    points: int = 8
    disorder: float = 0.0
    seed: int = 0
    spacing: Annotated[float, Unit("nm")] | None = None
    mass: Annotated[float, Unit("u")] | None = None
    cycle: Cycle = field(default_factory=Cycle.angle)
    name: str = "optical superlattice"

    __pydantic_config__: ClassVar[Any] = {"extra": "forbid"}

    def __post_init__(self) -> None:
        read_quantities(self)
        require(COARSEST <= self.points <= FINEST, "points", self.points, f"a whole number, {COARSEST} to {FINEST}")
        most = LONGEST // (RATIO * self.points)
        require(1 <= self.cells <= most, "cells", self.cells, f"a whole number from 1 to {most}")
        for name in ("short_depth", "long_depth", "disorder"):
            require(0 <= getattr(self, name) < LARGEST, name, getattr(self, name), "an energy of at least 0")
        for name in ("fermi_level", "lead_level"):
            require(abs(getattr(self, name)) < LARGEST, name, getattr(self, name), "a finite energy")
        require(self.lead_level < self.fermi_level, "lead_level", self.lead_level, "an energy below the Fermi level")
        top = self.lead_level + 4 * self.hopping
        require(self.fermi_level < top, "points", self.points, "so many that the wires still have a wave there")
        for name in ("spacing", "mass"):
            value = getattr(self, name)
            require(value is None or 0 < value < LARGEST, name, value, "a positive quantity")
        if "phi" not in self.cycle.names:
            raise InputError("the cycle does not set phi, by which the long lattice slides", allowed="a cycle of phi")

    @property
    def hopping(self) -> float:
        """The grid's t = hbar^2/(2 m a^2), in recoils."""
        return (self.points / pi) ** 2

    def resized(self, cells: int) -> OpticalLattice:
        """Return the same lattice `cells` spacings of the long lattice long."""
        return replace(self, cells=cells)

    def pump(self) -> Pump:
        """Build the kwant system and return it as a `Pump`: probe lead 0, drain lead 1; energies in recoils."""
        light = self._landscape(self.cells)
        rough = replace(light, still=light.still + box_noise(self.disorder, len(light.still), f"onsite {self.seed}"))
        continuum, units = self._laboratory()
        return Pump(
            wired(rough, self.hopping, (self.lead_level, self.lead_level), self.cycle),
            self.cycle,
            self.fermi_level,
            bulk=endless(self._landscape(1), self.hopping, self.cycle),
            name=self.name,
            continuum=continuum,
            units=units,
        )

    def _laboratory(self) -> tuple[Continuum | None, Units | None]:
        if self.spacing is None or self.mass is None:
            return None, None
        from scipy.constants import atomic_mass, hbar

        spacing, mass = self.spacing * 1e-9, self.mass * float(atomic_mass)
        recoil, step = float((hbar * pi / spacing) ** 2 / (2 * mass)), spacing / self.points
        return Continuum(step, mass, recoil), Units(recoil, step)

    def _landscape(self, cells: int) -> Landscape:
        x = centres(RATIO * self.points * cells, 1 / self.points)
        still = self.short_depth / 2 * (1 + np.cos(2 * pi * x)) + self.long_depth / 2
        angle = 2 * pi * x / RATIO
        return Landscape(still, -self.long_depth / 2 * np.cos(angle), -self.long_depth / 2 * np.sin(angle))
