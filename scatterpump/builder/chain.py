"""A modulated chain between two leads: the device most pumps are first thought of as.

    H = sum_x v_x |x><x|  -  sum_x (t_x |x><x+1| + h.c.),      x = 0 ... sites-1,

with v_x = level + on-site waves and t_x = hopping + bond waves at x + 1/2, each plus static disorder.  One
lead-like site stands before and behind it (x = -1 and x = sites), so that r refers to a place where the wire is
still uniform. A dimerised or a quasi-periodic chain is a matter of two lines:

    ModulatedChain(sites=80, cycle=Cycle.ellipse(x=("delta", 0, 0.5), y=("stagger", 0, 0.5)),
                   onsite=[Wave("stagger", 2, harmonic=0)], bonds=[Wave("delta", 2, lag=-pi / 2, harmonic=0)])
    ModulatedChain(sites=90, fermi_level=-1.2, onsite=[Wave(1.5, 3)])
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction
from math import lcm, pi
from typing import TYPE_CHECKING, Any, ClassVar, Literal

import numpy as np

from scatterpump.builder.description import LARGEST, LONGEST, Disorder, Lead, Wave, require
from scatterpump.builder.values import box_noise, with_parameters
from scatterpump.cycle import NAMES, Cycle, is_name
from scatterpump.errors import InputError
from scatterpump.pump import Pump

if TYPE_CHECKING:
    import kwant

__all__ = ["ModulatedChain"]


@dataclass(frozen=True, kw_only=True)
class ModulatedChain:
    """A chain with sliding or standing modulations, between a probe on the left and a drain on the right.

    Parameters
    ----------
    sites : int
        Length in lattice constants, at least 1.
    hopping, level : float
        Mean hopping and on-site energy.
    fermi_level : float
        Energy of the electrons sent in.
    onsite, bonds : sequence of Wave
        Modulations of the on-site energies and of the hoppings.
    probe, drain : Lead
        The two wires; ``drain="wall"`` closes the far end.
    disorder : Disorder
        Static disorder of on-site energies and hoppings.
    cycle : Cycle
        What the pump is driven round; by default phi itself.  Waves with a harmonic other than 0 need it to set
        ``phi``.
    name : str
        What to call the device in a report.

    Raises
    ------
    InputError
        If a value is out of range, or a wave needs a parameter that the cycle does not set.
    """

    sites: int
    hopping: float = 1.0
    level: float = 0.0
    fermi_level: float = 0.0
    onsite: Sequence[Wave] = ()
    bonds: Sequence[Wave] = ()
    probe: Lead = field(default_factory=Lead)
    drain: Lead | Literal["wall"] = field(default_factory=Lead)
    disorder: Disorder = field(default_factory=Disorder)
    cycle: Cycle = field(default_factory=Cycle.angle)
    name: str = "modulated chain"

    __pydantic_config__: ClassVar[Any] = {"extra": "forbid"}

    def __post_init__(self) -> None:
        require(1 <= self.sites <= LONGEST, "sites", self.sites, f"a whole number from 1 to {LONGEST}")
        for name in ("hopping", "level", "fermi_level"):
            require(abs(getattr(self, name)) < LARGEST, name, getattr(self, name), "a finite energy")
        have = self.cycle.names
        for name in have:
            require(is_name(name), "a parameter of the cycle", name, NAMES)
        for wave in (*self.onsite, *self.bonds):
            for name in sorted(wave.needs - set(have)):
                raise InputError(
                    f"a wave uses the parameter {name!r}, which the cycle does not set",
                    allowed=f"parameters of the cycle: {', '.join(have)}",
                )

    @property
    def period(self) -> int | None:
        """Smallest number of sites after which all waves repeat, or None if they do not within the chain."""
        ratios = [Fraction(wave.period).limit_denominator(1000) for wave in (*self.onsite, *self.bonds)]
        exact = all(
            abs(float(r) - w.period) < 1e-12 * w.period
            for r, w in zip(ratios, (*self.onsite, *self.bonds), strict=True)
        )
        cell = lcm(*(ratio.numerator for ratio in ratios))
        return cell if exact and cell <= self.sites else None

    def resized(self, cells: int) -> ModulatedChain:
        """Return the same chain `cells` periods long."""
        if self.period is None:
            raise InputError("the chain's waves do not repeat within it", allowed="waves with a common period")
        return replace(self, sites=cells * self.period)

    def pump(self) -> Pump:
        """Build the kwant system and return it as a `Pump`: probe lead 0, drain lead 1."""
        walled = isinstance(self.drain, str)
        return Pump(
            self._system(),
            self.cycle,
            self.fermi_level,
            probe=0,
            drain=None if walled else 1,
            bulk=None if self.period is None else self._bulk(self.period),
            name=self.name,
        )

    def _system(self) -> kwant.Builder:
        import kwant

        lattice, system = kwant.lattice.chain(norbs=1), kwant.Builder()
        self._fill(system, lattice, range(self.sites), range(self.sites - 1), self.disorder)
        for lead, outside, inside, direction in ((self.probe, -1, 0, -1), (self.drain, self.sites, self.sites - 1, 1)):
            if isinstance(lead, str):
                continue
            system[lattice(outside)] = lead.level
            system[lattice(outside), lattice(inside)] = -lead.contact
            wire = kwant.Builder(kwant.TranslationalSymmetry((direction,)))
            wire[lattice(0)] = lead.level
            wire[lattice(0), lattice(1)] = -lead.hopping
            system.attach_lead(wire)
        return system

    def _bulk(self, period: int) -> kwant.Builder:
        import kwant

        cell = kwant.Builder(kwant.TranslationalSymmetry((period,)))
        self._fill(cell, kwant.lattice.chain(norbs=1), range(period), range(period), Disorder())
        return cell

    def _fill(self, builder: Any, lattice: Any, sites: range, bonds: range, disorder: Disorder) -> None:
        onsite_noise = box_noise(disorder.onsite, len(sites), f"onsite {disorder.seed}")
        bond_noise = box_noise(disorder.bonds, len(bonds), f"bonds {disorder.seed}")
        onsite = self._sum(self.onsite, lambda x, value: self.level + value + onsite_noise[x])
        bond = self._sum(self.bonds, lambda x, value: -(self.hopping + value + bond_noise[x]))
        onsite_value = with_parameters(lambda site, *values: onsite(site.tag[0], 0.0, values), 1, self.cycle.names)
        bond_value = with_parameters(
            lambda right, left, *values: bond(min(right.tag[0], left.tag[0]), 0.5, values), 2, self.cycle.names
        )
        builder[(lattice(x) for x in sites)] = onsite_value
        builder[((lattice(x + 1), lattice(x)) for x in bonds)] = bond_value

    def _sum(self, waves: Sequence[Wave], finish: Callable[[int, Any], Any]) -> Callable[[int, float, Any], Any]:
        """Return (x, offset, parameter values) -> the waves' sum at x + offset, handed to `finish`."""
        place = {name: i for i, name in enumerate(self.cycle.names)}
        terms = [(place.get(str(w.amplitude)), w.amplitude, w.period, w.lag, w.harmonic) for w in waves]
        phi = place.get("phi")

        def total(x: int, offset: float, values: Any) -> Any:
            result: Any = 0.0
            for named, amplitude, period, lag, harmonic in terms:
                angle = 2 * pi * ((x % period + offset) / period) + lag
                if harmonic and phi is not None:
                    angle = angle - harmonic * values[phi]
                result = result + (amplitude if named is None else values[named]) * np.cos(angle)
            return finish(x, result)

        return total
