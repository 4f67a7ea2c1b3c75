"""Checks on r(phi): all must be reflected, and a longer device must reflect more."""

from __future__ import annotations

from math import ceil, log

from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import Finding, graded
from scatterpump.bulk.decay import decay_per_cell

__all__ = ["decays", "leakage", "reflection_invertible"]

GOOD_LEAK, BAD_LEAK = 1e-6, 1e-2
DOUBTFUL_REFLECTION, SINGULAR_REFLECTION = 0.9, 1e-3
PROPAGATING = 1 - 1e-6


def leakage(evidence: Evidence) -> Finding:
    """Largest probability to reach another lead: proven over the cycle where it can be, else the largest sampled."""
    leak = evidence.trace.leakage
    worst = int(leak.argmax())
    sampled, where = float(leak[worst]), f"phi = {evidence.trace.phases[worst]:.4g}"
    bound = 1.0 if evidence.winding is None else max(evidence.winding.leak.bound, sampled)
    if bound <= GOOD_LEAK:
        return Finding(
            "leakage",
            "pass",
            bound,
            GOOD_LEAK,
            "1",
            f"At every phi at most {bound:.1e} of the electrons reach another lead instead of being reflected.",
            "",
            where,
        )
    if sampled <= GOOD_LEAK:
        known = f"proven is only {bound:.1e}" if bound < 1 else "for the whole cycle nothing is proven"
        return Finding(
            "leakage",
            "caution",
            bound,
            GOOD_LEAK,
            "1",
            f"At the phases sampled at most {sampled:.1e} of the electrons reach another lead, but {known}.",
            "Make the device longer or its contact stronger, so that the bound closes.",
            where,
        )
    return Finding(
        "leakage",
        graded(sampled, GOOD_LEAK, BAD_LEAK),
        sampled,
        GOOD_LEAK,
        "1",
        f"Up to {sampled:.1e} of the electrons reach another lead instead of being reflected; the charge of a cycle "
        "departs from the integer by about that much.",
        "Make the device longer or its gap wider.",
        where,
    )


def reflection_invertible(evidence: Evidence) -> Finding:
    """Smallest singular value of r at the phases sampled: where it vanishes the winding is undefined."""
    trace = evidence.trace
    worst = int(trace.smallest.argmin())
    value, where = float(trace.smallest[worst]), f"phi = {trace.phases[worst]:.4g}"
    if evidence.winding is None or value < SINGULAR_REFLECTION:
        return Finding(
            "reflection invertible",
            "alarm",
            value,
            DOUBTFUL_REFLECTION,
            "1",
            "Some electrons are not reflected at all, so det r passes through 0 and its winding is undefined.",
            "Make the device longer, or move the cycle and the Fermi level away from the closing gap.",
            where,
        )
    if value < DOUBTFUL_REFLECTION:
        return Finding(
            "reflection invertible",
            "caution",
            value,
            DOUBTFUL_REFLECTION,
            "1",
            f"The smallest singular value of r is {value:.3f}: there is an integer, but no quantised charge.",
            "Make the device longer or its gap wider.",
            where,
        )
    return Finding(
        "reflection invertible",
        "pass",
        value,
        DOUBTFUL_REFLECTION,
        "1",
        "Every incoming state is reflected almost wholly, so r is far from singular.",
        "",
        where,
    )


def decays(evidence: Evidence) -> Finding | None:
    """Decay of the slowest state at the Fermi level in the interior, and the length it asks for."""
    if evidence.gap is None:
        return None
    rate = decay_per_cell(evidence.pump)
    if rate >= PROPAGATING:
        return Finding(
            "leak falls with length",
            "alarm",
            rate,
            PROPAGATING,
            "per cell",
            "At some phase a state at the Fermi level propagates through the interior, so no length stops the leak.",
            "Move the Fermi level into a gap that stays open all along the cycle.",
        )
    length = -1 / log(rate) if rate > 0 else 0.0
    worst = float(evidence.trace.leakage.max(initial=0.0))
    message = f"Inside the gap the amplitude falls by e within at most {length:.3g} cells"
    if worst <= GOOD_LEAK:
        return Finding("leak falls with length", "pass", rate, PROPAGATING, "per cell", message + ".")
    more = ceil(length * log(worst / GOOD_LEAK) / 2)
    return Finding(
        "leak falls with length",
        "caution",
        rate,
        PROPAGATING,
        "per cell",
        message + f", so about {more} more cells bring the leak down to {GOOD_LEAK:g}.",
        f"Prolong the device by at least {more} cells.",
    )
