"""How far the interior's bands stay away from the Fermi level, and from each other, over the whole (k, phi) torus.

A pump is quantised as long as no bulk band meets the Fermi level for any k and phi.  `bulk_gap` brackets three numbers
by branch and bound (`torus`): the direct gap min (E_{n+1} - E_n) between the last filled and the first empty band,
and the edges max E_n and min E_{n+1}.  By Weyl's inequality nothing static that is smaller in norm than the distance
of the Fermi level from the nearer edge can close the pump, and the integer is one for all Fermi levels in the window
(max E_n, min E_{n+1}).
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import inf, isfinite, nan, pi

import numpy as np
from numpy.typing import NDArray

from scatterpump.bulk.cell import BlochCell, bloch_cell
from scatterpump.bulk.family import BlochFamily, bloch_family
from scatterpump.bulk.torus import Found, search
from scatterpump.errors import InputError
from scatterpump.pump import Pump

__all__ = ["FLOOR", "BulkGap", "Extremum", "bulk_gap", "gap_of"]

Place = NDArray[np.float64]

ACCURACY = 0.01
FLOOR = 1e-4
BUDGET = 100_000
PLACE_TOLERANCE = 1e-9


@dataclass(frozen=True)
class Extremum:
    """A bracket of an extremal energy.

    Attributes
    ----------
    lower, upper : float
        The extremum lies between them.  One was met by a sample (the lower one of a maximum, the upper one of a
        minimum), the other is a bound over the whole torus.
    momentum, phase : float
        Where that sample was taken: k in radians per cell, phi in radians, both in [0, 2 pi); nan if there is no such
        band.
    """

    lower: float
    upper: float
    momentum: float
    phase: float


@dataclass(frozen=True)
class BulkGap:
    """The gap of a pump's interior over the (k, phi) torus.  Energies in the pump's unit, angles in radians.

    Attributes
    ----------
    lower, upper : float
        Bracket of the smallest direct gap E_{n+1} - E_n; inf if no band lies below the Fermi level, or none above.
        `lower` is 0 unless the pump is open.
    momentum, phase : float
        Where `upper` was met; if the pump is not open, where a band comes nearest to the Fermi level.
    filled : int
        Number n of bands below the Fermi level at k = phi = 0, hence everywhere if the pump is open.
    lower_edge, upper_edge : Extremum
        Top of the filled bands, max E_n, and bottom of the empty ones, min E_{n+1}; -inf and inf where there are none.
        The integer is one for all Fermi levels between ``lower_edge.upper`` and ``upper_edge.lower``.
    distance_lower, distance_upper : float
        Bracket of the distance of the Fermi level from the nearest band.
    evaluations : int
        Eigenproblems of the cell, one for each (k, phi) looked at.
    exact : bool
        True if H is a trigonometric polynomial in phi, or linear in phi between the corners of its cycle; False if the
        bounds rest on an estimate of how H varies between samples.
    """

    lower: float
    upper: float
    momentum: float
    phase: float
    filled: int
    lower_edge: Extremum
    upper_edge: Extremum
    distance_lower: float
    distance_upper: float
    evaluations: int
    exact: bool

    @property
    def is_open(self) -> bool:
        """True if every band is proven to stay away from the Fermi level."""
        return self.distance_lower > 0


def bulk_gap(pump: Pump, *, accuracy: float = ACCURACY, floor: float = FLOOR, budget: int = BUDGET) -> BulkGap:
    """Bracket the gap of a pump's interior and the distance of its Fermi level from the bands.

    Parameters
    ----------
    pump : Pump
        A pump whose interior repeats: with a cell that was given, or is found in its device.
    accuracy : float
        Width of the bracket of the direct gap relative to the gap, and of the brackets of both edges relative to the
        distance of the Fermi level from the nearer one; between 0 and 1.
    floor : float
        A direct gap below it is not told from a closed one; an energy, positive.
    budget : int
        Largest number of eigenproblems, beyond the few of the first covering.  A search that runs out of them returns
        the wider brackets it has.

    Returns
    -------
    BulkGap
        Not open where a band comes within ``floor / 2`` of the Fermi level: a search cannot tell a closing from a
        smaller gap, only where it is.

    Raises
    ------
    InputError
        If the pump has no cell, given or found, or an argument is out of range.

    Notes
    -----
    If `exact`, the bounds over the torus are proven in exact arithmetic.  On floating point rest the eigenvalues, and
    that H is the trigonometric polynomial or broken line with which it agrees to 1e-11 at check points; for both, 1e-10
    of the norm of H is taken off every bound.  If not `exact`, H between samples is estimated: four times its largest
    deviation from a spline, measured half-way between some 512 knots, is taken off as well.

    Examples
    --------
    >>> from scatterpump.builder.chain import ModulatedChain
    >>> from scatterpump.builder.description import Wave
    >>> gap = bulk_gap(ModulatedChain(sites=60, fermi_level=-1.2, onsite=[Wave(1.5, 3)]).pump())
    >>> gap.is_open, gap.filled, round(gap.upper, 4)
    (True, 1, 1.0788)
    """
    return gap_of(bloch_cell(pump), accuracy=accuracy, floor=floor, budget=budget)


def gap_of(cell: BlochCell, *, accuracy: float = ACCURACY, floor: float = FLOOR, budget: int = BUDGET) -> BulkGap:
    """Bracket the gap of a cell, as `bulk_gap` does that of the cell of a pump."""
    _check(accuracy, floor, budget)
    bands = _Bands(cell)
    family = bloch_family(bands.cell)
    filled = sum(energy < 0 for energy in bands.at(np.zeros(2)))
    found = search(family, family.bends, family.cover, filled=filled, accuracy=accuracy, floor=floor / 2, budget=budget)
    return _judged(_bracketed(bands, family, found, filled), bands, found, floor)


def _check(accuracy: float, floor: float, budget: int) -> None:
    if not 0 < accuracy < 1:
        raise InputError(f"accuracy is {accuracy}", allowed="a number between 0 and 1")
    if not (floor > 0 and isfinite(floor)):
        raise InputError(f"floor is {floor}", allowed="a positive energy")
    if budget < 1:
        raise InputError(f"budget is {budget}", allowed="a positive number of eigenproblems")


@dataclass
class _Bands:
    """The cell's energies, measured from the Fermi level, and how often they were asked for."""

    cell: BlochCell
    solved: int = 0

    def at(self, place: Place) -> list[float]:
        self.solved += 1
        energies = np.linalg.eigvalsh(self.cell.hamiltonian(place[:1], place[1:])[0]) - self.cell.fermi_level
        return [float(energy) for energy in energies]


def _bracketed(bands: _Bands, family: BlochFamily, found: Found, filled: int) -> BulkGap:
    """Take the samples from the pump itself, and the slack off the bounds."""
    level = bands.cell.fermi_level
    above, below, between = (found.lower - family.slack * np.array([1, 1, 2])).tolist()
    top, bottom = Extremum(-inf, -inf, nan, nan), Extremum(inf, inf, nan, nan)
    if isfinite(found.upper[0]):
        sample = bands.at(found.place[0])[filled]
        bottom = Extremum(level + min(above, sample), level + sample, *_angles(found.place[0]))
    if isfinite(found.upper[1]):
        sample = bands.at(found.place[1])[filled - 1]
        top = Extremum(level + sample, level + max(-below, sample), *_angles(found.place[1]))
    upper = _direct(bands.at(found.place[2]), filled)
    lower = max(0.0, min(upper, max(between, bottom.lower - top.upper)))
    distance_lower = max(0.0, min(bottom.lower - level, level - top.upper))
    distance_upper = max(0.0, min(bottom.upper - level, level - top.lower))
    return BulkGap(
        lower,
        upper,
        *_angles(found.place[2]),
        filled,
        top,
        bottom,
        distance_lower,
        distance_upper,
        found.evaluations + bands.solved,
        family.exact,
    )


def _direct(energies: list[float], filled: int) -> float:
    return energies[filled] - energies[filled - 1] if 0 < filled < len(energies) else inf


def _judged(gap: BulkGap, bands: _Bands, found: Found, floor: float) -> BulkGap:
    """Return `gap`, or if it is not open the nearest approach of a band to the Fermi level."""
    meets = gap.distance_upper <= floor / 2
    if gap.is_open and not meets:
        return gap
    side, before = int(found.upper[:2].argmin()), bands.solved
    place = _meeting(bands, found.place[side], gap.filled - side) if meets else found.place[side]
    energies, (momentum, phase) = bands.at(place), _angles(place)
    return replace(
        gap,
        momentum=momentum,
        phase=phase,
        evaluations=gap.evaluations + bands.solved - before,
        lower=0.0,
        upper=min(gap.upper, _direct(energies, gap.filled)),
        distance_lower=0.0,
        distance_upper=min(gap.distance_upper, *map(abs, energies)),
    )


def _meeting(bands: _Bands, place: Place, band: int) -> Place:
    """Return where `band` meets the Fermi level or comes nearest to it, from a sample beyond or close to it."""
    from scipy.optimize import brentq, minimize

    def height(at: Place) -> float:
        return bands.at(at)[band]

    if height(place) * height(0 * place) < 0:
        return np.asarray(place * brentq(lambda part: height(part * place), 0.0, 1.0, xtol=PLACE_TOLERANCE))
    options = {"xatol": PLACE_TOLERANCE, "fatol": PLACE_TOLERANCE}
    nearest = minimize(lambda at: abs(height(at)), place, method="Nelder-Mead", options=options)
    return np.asarray(nearest.x)


def _angles(place: Place) -> tuple[float, float]:
    momentum, phase = place % (2 * pi) % (2 * pi)  # twice, as -1e-17 % (2 pi) is 2 pi itself
    return float(momentum), float(phase)
