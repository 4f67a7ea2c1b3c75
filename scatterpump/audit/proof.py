"""Checks on the proof: it must cover the cycle, and its integer must be the interior's."""

from __future__ import annotations

from math import pi

from scatterpump.audit.check import Outcome, alarm, check, passed
from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import Place
from scatterpump.winding.certificate import behind_good_contact

__all__ = ["cycle_covered", "integer_agrees"]

MUCH = 1e-2


@check(
    "cycle covered",
    unit="share",
    because="Between samples det r may turn unseen; only where the looks cover every phi is the integer proven.",
    alarm="the proof leaves phases open",
    remedy="Mend what the other findings name; a longer device or a stronger contact often closes the proof.",
    needs_proof=True,
)
def cycle_covered(evidence: Evidence) -> Outcome | None:
    """Does the proof of the winding cover every phi?"""
    winding = evidence.winding
    if winding is None:
        return None
    if winding.certified:
        basis = "" if winding.exact else ", up to an estimate of how fast H changes"
        return passed(0, 0, f"The looks cover every phi{basis}.", basis="proven")
    open_share = min(1.0, sum(end - start for start, end in winding.unproven) / (2 * pi))
    place = Place(phase=winding.unproven[0][0]) if winding.unproven else Place()
    return alarm(open_share, 0, f"The proof stopped: {winding.reason}.", place)


@check(
    "integer agrees with bulk",
    unit="charges",
    because="The winding of a long clean pump is the Chern number of its filled bands, seen from the interior.",
    alarm="they differ; the finding says whether a closed end, a weak contact, the length or the ends account for it",
    remedy="Mend what is named here, or take the winding for what it is.",
    needs_proof=True,
)
def integer_agrees(evidence: Evidence) -> Outcome | None:
    """Is the winding the Chern number of the filled bands?"""
    winding, chern = evidence.winding, evidence.chern
    if winding is None or winding.number is None or chern is None:
        return None
    difference = winding.number - chern
    if difference == 0:
        return passed(0, 0, f"The winding equals the Chern number {chern:+d} of the filled bands.", basis="proven")
    text = f"The winding is {winding.number}, but the filled bands of the endless interior carry {chern}: "
    return alarm(difference, 0, text + _explanation(evidence, chern), basis="proven")


def _explanation(evidence: Evidence, chern: int) -> str:
    """Say which of a closed far end, a contact weaker than the leak, or a finite length accounts for the difference."""
    if evidence.device.drain.shape[1] == 0:
        return "the far end is closed, and its level takes back what the near one took in."
    if behind_good_contact(evidence.pump) == chern:
        return (
            "the contact is weaker than the leak, so the edge level fills and drains through the far end; behind a "
            f"good contact this device winds {chern:+d}."
        )
    leak = float(evidence.trace.leakage.max())
    if leak > MUCH:
        return f"the device is too short, up to {leak:.1e} of the electrons pass through it."
    return "the device differs from its interior, by disorder or by its ends."
