"""The pump: a kwant system with leads, a cycle, a Fermi level, and which lead plays which part.

A `Pump` is what every later room takes: H(phi) is ``system`` at ``cycle.at(phi)``; electrons come in through the
``probe`` at ``fermi_level``, and the ``drain`` takes what is pumped away.  Energies are in the system's own unit.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from math import isfinite
from numbers import Real
from typing import Any

from scatterpump.adoption import finalized, finalized_cell
from scatterpump.cycle import Cycle
from scatterpump.errors import InputError

__all__ = ["Continuum", "Pump", "Units"]

OF_ANY_LEVEL = (
    "path",
    "found cell",
    "driven leads",
)  # what is remembered of H(phi) and the probe, without the Fermi level


@dataclass(frozen=True)
class Continuum:
    """The continuum that a lattice stands for: electrons of one mass, on sites a step apart.

    Parameters
    ----------
    step : float
        Distance of neighbouring sites, in metres.
    mass : float
        Effective mass, in kilograms.
    energy : float
        What one unit of the pump's energies is, in joules.

    Raises
    ------
    InputError
        If one of them is not a positive number.
    """

    step: float
    mass: float
    energy: float

    def __post_init__(self) -> None:
        for name in ("step", "mass", "energy"):
            value = getattr(self, name)
            if not (isfinite(value) and value > 0):
                raise InputError(f"{name} is {value!r}", allowed="a positive number, in SI units")

    @property
    def hopping(self) -> float:
        """hbar^2 / (2 mass step^2), in the pump's unit of energy."""
        from scipy.constants import hbar

        return float(hbar / self.step) * float(hbar / self.step) / (2 * self.mass) / self.energy


@dataclass(frozen=True)
class Units:
    """What a pump's numbers are in the laboratory.

    Attributes
    ----------
    energy : float
        One unit of energy, in joules.
    length : float
        One lattice constant, in metres.
    """

    energy: float
    length: float


@dataclass(frozen=True)
class Pump:
    """A quantum transport system driven round a cycle.

    Parameters
    ----------
    system : kwant.Builder or finalized kwant system
        The scattering region with its leads attached, in any shape and on any lattice.
    cycle : Cycle
        The closed path of the system's parameters.
    fermi_level : float
        Energy of the electrons sent in, in the unit of the Hamiltonian.
    probe : int
        Number of the lead they come in through.
    drain : int or None
        Number of the lead the charge leaves by; None for a hard wall at the far end (which the audit reports).  All
        further leads count as part of the drain: the number of charges is what the probe gives to all of them together.
    bulk : kwant.Builder or finalized infinite system, optional
        One cell of the pump's interior, repeated away from the probe, which the gap and the Chern number belong to.
        Without it the cell that repeats along the device itself is looked for.
    constants : dict
        Parameters of the Hamiltonian that the cycle does not set.
    name : str
        What to call the pump in a report.
    lead_names : sequence of str
        What to call the leads, in the order they were attached; empty for plain numbers.
    continuum : Continuum, optional
        The continuum that the lattice stands for; then the audit checks that its step is fine enough.
    units : Units, optional
        What its energies and lengths are in the laboratory.

    Attributes
    ----------
    remembered : dict
        What later rooms have found out about this pump and need again.

    Raises
    ------
    InputError
        If the system cannot be adopted, the Fermi level is not finite, or a lead does not exist.
    """

    system: Any
    cycle: Cycle
    fermi_level: float
    probe: int = 0
    drain: int | None = 1
    bulk: Any = None
    constants: dict[str, Any] = field(default_factory=dict)
    name: str = "pump"
    lead_names: Sequence[str] = ()
    continuum: Continuum | None = None
    units: Units | None = None
    remembered: dict[str, Any] = field(default_factory=dict, init=False, repr=False, compare=False)

    def __post_init__(self) -> None:
        level = self.fermi_level
        if isinstance(level, bool) or not (isinstance(level, Real) and isfinite(level)):
            raise InputError(f"fermi_level is {level!r}", allowed="a finite energy")
        if not isinstance(self.cycle, Cycle):
            raise InputError(f"the cycle is {self.cycle!r}", allowed="a scatterpump.Cycle, such as Cycle.angle()")
        leads = len(self.finalized.leads)
        for role, lead in (("probe", self.probe), ("drain", self.drain)):
            known = isinstance(lead, int) and not isinstance(lead, bool) and 0 <= lead < leads
            if not known and (role, lead) != ("drain", None):
                raise InputError(
                    f"the {role} is lead {lead}, but the system has {leads} lead(s)",
                    allowed=f"0 to {leads - 1}, counted in the order they were attached",
                )
        if self.probe == self.drain:
            raise InputError(f"probe and drain are both lead {self.probe}", allowed="two different leads")
        if self.drain is None and leads > 1:
            raise InputError(f"there is no drain, but the system has {leads} leads", allowed="one of them as the drain")
        if self.lead_names and len(set(self.lead_names)) != leads:
            raise InputError(
                f"the leads are named {', '.join(map(repr, self.lead_names))}",
                allowed=f"a different name for each of {leads} leads",
            )

    @cached_property
    def finalized(self) -> Any:
        """The finalized kwant system, built once."""
        return finalized(self.system)

    @cached_property
    def finalized_bulk(self) -> Any:
        """The finalized cell of the interior that was given, or None."""
        return None if self.bulk is None else finalized_cell(self.bulk)

    @property
    def route(self) -> str:
        """Which way a positive number of charges goes, in words."""
        others = [i for i in range(len(self.finalized.leads)) if i not in (self.probe, self.drain)]
        if self.lead_names:
            names = [self.lead_names[i] for i in (self.drain, *others) if i is not None]
            return f"from {self.lead_names[self.probe]} to {' and '.join(names) or 'the far end'}"
        rest = f" and {len(others)} other lead{'s' if len(others) > 1 else ''}" if others else ""
        return f"from probe to drain{rest}"

    def _repr_html_(self) -> str:
        """Return a line, for notebooks."""
        from scatterpump.html import pump_line

        return pump_line(self)

    def parameters(self, phase: float) -> dict[str, Any]:
        """Return all parameters of the Hamiltonian at `phase` (radians)."""
        return {**self.constants, **self.cycle.at(phase)}

    def once(self, name: str, find: Callable[[], Any]) -> Any:
        """Return what `find` gives, and the same again whenever it is asked for under `name`.

        For what solvers find out about a pump and several of them need: its path, its lead modes.
        """
        if name not in self.remembered:
            self.remembered[name] = find()
        return self.remembered[name]

    def __getstate__(self) -> dict[str, Any]:
        """Leave what was found out behind when the pump is sent elsewhere."""
        return {**self.__dict__, "remembered": {}}

    def at_fermi_level(self, fermi_level: float) -> Pump:
        """Return the same pump at another Fermi level."""
        other = replace(self, system=self.finalized, bulk=self.finalized_bulk, fermi_level=fermi_level)
        other.remembered.update({name: self.remembered[name] for name in OF_ANY_LEVEL if name in self.remembered})
        return other

    def seen_from(self, lead: int) -> Pump:
        """Return the same device with another lead as the probe; the drain is the old probe, or the first lead left."""
        others = [other for other in (self.probe, *range(len(self.finalized.leads))) if other != lead]
        drain = others[0] if others else None
        seen = replace(self, system=self.finalized, bulk=None, probe=lead, drain=drain)
        if "path" in self.remembered:  # H(phi) does not know the probe
            seen.remembered["path"] = self.remembered["path"]
        return seen

    def on(self, cycle: Cycle) -> Pump:
        """Return the same pump driven round another cycle."""
        return replace(self, system=self.finalized, bulk=self.finalized_bulk, cycle=cycle)
