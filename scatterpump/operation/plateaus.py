"""Over which Fermi levels a pump carries the same integer.

A plateau belongs to n filled bands: from max E_n to min E_{n+1} over the whole (k, phi) torus.  Samples of the bands
can only make it smaller, so they tell for certain where there is none; what is left is searched for its proven edges
(`bulk.gap`).  Where a search meets a band, its place is one more sample, and what is left is at least halved.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import inf, isfinite
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from scatterpump.bulk.cell import BlochCell, bloch_cell
from scatterpump.bulk.chern import chern_number
from scatterpump.bulk.gap import BulkGap, Extremum, bulk_gap
from scatterpump.errors import ClosedGapError, ClosedProbeError, InputError, SingularReflectionError
from scatterpump.pump import Pump
from scatterpump.winding.certificate import certify

__all__ = ["Plateau", "plateaus", "require_range"]

Reals = NDArray[np.float64]

ACCURACY = 1e-10
BUDGET = 2000
NARROWEST = 1e-6  # of the spectrum's width: narrower windows are not told from closed ones
GRID = (9, 32)  # samples in 0 <= k <= pi and in phi, to begin with
TRIES = 40  # each at least halves what is left


@dataclass(frozen=True)
class Plateau:
    """A window of Fermi levels in which the cycle stays gapped.

    Attributes
    ----------
    lower, upper : float
        Every Fermi level between them is proven to lie in the gap, for all k and phi; the pump's unit of energy.  They
        are cut to the range asked for; -inf below all bands and inf above them.
    number : int or None
        Charges a cycle from probe to drain, the Chern number of the filled bands; None if it could not be resolved.
    how : "proven" or "computed"
        Proven if the winding of the device itself, at a level inside, is the same and proven; computed if it is the
        Chern number alone, because the leads are closed at that level or the device is too short.
    filled : int
        Number n of bands below.
    level : float
        The level inside at which the number was looked for.
    lower_edge, upper_edge : Extremum
        Brackets of max E_n and min E_{n+1}, each between a sample and a bound over the whole torus.
    exact : bool
        False if the bounds rest on an estimate of how H varies between samples.
    evaluations : int
        Eigenproblems of the cell.
    """

    lower: float
    upper: float
    number: int | None
    how: Literal["proven", "computed"]
    filled: int
    level: float
    lower_edge: Extremum
    upper_edge: Extremum
    exact: bool
    evaluations: int

    @property
    def width(self) -> float:
        """Upper minus lower."""
        return self.upper - self.lower


def plateaus(
    pump: Pump, *, between: tuple[float, float] | None = None, accuracy: float = ACCURACY, budget: int = BUDGET
) -> tuple[Plateau, ...]:
    """Find every window of Fermi levels in which the cycle stays gapped, and its integer.

    Parameters
    ----------
    pump : Pump
        A pump whose interior repeats: with a cell that was given, or is found in its device.
    between : (low, high), optional
        Range of Fermi levels; by default the plateau at or next to the pump's Fermi level and its two neighbours.
    accuracy : float
        Wanted width of the brackets of both edges, relative to half the window.
    budget : int
        Eigenproblems for each window; where they run out, the brackets stay wider.

    Returns
    -------
    tuple of Plateau
        From low to high.  Windows narrower than a millionth of the sampled spectrum are left out.

    Raises
    ------
    InputError
        If the pump has no cell, given or found, or the range is not one.

    Examples
    --------
    >>> import scatterpump as sp
    >>> wire = sp.Lead(hopping=2.0)
    >>> pump = sp.ModulatedChain(sites=60, onsite=[sp.Wave(1.5, 3)], fermi_level=-1.2, probe=wire, drain=wire).pump()
    >>> [(round(p.lower, 4), round(p.upper, 4), p.number) for p in sp.plateaus(pump, between=(-2, 2))]
    [(-1.75, -0.6712, 1), (0.6712, 1.75, -1)]
    """
    require_range(between)
    bands = _Bands(bloch_cell(pump))
    low, high = between or (-inf, inf)
    found = []
    for filled in range(len(bands.low) + 1) if between else bands.around(pump.fermi_level):
        gap = _opened(pump, bands, filled, (low, high), accuracy, budget)
        if gap is not None:
            found.append(_plateau(pump, gap, (low, high)))
    return tuple(found)


def require_range(between: tuple[float, float] | None) -> None:
    """Refuse a range of Fermi levels that is none."""
    if between is not None and not (all(map(isfinite, between)) and between[0] < between[1]):
        raise InputError(f"the range is {between}", allowed="two finite energies, the lower one first")


class _Bands:
    """What is known of each band from samples: it reaches at least from `low` to `high`."""

    def __init__(self, cell: BlochCell) -> None:
        self.cell = cell
        momenta, phases = np.meshgrid(np.linspace(0, np.pi, GRID[0]), 2 * np.pi * np.arange(GRID[1]) / GRID[1])
        energies = np.linalg.eigvalsh(cell.hamiltonian(momenta.ravel(), phases.ravel()))
        self.low, self.high = energies.min(axis=0), energies.max(axis=0)

    @property
    def narrowest(self) -> float:
        """The narrowest window that is looked for."""
        return NARROWEST * float(self.high[-1] - self.low[0]) or NARROWEST

    def window(self, filled: int) -> tuple[float, float]:
        """Return what no sample has met between band n and n + 1."""
        low = float(self.high[filled - 1]) if filled else -inf
        high = float(self.low[filled]) if filled < len(self.low) else inf
        return low, high

    def around(self, level: float) -> range:
        """Return the numbers of filled bands of the plateau nearest to `level`, and of its neighbours."""
        filled = int(((self.low + self.high) / 2 < level).sum())
        return range(max(0, filled - 1), min(len(self.low), filled + 1) + 1)

    def learn(self, momentum: float, phase: float) -> None:
        """Take one more sample."""
        energies = np.linalg.eigvalsh(self.cell.hamiltonian(np.array([momentum]), np.array([phase]))[0])
        self.low, self.high = np.minimum(self.low, energies), np.maximum(self.high, energies)


def _opened(
    pump: Pump, bands: _Bands, filled: int, between: tuple[float, float], accuracy: float, budget: int
) -> BulkGap | None:
    """Return the proven gap above `filled` bands, or None if there is no window, or none within the range."""
    for _ in range(TRIES):
        low, high = bands.window(filled)
        if high - low < bands.narrowest or low > between[1] or high < between[0]:
            return None
        level = _inside(low, high, bands)
        gap = bulk_gap(pump.at_fermi_level(level), accuracy=accuracy, floor=bands.narrowest / 4, budget=budget)
        if gap.is_open:
            return gap if gap.filled == filled else None
        bands.learn(gap.momentum, gap.phase)
        if bands.window(filled) == (low, high):  # neither proven nor met within the budget
            return None
    return None


def _inside(low: float, high: float, bands: _Bands) -> float:
    """Return the middle of a window, or a level at a band's typical distance beyond all bands."""
    away = float(bands.high[-1] - bands.low[0]) / len(bands.low) or 1.0
    if not isfinite(low):
        return high - away
    return (low + high) / 2 if isfinite(high) else low + away


def _plateau(pump: Pump, gap: BulkGap, between: tuple[float, float]) -> Plateau:
    lower, upper = max(between[0], gap.lower_edge.upper), min(between[1], gap.upper_edge.lower)
    level = (lower + upper) / 2 if isfinite(upper - lower) else _finite(lower, upper, gap)
    there = pump.at_fermi_level(level)
    number = _chern(there)
    proven = number is not None and _wound(there) == number
    return Plateau(
        lower,
        upper,
        number,
        "proven" if proven else "computed",
        gap.filled,
        level,
        gap.lower_edge,
        gap.upper_edge,
        gap.exact,
        gap.evaluations,
    )


def _finite(lower: float, upper: float, gap: BulkGap) -> float:
    """Return a level inside a window that is open on one side."""
    return upper - gap.distance_lower if isfinite(upper) else lower + gap.distance_lower


def _chern(pump: Pump) -> int | None:
    try:
        return chern_number(pump)
    except ClosedGapError:
        return None


def _wound(pump: Pump) -> int | None:
    try:
        return certify(pump, leak=False).number
    except (ClosedProbeError, SingularReflectionError, InputError):  # the last one: at an edge of a lead's band
        return None
