"""A modulated chain between two leads: the device most pumps are first thought of as.

    H = sum_x v_x |x><x|  -  sum_x (t_x |x><x+1| + h.c.),      x = 0 ... sites-1,

with v_x = level + on-site waves and t_x = hopping + bond waves at x + 1/2, each plus static disorder.  With several
orbitals a site these are matrices, and numbers stand for multiples of the unit matrix.  One lead-like site stands
before and behind the chain (x = -1 and x = sites), so that r refers to a place where the wire is still uniform.  A
dimerised or a quasi-periodic chain is a matter of two lines:

    ModulatedChain(sites=80, cycle=Cycle.ellipse(x=("delta", 0, 0.5), y=("stagger", 0, 0.5)),
                   onsite=[Wave("stagger", 2, harmonic=0)], bonds=[Wave("delta", 2, lag=-pi / 2, harmonic=0)])
    ModulatedChain(sites=90, fermi_level=-1.2, onsite=[Wave(1.5, 3)])
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any, ClassVar, Literal

import numpy as np

from scatterpump.builder.description import LARGEST, LONGEST, Disorder, Lead, Wave, require
from scatterpump.builder.matrix import Matrix, as_array, as_hermitian, as_rows
from scatterpump.builder.values import box_noise, with_parameters
from scatterpump.builder.waves import common_period, require_parameters, wave_sum
from scatterpump.cycle import Cycle
from scatterpump.errors import InputError
from scatterpump.pump import Pump

if TYPE_CHECKING:
    import kwant

__all__ = ["ModulatedChain"]

MANY = 64
MATRICES = ("onsite_matrix", "bond_matrix", "conserved")


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
    orbitals : int
        Orbitals on every site, spin among them, at least 1.
    onsite_matrix, bond_matrix : Matrix
        What is added to v_x and to t_x everywhere, as matrices on the orbitals.
    conserved : Matrix
        A Hermitian matrix on the orbitals with whole eigenvalues, such as "sigma_z" for spin, that the leads' modes
        are sorted by; the device should conserve it too (see `resolve`).

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
    orbitals: int = 1
    onsite_matrix: Matrix = None
    bond_matrix: Matrix = None
    conserved: Matrix = None

    __pydantic_config__: ClassVar[Any] = {"extra": "forbid"}

    def __post_init__(self) -> None:
        require(1 <= self.sites <= LONGEST, "sites", self.sites, f"a whole number from 1 to {LONGEST}")
        for name in ("hopping", "level", "fermi_level"):
            require(abs(getattr(self, name)) < LARGEST, name, getattr(self, name), "a finite energy")
        require_parameters((*self.onsite, *self.bonds), self.cycle)
        require(1 <= self.orbitals <= MANY, "orbitals", self.orbitals, f"a whole number from 1 to {MANY}")
        for name in MATRICES:
            object.__setattr__(self, name, as_rows(getattr(self, name)))
        for name in ("onsite_matrix", "conserved"):
            if getattr(self, name) is not None:
                as_hermitian(getattr(self, name), self.orbitals, name)
        for wave in self.onsite:
            if wave.matrix is not None:
                as_hermitian(wave.matrix, self.orbitals, "matrix")
        for matrix in (self.bond_matrix, *(wave.matrix for wave in self.bonds)):
            if matrix is not None:
                as_array(matrix, self.orbitals, "matrix")

    @property
    def period(self) -> int | None:
        """Smallest number of sites after which all waves repeat, or None if they do not within the chain."""
        return common_period((*self.onsite, *self.bonds), self.sites)

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

    @property
    def _one(self) -> Any:
        """The unit matrix on the orbitals, or 1."""
        return 1.0 if self.orbitals == 1 else np.eye(self.orbitals, dtype=complex)

    def _matrix(self, matrix: Matrix) -> Any:
        """A matrix on the orbitals, or a number where there is one orbital; 0 for None."""
        if matrix is None:
            return 0.0
        found = as_array(matrix, self.orbitals, "matrix")
        return found[0, 0] if self.orbitals == 1 else found

    def _system(self) -> kwant.Builder:
        import kwant

        lattice, system = kwant.lattice.chain(norbs=self.orbitals), kwant.Builder()
        self._fill(system, lattice, range(self.sites), range(self.sites - 1), self.disorder)
        for lead, outside, inside, direction in ((self.probe, -1, 0, -1), (self.drain, self.sites, self.sites - 1, 1)):
            if isinstance(lead, str):
                continue
            system[lattice(outside)] = lead.level * self._one
            system[lattice(outside), lattice(inside)] = -lead.contact * self._one
            law = None if self.conserved is None else as_hermitian(self.conserved, self.orbitals, "conserved")
            wire = kwant.Builder(kwant.TranslationalSymmetry((direction,)), conservation_law=law)
            wire[lattice(0)] = lead.level * self._one
            wire[lattice(0), lattice(1)] = -lead.hopping * self._one
            system.attach_lead(wire)
        return system

    def _bulk(self, period: int) -> kwant.Builder:
        import kwant

        cell = kwant.Builder(kwant.TranslationalSymmetry((period,)))
        self._fill(cell, kwant.lattice.chain(norbs=self.orbitals), range(period), range(period), Disorder())
        return cell

    def _fill(self, builder: Any, lattice: Any, sites: range, bonds: range, disorder: Disorder) -> None:
        one, names = self._one, self.cycle.names
        onsite_noise = box_noise(disorder.onsite, len(sites), f"onsite {disorder.seed}")
        bond_noise = box_noise(disorder.bonds, len(bonds), f"bonds {disorder.seed}")
        waves, hopping_waves = wave_sum(self.onsite, names, one), wave_sum(self.bonds, names, one)
        level = self.level * one + self._matrix(self.onsite_matrix)
        hopping = self.hopping * one + self._matrix(self.bond_matrix)

        def onsite(site: Any, *values: Any) -> Any:
            x = site.tag[0]
            return level + onsite_noise[x] * one + waves(x, 0.0, values)

        def bond(to: Any, fro: Any, *values: Any) -> Any:
            x = min(to.tag[0], fro.tag[0])
            value = -(hopping + bond_noise[x] * one + hopping_waves(x, 0.5, values))
            return value if to.tag[0] < fro.tag[0] else _adjoint(value)

        builder[(lattice(x) for x in sites)] = with_parameters(onsite, 1, names)
        builder[((lattice(x + 1), lattice(x)) for x in bonds)] = with_parameters(bond, 2, names)


def _adjoint(value: Any) -> Any:
    """The conjugate transpose of a matrix, of each in a stack, or of a number."""
    turned = np.conj(value)
    return turned.swapaxes(-1, -2) if turned.ndim > 1 else turned
