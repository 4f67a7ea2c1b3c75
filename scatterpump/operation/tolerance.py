"""How much disorder, and how strong or weak a drive, a pump bears.

By Weyl's inequality no static change of the interior whose norm stays below the distance of the Fermi level from the
nearest band can close the gap, so none can change the integer of a device that is long enough.  For energies drawn from
a box of full width w that norm is at most w/2.  This bound is proven, and cautious: real samples bear more, which is
tried on a few of them.

The drive is what moves in H, H(phi) - mean H.  From a factor f at which the level keeps a proven distance d from the
bands, the next one may be d/|drive| away, by Weyl again: steps of that length prove a whole interval of factors without
a hole in it.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import inf

import numpy as np

from scatterpump.bulk.cell import BlochCell, bloch_cell
from scatterpump.bulk.chern import chern_of
from scatterpump.bulk.gap import BulkGap, bulk_gap, gap_of
from scatterpump.errors import ClosedGapError, InputError
from scatterpump.operation.altered import with_disorder
from scatterpump.pump import Pump
from scatterpump.solver.reflect import reflect
from scatterpump.winding.unwrap import steps

__all__ = ["LADDER", "DisorderTolerance", "DriveTolerance", "Reach", "disorder_tolerance", "drive_tolerance"]

SAMPLES = 3
LADDER = (1.0, 1.5, 2.0, 3.0, 4.0)  # widths to try, in proven ones: samples differ by more than these steps
READINGS = 360  # phases at which the integer of a sample is read off
FAST = np.pi / 2  # a step between two of them that may have been read wrong
LEAKS = 1e-2  # what passes a device that is no pump any more
ROUGH = 0.1  # accuracy of a gap that only decides how far the next step goes
LAST_STEP = 0.005  # of the factor: below it a march along the drive has arrived
MOST_STEPS = 60
LIMIT = 4.0
PHASES = 512  # looked at for the drive's norm where phi enters otherwise than by a few harmonics
MARGIN = 1.05


@dataclass(frozen=True)
class DisorderTolerance:
    """How much static disorder leaves the integer as it is.  Energies in the pump's unit.

    Attributes
    ----------
    change : float
        Proven: no static change of the interior of a smaller norm, such as a potential that stays below it everywhere,
        closes the gap at the Fermi level.
    width : float
        The same as the full width of a box of random on-site energies: twice as much.
    level, best_width : float
        The Fermi level at which that width is largest, the middle of its window, and the width there; the pump's own
        where the window is open on one side.
    samples : tuple of float
        Estimated: for each sample of disorder the largest width tried up to which the device kept its integer, read off
        at 360 phases without a proof; nothing above four times `width` is tried.
    exact : bool
        False if the proven bound rests on an estimate of how H varies between samples.
    """

    change: float
    width: float
    level: float
    best_width: float
    samples: tuple[float, ...]
    exact: bool


@dataclass(frozen=True)
class Reach:
    """How far a factor can go.

    Attributes
    ----------
    holds : float
        Proven: from 1 up to here the gap stays open.
    fails : float or None
        A factor beyond, at which a band meets the Fermi level or the filled bands have another Chern number; None if
        none was met within the limit.
    """

    holds: float
    fails: float | None


@dataclass(frozen=True)
class DriveTolerance:
    """By which factors the drive can be weakened or strengthened with the Fermi level where it is.

    Attributes
    ----------
    weakest, strongest : Reach
    exact : bool
        False if the bounds rest on an estimate of how H varies between samples.
    steps : int
        Gaps bounded on the way.
    """

    weakest: Reach
    strongest: Reach
    exact: bool
    steps: int


def disorder_tolerance(pump: Pump, *, samples: int = SAMPLES) -> DisorderTolerance:
    """Bound the static disorder that a pump bears, and try some.

    Parameters
    ----------
    pump : Pump
        A pump whose interior repeats: with a cell that was given, or is found in its device.
    samples : int
        How many samples of box disorder to try, on every site of the scattering region, independent from site to site.

    Raises
    ------
    ClosedGapError
        If the gap is not open at the Fermi level without any disorder.
    InputError
        If the pump has no cell, given or found.
    """
    gap = _open_gap(pump)
    low, high = gap.lower_edge.upper, gap.upper_edge.lower
    closed = np.isfinite(high - low)
    level, half = ((low + high) / 2, (high - low) / 2) if closed else (pump.fermi_level, gap.distance_lower)
    number = _read_off(pump)
    tried: tuple[float, ...] = ()
    if number is not None:
        tried = tuple(_borne(pump, seed, number, 2 * gap.distance_lower) for seed in range(samples))
    return DisorderTolerance(gap.distance_lower, 2 * gap.distance_lower, level, 2 * half, tried, gap.exact)


def drive_tolerance(pump: Pump, *, limit: float = LIMIT) -> DriveTolerance:
    """Find by which factors the drive of a pump can be multiplied before a band meets the Fermi level.

    Parameters
    ----------
    pump : Pump
        A pump whose interior repeats: with a cell that was given, or is found in its device.
    limit : float
        The largest factor to look at, above 1; the smallest is 0.

    Raises
    ------
    ClosedGapError
        If the gap is not open as the pump is.
    InputError
        If the pump has no cell, given or found, or the limit is not above 1.
    """
    if not 1 < limit < inf:
        raise InputError(f"limit is {limit}", allowed="a number above 1")
    gap = _open_gap(pump)
    cell = bloch_cell(pump)
    norm, is_bound = _drive_norm(cell)
    march = _March(cell, norm, _chern(cell))
    weakest, strongest = march.towards(0.0, gap), march.towards(limit, gap)
    return DriveTolerance(weakest, strongest, gap.exact and is_bound, march.steps)


def _open_gap(pump: Pump) -> BulkGap:
    gap = bulk_gap(pump)
    if not gap.is_open:
        raise ClosedGapError(pump.fermi_level, f"a band comes near it at k = {gap.momentum:.4g}, phi = {gap.phase:.4g}")
    return gap


def _borne(pump: Pump, seed: int, number: int, proven: float) -> float:
    """Return the largest width on the ladder up to which sample `seed` kept its integer, 0 if it did at none."""
    good = 0.0
    for rung in LADDER:
        if _read_off(with_disorder(pump, rung * proven, seed=seed)) != number:
            return good
        good = rung * proven
    return good


def _read_off(pump: Pump) -> int | None:
    """Return the winding of det r between many phases, or None if it leaks or turns too fast to be read off them."""
    trace = reflect(pump, np.linspace(0, 2 * np.pi, READINGS + 1))
    if trace.leakage.max() > LEAKS:
        return None
    found = steps(trace.reflection)
    return round(found.turns) if found.largest.max() < FAST else None


@dataclass
class _March:
    """Steps along the factor of the drive, each as long as the proven distance allows."""

    cell: BlochCell
    norm: float
    number: int | None
    steps: int = 0

    def gap(self, factor: float) -> BulkGap:
        self.steps += 1
        return gap_of(self.cell.driven(factor), accuracy=ROUGH)

    def towards(self, end: float, gap: BulkGap) -> Reach:
        """Return how far it goes from 1 towards `end`, where `gap` is the one at 1."""
        here, sense = 1.0, 1 if end > 1 else -1
        for _ in range(MOST_STEPS):
            step = gap.distance_lower / self.norm if self.norm > 0 else inf
            there = here + sense * step
            if (end - there) * sense <= 0:
                return Reach(end, None)
            if step < LAST_STEP * max(here, LAST_STEP):
                return Reach(there, self.failing(there, end))
            here, gap = there, self.gap(there)
        return Reach(here, self.failing(here, end))

    def failing(self, holds: float, end: float) -> float | None:
        """Return a factor beyond `holds` at which the integer is lost, looked for in doubling steps."""
        step = LAST_STEP * max(holds, LAST_STEP) * (1 if end > holds else -1)
        factor = holds
        while factor != end:
            factor = min(end, factor + step) if end > holds else max(end, factor + step)
            if not self.gap(factor).is_open or _chern(self.cell.driven(factor)) != self.number:
                return factor
            step *= 2
        return None


def _chern(cell: BlochCell) -> int | None:
    try:
        return chern_of(cell)
    except ClosedGapError:
        return None


def _drive_norm(cell: BlochCell) -> tuple[float, bool]:
    """Return a bound on |H - mean H| of the interior at any phi, by row sums, and whether it is one for certain."""
    if cell.harmonics is not None:
        parts = np.abs(np.delete(cell.harmonics.coefficients, cell.harmonics.degree, axis=0)).sum(axis=0)
        return _row_sums(parts[None]), True
    blocks = cell.blocks(2 * np.pi * np.arange(PHASES) / PHASES)
    return MARGIN * _row_sums(np.abs(blocks - blocks.mean(axis=0))), False


def _row_sums(sizes: np.ndarray[tuple[int, ...], np.dtype[np.float64]]) -> float:
    """Return the largest row sum of (n, 2, q, q) absolute blocks (h, V): |h| + |V| + |V^+|."""
    within, onward = sizes[:, 0], sizes[:, 1]
    return float((within.sum(axis=2) + onward.sum(axis=2) + onward.sum(axis=1)).max(initial=0.0))
