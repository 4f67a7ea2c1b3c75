"""What is known about a winding: the number, its proof, and where it is open to doubt."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi
from typing import Literal

__all__ = ["Crossing", "Leak", "Winding"]

Interval = tuple[float, float]


@dataclass(frozen=True)
class Crossing:
    """A level of the device, closed towards the probe, that passes the Fermi level.

    Attributes
    ----------
    phase : float
        Where, in radians; there r has the eigenvalue +1 in the basis of the probe's broadening.
    direction : int
        +1: the level is filled from the probe; -1: it is emptied into it.
    width : float
        Half-width in radians, 2 / |d theta / d phi| of the eigenphase theta of r that passes: as far from `phase` as
        this a narrow level has turned it by a quarter turn.
    """

    phase: float
    direction: int
    width: float

    @property
    def is_resonance(self) -> bool:
        """False if the level is broader than the cycle: its charge comes at no one phase."""
        return self.width < pi  # `width` to either side is then less than the cycle


@dataclass(frozen=True)
class Leak:
    """A proven bound on what reaches any lead but the probe, over the whole cycle.

    Attributes
    ----------
    bound : float
        |t|^2 is at most this at every phi; 1 where nothing better was proven.
    evaluations : int
        Looks taken for it, at the device behind a good contact.
    """

    bound: float
    evaluations: int


@dataclass(frozen=True)
class Winding:
    """How often det r goes round in one cycle.

    Attributes
    ----------
    number : int or None
        The proven winding, which is the number of charges carried from probe to drain in a cycle; None where there
        is no proof.
    certified : bool
        True if the proof covers every phi; exactly then there is a number.
    evaluations : int
        Looks taken for the proof of the number: factorisations at one phi each.
    turns : float
        The sum that the number is read from, in turns.  Without a proof it is a guess.
    crossings : tuple of Crossing
        Levels that pass the Fermi level; the sum of their directions is the number.
    covering : tuple of (start, end)
        Phases covered by each look, in radians, in order; they may begin below 0 or end beyond 2 pi.
    unproven : tuple of (start, end)
        Phases that no look covers.
    reason : str
        Why the proof stopped; empty if it did not.
    smallest_reflection : float
        Lower bound on the smallest singular value of r over the whole cycle; 0 where none was proven.
    leak : Leak
    exact : bool
        True if the bounds on the change of H are exact; False if they are estimated from differences.
    method : "contact" or "open reference" or "no drain"
        Where the proof was made: at the device as it is; at the same device behind a good contact, whose winding is
        the same because less leaks than the contact lets through; or by the absence of any drain, which makes the
        number 0.
    """

    number: int | None
    certified: bool
    evaluations: int
    turns: float
    crossings: tuple[Crossing, ...]
    covering: tuple[Interval, ...]
    unproven: tuple[Interval, ...]
    reason: str
    smallest_reflection: float
    leak: Leak
    exact: bool
    method: Literal["contact", "open reference", "no drain"]

    def _repr_html_(self) -> str:
        """Return the winding as a table, for notebooks."""
        from scatterpump.html import winding_table

        return winding_table(self)
