"""The parts a device is described with: waves, leads, disorder.

All are frozen records of plain numbers, in the energy unit of the device and lattice constants; a device file has
the same fields under the same names.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, ClassVar

from scatterpump.builder.matrix import Matrix, as_rows
from scatterpump.cycle import is_name
from scatterpump.errors import InputError

__all__ = ["LARGEST", "LONGEST", "Disorder", "Lead", "SheetLead", "Wave", "require"]

LARGEST = 1e60
LONGEST = 10_000_000  # sites
SMALLEST = 1e-60


def require(holds: bool, name: str, value: Any, allowed: str) -> None:
    """Raise an `InputError` about the field `name` unless `holds`."""
    if not holds:
        raise InputError(f"{name} is {value!r}", allowed=allowed)


def _finite(record: Any, *names: str) -> None:
    for name in names:
        value = getattr(record, name)
        require(isinstance(value, str) or abs(value) < LARGEST, name, value, f"a finite number below {LARGEST:g}")


@dataclass(frozen=True)
class Wave:
    """A modulation A cos(2 pi x / p - n phi + lag) along the chain.

    With growing phi it slides away from the probe.  Bond waves are taken at the bond's midpoint.

    Parameters
    ----------
    amplitude : float or str
        A, an energy; or the name of a parameter that the cycle sets.
    period : float
        p in lattice constants, positive; it need not be a whole number.
    lag : float
        Phase offset in radians.
    harmonic : int
        n: how often the wave moves on by its period in one cycle; 0 for a wave that stands.
    matrix : Matrix
        What it multiplies on the orbitals of a site or bond; None for all of them alike.
    """

    amplitude: float | str
    period: float
    lag: float = 0.0
    harmonic: int = 1
    matrix: Matrix = None

    __pydantic_config__: ClassVar[Any] = {"extra": "forbid"}

    def __post_init__(self) -> None:
        _finite(self, "amplitude", "period", "lag")
        object.__setattr__(self, "matrix", as_rows(self.matrix))
        require(self.period > 0, "period", self.period, "a positive number of lattice constants")
        require(
            not isinstance(self.amplitude, str) or is_name(self.amplitude),
            "amplitude",
            self.amplitude,
            "a number, or the name of a parameter of the cycle",
        )

    @property
    def needs(self) -> frozenset[str]:
        """Names of the parameters that the wave takes from the cycle."""
        named = {self.amplitude} if isinstance(self.amplitude, str) else set()
        return frozenset(named | {"phi"} if self.harmonic else named)


@dataclass(frozen=True)
class Lead:
    """A uniform wire: hopping and on-site level along it, and the amplitude of its contact with the device.

    Parameters
    ----------
    hopping : float
        Hopping inside the lead; its band is level - 2 hopping to level + 2 hopping.
    level : float
        On-site energy of the lead.
    contact : float
        Hopping amplitude between the lead's last site and the device's first, an energy, positive.
    """

    hopping: float = 1.0
    level: float = 0.0
    contact: float = 1.0

    __pydantic_config__: ClassVar[Any] = {"extra": "forbid"}

    def __post_init__(self) -> None:
        _finite(self, "hopping", "level", "contact")
        require(self.hopping > SMALLEST, "hopping", self.hopping, "a positive energy")
        require(self.contact > SMALLEST, "contact", self.contact, "a positive energy, as a closed lead pumps nothing")


@dataclass(frozen=True)
class SheetLead(Lead):
    """A lead as wide as a ribbon or a cylinder: rows of uniform wires, tied to each other.

    Parameters
    ----------
    across : float or None
        Hopping between the rows; None for the same as along them, 0 for separate wires.
    """

    across: float | None = None

    def __post_init__(self) -> None:
        super().__post_init__()
        if self.across is not None:
            _finite(self, "across")

    @property
    def tie(self) -> float:
        """Hopping between the rows."""
        return self.hopping if self.across is None else self.across


@dataclass(frozen=True)
class Disorder:
    """Static box disorder, a function of (seed, site) and nothing else: the same device on every machine.

    Parameters
    ----------
    onsite, bonds : float
        Full widths of the boxes: energies are drawn evenly from [-width/2, width/2], as in P. W. Anderson,
        Phys. Rev. 109, 1492 (1958) (citation from memory).
    seed : int
        Which sample.
    """

    onsite: float = 0.0
    bonds: float = 0.0
    seed: int = 0

    __pydantic_config__: ClassVar[Any] = {"extra": "forbid"}

    def __post_init__(self) -> None:
        _finite(self, "onsite", "bonds")
        require(self.onsite >= 0, "onsite", self.onsite, "a width of at least 0")
        require(self.bonds >= 0, "bonds", self.bonds, "a width of at least 0")

    @property
    def norm(self) -> float:
        """Upper bound on the spectral norm of the disorder's part of H."""
        return self.onsite / 2 + self.bonds
