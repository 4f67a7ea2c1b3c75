"""Checks on the interior: the Fermi level must stay in one gap, whose Chern number is the integer."""

from __future__ import annotations

from math import isfinite

from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import Finding
from scatterpump.bulk.gap import FLOOR
from scatterpump.winding.certificate import behind_good_contact

__all__ = ["fermi_level_in_gap", "integer_agrees"]

THIN = 0.05
MUCH = 1e-2


def fermi_level_in_gap(evidence: Evidence) -> Finding | None:
    """Distance of the Fermi level from the nearest bulk band over the (k, phi) torus, against the gap."""
    gap, level = evidence.gap, evidence.pump.fermi_level
    if gap is None:
        return None
    where = f"k = {gap.momentum:.4g}, phi = {gap.phase:.4g}"
    if not gap.is_open:
        return Finding(
            "Fermi level in gap",
            "alarm",
            gap.distance_upper,
            0.0,
            "E",
            f"A bulk band meets the Fermi level {level:g} or comes within "
            f"{max(gap.distance_upper, FLOOR / 2):.1e} of it, so it is not gapped and any integer is an accident.",
            "Move the Fermi level into a gap, or change the cycle so that the gap stays open.",
            where,
        )
    width = gap.upper_edge.lower - gap.lower_edge.upper
    message = f"The Fermi level stays at least {gap.distance_lower:.4g} away from every bulk band."
    limit = THIN * width if isfinite(width) else 0.0
    if gap.distance_lower < limit:
        return Finding(
            "Fermi level in gap",
            "caution",
            gap.distance_lower,
            limit,
            "E",
            message,
            "Move the Fermi level towards the middle of the window.",
            where,
        )
    return Finding("Fermi level in gap", "pass", gap.distance_lower, limit, "E", message, where=where)


def integer_agrees(evidence: Evidence) -> Finding | None:
    """The winding of a long clean pump is the Chern number of its filled bands."""
    winding, chern = evidence.winding, evidence.chern
    if winding is None or winding.number is None or chern is None:
        return None
    difference = winding.number - chern
    if difference == 0:
        return Finding(
            "integer agrees with bulk",
            "pass",
            0,
            0,
            "charges",
            f"The winding equals the Chern number {chern:+d} of the filled bands.",
        )
    return Finding(
        "integer agrees with bulk",
        "alarm",
        difference,
        0,
        "charges",
        f"The winding is {winding.number}, but the filled bands of the endless interior carry {chern}: "
        + _explanation(evidence, chern),
        "Mend what is named here, or take the winding for what it is.",
    )


def _explanation(evidence: Evidence, chern: int) -> str:
    """Say which of a closed far end, a contact weaker than the leak, or a finite length accounts for the difference."""
    if evidence.pump.drain is None:
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
