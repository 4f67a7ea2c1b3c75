"""Check on the interior: the Fermi level must stay in one gap, over all momenta and phases."""

from __future__ import annotations

from math import inf, isfinite

import numpy as np

from scatterpump.audit.check import Outcome, alarm, caution, check, passed
from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import Place
from scatterpump.bulk.cell import BlochCell
from scatterpump.bulk.gap import FLOOR, BulkGap

__all__ = ["fermi_level_in_gap"]

THIN = 0.05
GRID = (24, 48)
SMALL_GRID = (12, 24)
SMALL_CELL = 24  # orbitals up to which the large grid costs little


@check(
    "Fermi level in gap",
    unit="E",
    because="A pump is quantised as long as no band of its interior meets the Fermi level, for any k and phi.",
    caution=f"the level is closer to a band than {THIN:g} of the window between the bands",
    alarm=f"a band meets the level, or comes closer than {FLOOR / 2:g}",
    remedy="Move the Fermi level into the middle of a gap, or change the cycle so that the gap stays open.",
)
def fermi_level_in_gap(evidence: Evidence) -> Outcome | None:
    """Does the Fermi level stay inside one gap of the interior, over the whole (k, phi) torus?"""
    cell, gap = evidence.cell, evidence.gap
    if cell is None:
        return None
    return _sampled(cell) if gap is None else _proven(gap, cell.fermi_level)


def _proven(gap: BulkGap, level: float) -> Outcome:
    place = Place(phase=gap.phase, momentum=gap.momentum)
    if not gap.is_open:
        near = max(gap.distance_upper, FLOOR / 2)
        text = f"A bulk band meets the Fermi level {level:g} or comes within {near:.1e} of it, so it is not gapped"
        return alarm(gap.distance_upper, 0, text + " and any integer is an accident.", place, basis="proven")
    width = gap.upper_edge.lower - gap.lower_edge.upper
    limit = THIN * width if isfinite(width) else 0.0
    text = f"The Fermi level stays at least {gap.distance_lower:.4g} away from every bulk band."
    if gap.distance_lower < limit:
        return caution(gap.distance_lower, limit, text, place, basis="proven")
    return passed(gap.distance_lower, limit, text, place, basis="proven")


def _sampled(cell: BlochCell) -> Outcome:
    """The same from a grid of k and phi."""
    level = cell.fermi_level
    n_k, n_phi = GRID if cell.bands <= SMALL_CELL else SMALL_GRID
    momenta, phases = (2 * np.pi * np.arange(n) / n for n in (n_k, n_phi))
    h, hop = np.moveaxis(cell.blocks(phases), 1, 0)
    turned = np.exp(-1j * momenta)[:, None, None, None] * hop
    energies = np.linalg.eigvalsh(h + turned + turned.conj().swapaxes(-1, -2)) - level
    distances = np.abs(energies).min(axis=2)
    k, phi = np.unravel_index(int(distances.argmin()), distances.shape)
    place = Place(phase=float(phases[phi]), momentum=float(momenta[k]))
    distance, filled = float(distances.min()), (energies < 0).sum(axis=2)
    if filled.min() != filled.max() or distance <= FLOOR / 2:
        text = f"A bulk band crosses the Fermi level {level:g}, so it is not gapped and any integer is an accident."
        return alarm(0.0, 0, text, place)
    above = float(energies[energies > 0].min(initial=inf))
    below = float(-energies[energies < 0].max(initial=-inf))
    limit = THIN * (above + below) if isfinite(above + below) else 0.0
    text = f"At the {distances.size} (k, phi) sampled the Fermi level is {distance:.4g} away from the bulk bands."
    return caution(distance, limit, text, place) if distance < limit else passed(distance, limit, text, place)
