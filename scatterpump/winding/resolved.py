"""A winding resolved by a conserved quantity: how much of it, and how many charges, a pump carries in a cycle."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from scatterpump.errors import ClosedProbeError, InputError, SingularReflectionError
from scatterpump.pump import Pump
from scatterpump.solver.sector import eigenvalues, law_of_leads, require_conserved, sector
from scatterpump.winding.certificate import certify
from scatterpump.winding.result import Winding

__all__ = ["Resolved", "Sector", "resolve", "resolve_if_asked"]


@dataclass(frozen=True)
class Sector:
    """One eigenvalue of the conserved quantity.

    Attributes
    ----------
    eigenvalue : float
    winding : Winding or None
        None if the probe has no open mode of that eigenvalue: nothing is carried there.
    """

    eigenvalue: float
    winding: Winding | None

    @property
    def number(self) -> int | None:
        """The proven winding of this eigenvalue; None where there is no proof."""
        return 0 if self.winding is None else self.winding.number


@dataclass(frozen=True)
class Resolved:
    """Windings by the eigenvalue of a conserved quantity, ascending.

    Attributes
    ----------
    sectors : tuple of Sector
    reason : str
        Why there are none, if a verdict asked for them in vain; else empty.
    """

    sectors: tuple[Sector, ...]
    reason: str = ""

    @property
    def charge(self) -> int | None:
        """Charges carried in a cycle, from probe to drain; None unless all windings are proven."""
        numbers = [part.number for part in self.sectors if part.number is not None]
        return sum(numbers) if self.sectors and len(numbers) == len(self.sectors) else None

    @property
    def carried(self) -> float | None:
        """The conserved quantity carried in a cycle, sum of eigenvalue times winding; None unless all are proven."""
        parts = [part.eigenvalue * part.number for part in self.sectors if part.number is not None]
        return sum(parts) if self.sectors and len(parts) == len(self.sectors) else None


def resolve(pump: Pump, *, law: Any = None, budget: int = 400) -> Resolved:
    """Prove the winding of every eigenvalue of a conserved quantity.

    Parameters
    ----------
    pump : Pump
    law : matrix, mapping or function, optional
        The quantity as a Hermitian matrix on the orbitals of a site, as a mapping from site families to such matrices,
        or as a function of a site.  By default the conservation law that the probe was built with.
    budget : int
        Most looks to take for each number.

    Raises
    ------
    InputError
        If there is no law, or the device or a lead does not conserve the quantity somewhere along the cycle.
    ClosedProbeError, SingularReflectionError, SolverError
        As `certify`.

    Examples
    --------
    Two spins that are pumped in opposite directions carry no charge, and a spin of 2 in units of half of hbar:

    >>> from scatterpump import Cycle, Lead, ModulatedChain, Wave
    >>> waves = [Wave(1.5, 3, matrix=((1, 0), (0, 0))), Wave(1.5, 3, harmonic=-1, matrix=((0, 0), (0, 1)))]
    >>> wire = Lead(hopping=2.0)
    >>> chain = ModulatedChain(
    ...     sites=36, orbitals=2, conserved="sigma_z", fermi_level=-1.2, onsite=waves, probe=wire, drain=wire)
    >>> found = resolve(chain.pump())
    >>> found.charge, found.carried
    (0, 2.0)
    """
    law = law_of_leads(pump) if law is None else law
    if law is None:
        raise InputError(
            "the probe has no conservation law to resolve the winding by",
            allowed="a lead made by kwant.Builder(symmetry, conservation_law=...), or the law itself as law=...",
        )
    require_conserved(pump, law)
    parts = tuple(Sector(value, _winding(sector(pump, law, value), budget)) for value in eigenvalues(pump, law))
    if all(part.winding is None for part in parts):
        raise ClosedProbeError(pump.fermi_level, pump.probe)
    return Resolved(parts)


def resolve_if_asked(pump: Pump) -> Resolved | None:
    """Resolve the winding if the probe was built with a conservation law, and say why where that is not possible."""
    if law_of_leads(pump) is None:
        return None
    try:
        return resolve(pump)
    except InputError as error:
        return Resolved((), error.problem)
    except SingularReflectionError as error:
        return Resolved((), str(error))


def _winding(pump: Pump, budget: int) -> Winding | None:
    try:
        return certify(pump, budget=budget)
    except ClosedProbeError:
        return None
