"""Checks on r(phi): all must be reflected, and a longer device must reflect more."""

from __future__ import annotations

from math import ceil, log

from scatterpump.audit.check import Outcome, alarm, caution, check, graded, passed
from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import Place
from scatterpump.bulk.decay import decay_per_cell

__all__ = ["decays", "leakage", "reflection_invertible"]

GOOD_LEAK, BAD_LEAK = LEAK = (1e-6, 1e-2)
DOUBTFUL_REFLECTION, SINGULAR_REFLECTION = 0.9, 1e-3
PROPAGATING = 1 - 1e-6
SMALL_CELL, PHASES, FEW_PHASES = 24, 64, 12  # orbitals up to which many phases cost little


@check(
    "leakage",
    unit="1",
    because="The charge of a cycle departs from the integer by about the share that is not reflected.",
    caution=f"more than {GOOD_LEAK:g} of the electrons reach another lead, or a proof for all phi only covers more",
    alarm=f"more than {BAD_LEAK:g} of them do",
    remedy="Make the device longer or its gap wider.",
)
def leakage(evidence: Evidence) -> Outcome | None:
    """How much of what is sent in reaches another lead instead of being reflected?"""
    leak = evidence.trace.leakage
    worst = int(leak.argmax())
    sampled, place = float(leak[worst]), Place(phase=float(evidence.trace.phases[worst]))
    if sampled > GOOD_LEAK:
        text = f"Up to {sampled:.1e} of the electrons reach another lead instead of being reflected; the charge of a "
        return graded(sampled, LEAK, "", text + "cycle departs from the integer by about that much.", place)
    if evidence.quick:
        text = f"At the {len(leak)} phases sampled at most {sampled:.1e} of the electrons reach another lead."
        return passed(sampled, GOOD_LEAK, text, place)
    bound = 1.0 if evidence.winding is None else max(evidence.winding.leak.bound, sampled)
    if bound <= GOOD_LEAK:
        text = f"At every phi at most {bound:.1e} of the electrons reach another lead instead of being reflected."
        return passed(bound, GOOD_LEAK, text, place, basis="proven")
    known = f"proven is only {bound:.1e}" if bound < 1 else "for the whole cycle nothing is proven"
    text = f"At the phases sampled at most {sampled:.1e} of the electrons reach another lead, but {known}."
    remedy = "Make the device longer or its contact stronger, so that the bound closes."
    return caution(bound, GOOD_LEAK, text, place, remedy=remedy)


@check(
    "reflection invertible",
    unit="1",
    because="Where a state is not reflected at all det r is 0, and a path through 0 has no winding.",
    caution=f"the smallest singular value of r falls below {DOUBTFUL_REFLECTION:g}: an integer, not a quantised charge",
    alarm=f"it falls below {SINGULAR_REFLECTION:g}",
    remedy="Make the device longer, or move the cycle and the Fermi level away from the closing gap.",
)
def reflection_invertible(evidence: Evidence) -> Outcome | None:
    """Is every incoming state reflected, at every phase sampled?"""
    trace = evidence.trace
    worst = int(trace.smallest.argmin())
    value, place = float(trace.smallest[worst]), Place(phase=float(trace.phases[worst]))
    if value < SINGULAR_REFLECTION or (evidence.winding is None and not evidence.quick):
        text = "Some electrons are not reflected at all, so det r passes through 0 and its winding is undefined."
        return alarm(value, SINGULAR_REFLECTION, text, place)
    if value < DOUBTFUL_REFLECTION:
        text = f"The smallest singular value of r is {value:.3f}: there is an integer, but no quantised charge."
        return caution(value, DOUBTFUL_REFLECTION, text, place)
    text = "Every incoming state is reflected almost wholly, so r is far from singular."
    return passed(value, DOUBTFUL_REFLECTION, text, place)


@check(
    "leak falls with length",
    unit="per cell",
    because="In a gap every state at the Fermi level dies out exponentially; a propagating one leaks at any length.",
    caution=f"the leak exceeds {GOOD_LEAK:g}, which a longer device would mend; the finding says by how many cells",
    alarm="a state at the Fermi level propagates through the interior at some phase",
    remedy="Move the Fermi level into a gap that stays open all along the cycle.",
)
def decays(evidence: Evidence) -> Outcome | None:
    """How fast do states at the Fermi level die out in the interior, and which length does that ask for?"""
    if evidence.cell is None:
        return None
    cheap = evidence.cell.bands <= SMALL_CELL
    rate = decay_per_cell(evidence.pump, phases=PHASES if cheap else FEW_PHASES)
    if rate >= PROPAGATING:
        text = "At some phase a state at the Fermi level propagates through the interior, so no length stops the leak."
        return alarm(rate, PROPAGATING, text)
    length = -1 / log(rate) if rate > 0 else 0.0
    worst = float(evidence.trace.leakage.max(initial=0.0))
    text = f"Inside the gap the amplitude falls by e within at most {length:.3g} cells"
    if worst <= GOOD_LEAK:
        return passed(rate, PROPAGATING, text + ".")
    more = ceil(length * log(worst / GOOD_LEAK) / 2)
    text += f", so about {more} more cells bring the leak down to {GOOD_LEAK:g}."
    return caution(rate, PROPAGATING, text, remedy=f"Prolong the device by at least {more} cells.")
