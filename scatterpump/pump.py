"""The pump: a kwant system with leads, a cycle, a Fermi level, and which lead plays which part.

A `Pump` is what every later room takes: H(phi) is ``system`` at ``cycle.at(phi)``; electrons come in through the
``probe`` at ``fermi_level``, and the ``drain`` takes what is pumped away.  Energies are in the system's own unit.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from functools import cached_property
from math import isfinite
from typing import Any

from scatterpump.cycle import Cycle
from scatterpump.errors import InputError

__all__ = ["Continuum", "Pump", "Units"]


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
        The scattering region with its leads attached.
    cycle : Cycle
        The closed path of the system's parameters.
    fermi_level : float
        Energy of the electrons sent in, in the unit of the Hamiltonian.
    probe : int
        Number of the lead they come in through.
    drain : int or None
        Number of the lead the charge leaves by; None for a hard wall at the far end (which the audit reports).
    bulk : kwant.Builder or finalized infinite system, optional
        One cell of the pump's interior, repeated away from the probe.  The gap and the Chern number belong to it;
        without it they are left out of a verdict.
    constants : dict
        Parameters of the Hamiltonian that the cycle does not set.
    name : str
        What to call the pump in a report.
    continuum : Continuum, optional
        The continuum that the lattice stands for; then the audit checks that its step is fine enough.
    units : Units, optional
        What its energies and lengths are in the laboratory.

    Raises
    ------
    InputError
        If the Fermi level is not finite or a lead does not exist.
    """

    system: Any
    cycle: Cycle
    fermi_level: float
    probe: int = 0
    drain: int | None = 1
    bulk: Any = None
    constants: dict[str, Any] = field(default_factory=dict)
    name: str = "pump"
    continuum: Continuum | None = None
    units: Units | None = None

    def __post_init__(self) -> None:
        if not isfinite(self.fermi_level):
            raise InputError(f"fermi_level is {self.fermi_level}", allowed="a finite energy")
        leads = len(self.system.leads)
        for role, lead in (("probe", self.probe), ("drain", self.drain)):
            if lead is not None and not 0 <= lead < leads:
                raise InputError(
                    f"the {role} is lead {lead}, but the system has {leads} lead(s)",
                    allowed=f"0 to {leads - 1}, counted in the order they were attached",
                )
        if self.probe == self.drain:
            raise InputError(f"probe and drain are both lead {self.probe}", allowed="two different leads")

    @cached_property
    def finalized(self) -> Any:
        """The finalized kwant system, built once."""
        return _finalized(self.system)

    @cached_property
    def finalized_bulk(self) -> Any:
        """The finalized cell of the interior, or None."""
        return None if self.bulk is None else _finalized(self.bulk)

    def parameters(self, phase: float) -> dict[str, Any]:
        """Return all parameters of the Hamiltonian at `phase` (radians)."""
        return {**self.constants, **self.cycle.at(phase)}

    def at_fermi_level(self, fermi_level: float) -> Pump:
        """Return the same pump at another Fermi level."""
        return replace(self, system=self.finalized, bulk=self.finalized_bulk, fermi_level=fermi_level)

    def on(self, cycle: Cycle) -> Pump:
        """Return the same pump driven round another cycle."""
        return replace(self, system=self.finalized, bulk=self.finalized_bulk, cycle=cycle)


def _finalized(system: Any) -> Any:
    return system.finalized() if hasattr(system, "finalized") else system
