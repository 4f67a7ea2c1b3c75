"""Checks on edge levels: the contact must be stronger than the leak, and the start clear of levels."""

from __future__ import annotations

from math import inf, pi

import numpy as np
from numpy.typing import NDArray

from scatterpump.audit.check import Outcome, alarm, caution, check, passed
from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import Place
from scatterpump.audit.glance import glance
from scatterpump.solver.folded import FoldedDevice
from scatterpump.winding.certificate import behind_good_contact, good_contact
from scatterpump.winding.reference import Contact

__all__ = ["contact_above_leak", "start_clear"]

PLENTY = 0.1
NEAR_RESONANCE = 0.6  # |r - ua| below which a level is about: some 35 degrees to either side
MOST_WORK = 2e9  # multiplications spent on looks behind the good contact
LOOKS = (8, 32)


@check(
    "contact above leak",
    unit="1",
    because="An edge level fills through the contact and through whatever leaks from the far end; if the contact is "
    "the weaker one, the far end does it all, and det r turns back what it turned.",
    caution=f"more than {PLENTY:g} of what the contact lets through leaks, behind a good contact, at a level",
    alarm="more leaks than the contact lets through, and the winding is not the one behind a good contact",
    remedy="Make the device longer or its contact stronger.",
)
def contact_above_leak(evidence: Evidence) -> Outcome | None:
    """Does the probe's contact let through more than the device leaks where an edge level is at the Fermi level?"""
    device = evidence.device
    if device.drain.shape[1] == 0 or device.probe.shape[1] == 0:
        return None
    good, excess = good_contact(device)
    contact = Contact(excess)
    if contact.transparency >= PLENTY:
        return None  # the contact is not the weak one, and the leak has a check of its own
    seen = [found for phase in _phases(device) if (found := glance(good, phase)) is not None]
    level = [found for found in seen if contact.off_segment(found.reflection) < NEAR_RESONANCE]
    worst = max(level, key=lambda found: found.leak, default=None)
    if worst is None:
        return passed(0, PLENTY, "No level comes to the Fermi level, so none can be emptied from behind.")
    value, place = worst.leak / contact.transparency, Place(phase=worst.phase)
    text = (
        f"Behind a good contact {worst.leak:.1e} of the electrons leak where a level is at the Fermi level; the actual "
        f"contact lets {contact.transparency:.1e} through"
    )
    if value <= PLENTY:
        return passed(value, PLENTY, text + ".", place)
    if value >= 1 and not _same_behind_good_contact(evidence):
        return alarm(value, 1, text + ": levels fill and drain through the far end.", place)
    return caution(value, PLENTY, text + ", which is not much more.", place)


def _phases(device: FoldedDevice) -> list[float]:
    """Even phases, fewer for large devices."""
    work = 8 * device.size * max(1, device.half) ** 2
    count = int(np.clip(MOST_WORK / work, *LOOKS))
    return [2 * pi * i / count for i in range(count)]


def _same_behind_good_contact(evidence: Evidence) -> bool:
    """Whether a good contact is proven to leave the winding as it is; a quick audit knows nothing of the kind."""
    if evidence.quick or evidence.winding is None or evidence.winding.number is None:
        return False
    return behind_good_contact(evidence.pump) == evidence.winding.number


@check(
    "start clear of levels",
    unit="rad",
    because="A level at the Fermi level where the cycle starts is half filled there; the winding does not mind, but a "
    "charge counted over one cycle from that start does.",
    caution="an eigenphase of r at phi = 0 is within a quarter turn of the resonance of a level that moves",
    remedy="Start the cycle elsewhere (started_at), or move the Fermi level a little; weaken the contact if the "
    "level is broader than the cycle.",
)
def start_clear(evidence: Evidence) -> Outcome | None:
    """Is there no edge level at the Fermi level where the cycle starts?"""
    phase = _resonance(evidence)
    if phase > pi / 2:
        return passed(phase, pi / 2, "No edge level is at the Fermi level where the cycle starts.", Place(phase=0.0))
    text = "An edge level is at the Fermi level, within its own width, where the cycle starts."
    return caution(phase, pi / 2, text, Place(phase=0.0))


def _resonance(evidence: Evidence) -> float:
    """Distance of the eigenphases of r at phi = 0 from 0, the resonance; inf where nothing says that it is a level."""
    seen = glance(evidence.device, 0.0)
    return inf if seen is None else float(_eigenphases(seen.reflection).min(initial=inf))


def _eigenphases(reflection: NDArray[np.complex128]) -> NDArray[np.float64]:
    return np.asarray(np.abs(np.angle(np.linalg.eigvals(reflection))), dtype=float)
