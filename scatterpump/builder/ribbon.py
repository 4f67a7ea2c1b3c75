"""A modulated ribbon between two leads: several modes, transverse confinement, a magnetic field.

    H = sum_xy v_xy |x,y><x,y|  -  sum_xy (t_x e^{i theta_y} |x+1,y><x,y|  +  t' |x,y+1><x,y|  +  h.c.),

with v_xy = level + on-site waves at x + confinement (y - middle)^2, t_x = hopping + bond waves at x + 1/2, and theta_y
= -2 pi flux (y - middle), so that an electron that goes round a plaquette counter-clockwise (x to the right, y up)
gains 2 pi flux (R. Peierls, Z. Phys. 80, 763 (1933), citation from memory).  In this gauge the ribbon keeps the
period of its waves, and no field reaches the leads.  One lead-like column stands before and behind it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any, ClassVar, Literal

import numpy as np

from scatterpump.builder.description import LARGEST, Disorder, SheetLead, Wave, require
from scatterpump.builder.sheet import noise, sheet_pump
from scatterpump.builder.values import with_parameters
from scatterpump.builder.waves import common_period, require_parameters, wave_sum
from scatterpump.cycle import Cycle
from scatterpump.pump import Pump

__all__ = ["ModulatedRibbon"]

LONGEST = 1_000_000
WIDEST = 10_000


@dataclass(frozen=True, kw_only=True)
class ModulatedRibbon:
    """A ribbon of a square lattice with modulations along it, a probe on the left and a drain on the right.

    Parameters
    ----------
    sites, width : int
        Length and width in lattice constants, each at least 1.
    hopping, level : float
        Mean hopping along the ribbon, and on-site energy.
    across : float or None
        Hopping across the ribbon; None for the same as along it.
    confinement : float
        By how much a site one lattice constant away from the middle line is raised; it grows with the square of the
        distance.
    flux : float
        Magnetic flux through each plaquette, in flux quanta.
    fermi_level : float
        Energy of the electrons sent in.
    onsite, bonds : sequence of Wave
        Modulations of the on-site energies, and of the hoppings along the ribbon; the same for every y.
    probe, drain : SheetLead
        The two leads, as wide as the ribbon; ``drain="wall"`` closes the far end.
    disorder : Disorder
        Static disorder of on-site energies, and of the hoppings along the ribbon.
    cycle : Cycle
        What the pump is driven round; by default phi itself.
    name : str
        What to call the device in a report.

    Raises
    ------
    InputError
        If a value is out of range, or a wave needs a parameter that the cycle does not set.
    """

    sites: int
    width: int
    hopping: float = 1.0
    level: float = 0.0
    across: float | None = None
    confinement: float = 0.0
    flux: float = 0.0
    fermi_level: float = 0.0
    onsite: Sequence[Wave] = ()
    bonds: Sequence[Wave] = ()
    probe: SheetLead = field(default_factory=SheetLead)
    drain: SheetLead | Literal["wall"] = field(default_factory=SheetLead)
    disorder: Disorder = field(default_factory=Disorder)
    cycle: Cycle = field(default_factory=Cycle.angle)
    name: str = "modulated ribbon"

    __pydantic_config__: ClassVar[Any] = {"extra": "forbid"}

    def __post_init__(self) -> None:
        require(1 <= self.sites <= LONGEST, "sites", self.sites, f"a whole number from 1 to {LONGEST}")
        require(1 <= self.width <= WIDEST, "width", self.width, f"a whole number from 1 to {WIDEST}")
        for name in ("hopping", "level", "across", "confinement", "fermi_level"):
            value = getattr(self, name)
            require(value is None or abs(value) < LARGEST, name, value, "a finite energy")
        require(abs(self.flux) < LARGEST, "flux", self.flux, "a finite number of flux quanta a plaquette")
        require_parameters((*self.onsite, *self.bonds), self.cycle)

    @property
    def period(self) -> int | None:
        """Smallest number of columns after which all waves repeat, or None if they do not within the ribbon."""
        return common_period((*self.onsite, *self.bonds), self.sites)

    def pump(self) -> Pump:
        """Build the kwant system and return it as a `Pump`: probe lead 0, drain lead 1."""
        return sheet_pump(self, self._fill, self.width, closed=False)

    def _fill(self, builder: Any, lattice: Any, columns: range, bonds: range, disorder: Disorder) -> None:
        rows, names = range(self.width), self.cycle.names
        onsite_noise = noise(disorder.onsite, columns, rows, f"onsite {disorder.seed}")
        bond_noise = noise(disorder.bonds, bonds, rows, f"bonds {disorder.seed}")
        waves, hopping_waves = wave_sum(self.onsite, names), wave_sum(self.bonds, names)

        def onsite(site: Any, *values: Any) -> Any:
            x, y = site.tag
            return self.level + self.confinement * self._height(y) ** 2 + onsite_noise[x, y] + waves(x, 0.0, values)

        def along(right: Any, left: Any, *values: Any) -> Any:
            x, y = min(right.tag[0], left.tag[0]), right.tag[1]
            turn = np.exp(-2j * np.pi * self.flux * self._height(y) * (right.tag[0] - left.tag[0]))
            return -(self.hopping + bond_noise[x, y] + hopping_waves(x, 0.5, values)) * turn

        builder[(lattice(x, y) for x in columns for y in rows)] = with_parameters(onsite, 1, names)
        builder[((lattice(x + 1, y), lattice(x, y)) for x in bonds for y in rows)] = with_parameters(along, 2, names)
        across = self.hopping if self.across is None else self.across
        builder[((lattice(x, y + 1), lattice(x, y)) for x in columns for y in rows[:-1])] = -across

    def _height(self, y: int) -> float:
        """Distance from the middle line."""
        return y - (self.width - 1) / 2
