"""A cylinder in a magnetic field, pumped by the flux threaded through it: its integer is the Hall number of the gap.

    H = sum_xy level |x,y><x,y|  -  hopping sum_xy (|x+1,y><x,y|  +  e^{i theta_xy} |x,y+1><x,y|  +  h.c.),

with x along the axis and y round it, y = around being y = 0 again.  theta_xy = 2 pi flux x is the field through
the wall, and the threaded flux takes phi off it: all of it on the one seam of bonds from the last row to the first, so
that the cycle closes at phi = 2 pi whatever the leads are.  Spread evenly over all bonds, phi / around each, H comes
back up to a gauge transformation only, which the leads do not share: det r does not close, and the audit says so.
With these signs the states slide away from the probe as phi grows, so W is the Hall number t itself.

References: R. B. Laughlin, Phys. Rev. B 23, 5632 (1981); D. R. Hofstadter, Phys. Rev. B 14, 2239 (1976) (citations
from memory).
"""

from __future__ import annotations

from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any, ClassVar, Literal

import numpy as np

from scatterpump.builder.description import LARGEST, Disorder, SheetLead, require
from scatterpump.builder.sheet import noise, ring_bonds, sheet_pump
from scatterpump.cycle import Cycle
from scatterpump.errors import InputError
from scatterpump.pump import Pump

__all__ = ["FluxCylinder"]

LONGEST = 1_000_000
WIDEST = 10_000
WIDEST_BULK = 240  # orbitals of a magnetic cell whose bands are worth searching


@dataclass(frozen=True, kw_only=True)
class FluxCylinder:
    """A cylinder of a square lattice between two leads, pumped by a threaded flux.

    Parameters
    ----------
    sites, around : int
        Length along the axis, at least 1, and circumference, at least 3, in lattice constants.
    hopping, level : float
        Hopping along the axis and round it, and on-site energy.
    flux : float
        Magnetic flux through each plaquette of the wall, in flux quanta.
    fermi_level : float
        Energy of the electrons sent in.
    gauge : "seam" or "spread"
        Where the threaded flux is.  "spread" is for seeing the audit sound its alarm.
    probe, drain : SheetLead
        The two leads, cylinders without a field; ``drain="wall"`` closes the far end.
    disorder : Disorder
        Static disorder of on-site energies, and of the hoppings along the axis.
    cycle : Cycle
        A cycle that sets ``phi``, the threaded flux in units of the flux quantum over 2 pi.
    name : str
        What to call the device in a report.

    Raises
    ------
    InputError
        If a value is out of range, or the cycle does not set ``phi``.
    """

    sites: int
    around: int
    hopping: float = 1.0
    level: float = 0.0
    flux: float = 0.0
    fermi_level: float = 0.0
    gauge: Literal["seam", "spread"] = "seam"
    probe: SheetLead = field(default_factory=SheetLead)
    drain: SheetLead | Literal["wall"] = field(default_factory=SheetLead)
    disorder: Disorder = field(default_factory=Disorder)
    cycle: Cycle = field(default_factory=Cycle.angle)
    name: str = "flux-threaded cylinder"

    __pydantic_config__: ClassVar[Any] = {"extra": "forbid"}

    def __post_init__(self) -> None:
        require(1 <= self.sites <= LONGEST, "sites", self.sites, f"a whole number from 1 to {LONGEST}")
        require(3 <= self.around <= WIDEST, "around", self.around, f"a whole number from 3 to {WIDEST}")
        for name in ("hopping", "level", "fermi_level"):
            require(abs(getattr(self, name)) < LARGEST, name, getattr(self, name), "a finite energy")
        require(abs(self.flux) < LARGEST, "flux", self.flux, "a finite number of flux quanta a plaquette")
        require(self.gauge in ("seam", "spread"), "gauge", self.gauge, '"seam" or "spread"')
        if "phi" not in self.cycle.names:
            raise InputError("the cycle does not set phi, the threaded flux", allowed="a cycle that sets phi")

    @property
    def period(self) -> int | None:
        """Columns in a magnetic cell, or None if it is longer than the cylinder or too large to search its bands."""
        ratio = Fraction(self.flux).limit_denominator(1000)
        exact = abs(float(ratio) - self.flux) < 1e-12
        cell = ratio.denominator
        return cell if exact and cell <= self.sites and cell * self.around <= WIDEST_BULK else None

    def pump(self) -> Pump:
        """Build the kwant system and return it as a `Pump`: probe lead 0, drain lead 1."""
        return sheet_pump(self, self._fill, self.around, closed=True)

    def _fill(self, builder: Any, lattice: Any, columns: range, bonds: range, disorder: Disorder) -> None:
        rows = range(self.around)
        onsite = noise(disorder.onsite, columns, rows, f"onsite {disorder.seed}")
        along = noise(disorder.bonds, bonds, rows, f"bonds {disorder.seed}")
        for x in columns:
            for y in rows:
                builder[lattice(x, y)] = self.level + onsite[x, y]
            for upper, lower in ring_bonds(self.around, closed=True):
                builder[lattice(x, upper), lattice(x, lower)] = self._round(x, seam=upper == 0)
        for x in bonds:
            for y in rows:
                builder[lattice(x + 1, y), lattice(x, y)] = -(self.hopping + along[x, y])

    def _round(self, x: int, *, seam: bool) -> Any:
        """The hopping from y to y + 1 at x: a number, or a function of phi where the threaded flux is."""
        value = -self.hopping * np.exp(2j * np.pi * (self.flux * x % 1))
        share = 1 / self.around if self.gauge == "spread" else float(seam)

        def threaded(upper: Any, lower: Any, phi: Any) -> Any:
            ahead = (upper.tag[1] - lower.tag[1]) % self.around == 1
            turned = value * np.exp(-1j * share * phi)
            return turned if ahead else np.conj(turned)

        return threaded if share else value
