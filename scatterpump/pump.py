"""The pump: a kwant system with leads, a cycle, a Fermi level, and which lead plays which part.

A `Pump` is what every later room takes: H(phi) is ``system`` at ``cycle.at(phi)``; electrons come in through the
``probe`` at ``fermi_level``, and the ``drain`` takes what is pumped away.  Energies are in the system's own unit.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from functools import cached_property
from math import isfinite
from typing import Any

from scatterpump.cycle import Cycle
from scatterpump.errors import InputError

__all__ = ["Pump"]


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

    def once(self, name: str, find: Callable[[], Any]) -> Any:
        """Return what `find` gives, and the same again whenever it is asked for under `name`.

        For what solvers find out about a pump and several of them need: its path, its lead modes.
        """
        found = self.__dict__.setdefault("_found", {})
        if name not in found:
            found[name] = find()
        return found[name]

    def __getstate__(self) -> dict[str, Any]:
        """Leave what was found out behind when the pump is sent elsewhere."""
        return {key: value for key, value in self.__dict__.items() if key != "_found"}

    def at_fermi_level(self, fermi_level: float) -> Pump:
        """Return the same pump at another Fermi level."""
        other = replace(self, system=self.finalized, bulk=self.finalized_bulk, fermi_level=fermi_level)
        if "path" in self.__dict__.get("_found", {}):  # H(phi) does not know the Fermi level
            other.once("path", lambda: self.__dict__["_found"]["path"])
        return other

    def on(self, cycle: Cycle) -> Pump:
        """Return the same pump driven round another cycle."""
        return replace(self, system=self.finalized, bulk=self.finalized_bulk, cycle=cycle)


def _finalized(system: Any) -> Any:
    return system.finalized() if hasattr(system, "finalized") else system
