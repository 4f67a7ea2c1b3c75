"""A verdict as text: alarms first, then the integer, how sure it is, and the margins."""

from __future__ import annotations

from math import isfinite
from textwrap import wrap
from typing import TYPE_CHECKING

from scatterpump.audit.finding import AuditReport, Finding
from scatterpump.bulk.gap import FLOOR, BulkGap
from scatterpump.measure import Measure
from scatterpump.pump import Units
from scatterpump.version import version
from scatterpump.winding.resolved import Resolved
from scatterpump.winding.result import Crossing, Winding

if TYPE_CHECKING:
    from scatterpump.verdict import Verdict

__all__ = ["breadth", "summarise", "summarise_audit"]

WIDTH = 98
LABEL = 18
SHOWN_INTERVALS = 4
BROAD = "no resonance: broader than the cycle, so its charge comes at no one phi"
VOID = "not at all: with what the alarm names no proof, gap or leak means anything"


def summarise(verdict: Verdict) -> str:
    """Return the table that `Verdict.summary` shows."""
    lines = _head(verdict.name, verdict.fermi_level, verdict.units)
    for finding in verdict.audit.alarms:
        lines += _finding(finding)
    lines += _integer(verdict)
    lines += _row("how sure", VOID) if verdict.is_void else _margins(verdict)
    for finding in verdict.audit.cautions:
        lines += _finding(finding)
    lines += _counts(verdict.audit)
    return "\n".join(lines)


def _margins(verdict: Verdict) -> list[str]:
    lines = [] if verdict.winding is None else _winding(verdict.winding)
    if verdict.resolved is not None:
        lines += _row("conserved", _resolved(verdict.resolved))
    lines += _row("bulk gap", f"none: {verdict.interior}") if verdict.gap is None else _gap(verdict.gap, verdict.units)
    if verdict.chern is not None:
        lines += _row("Chern number", f"{_signed(verdict.chern)} of the filled bands")
    return lines


def breadth(crossing: Crossing) -> str:
    """Return in words how broad the level is that crosses."""
    return f"half-width {crossing.width:.1e} rad" if crossing.is_resonance else BROAD


def summarise_audit(report: AuditReport, name: str, fermi_level: float, units: Units | None = None) -> str:
    """Return the findings as a table: alarms first, then cautions, then what is in order and what was left out."""
    lines = _head(name, fermi_level, units)
    for finding in (*report.alarms, *report.cautions):
        lines += _finding(finding)
    lines += _row("in order", ", ".join(f.check for f in report.findings if f.status == "pass"))
    if report.unseen:
        lines += _row("not looked at", ", ".join(report.unseen))
    if report.idle:
        lines += _row("do not apply", ", ".join(report.idle))
    if report.quick:
        lines += _row("how sure", "sampled at single phases, not proven; 'scatterpump verdict' proves")
    return "\n".join([*lines, *_counts(report)])


def _head(name: str, fermi_level: float, units: Units | None) -> list[str]:
    return [f"{name}, Fermi level {fermi_level:g}{_unit(units)}   (scatterpump {version()})", ""]


def _unit(units: Units | None) -> str:
    """What stands behind an energy: " meV", or nothing."""
    return f" {Measure(units).energy_unit}".rstrip()


def _counts(report: AuditReport) -> list[str]:
    passed = sum(finding.status == "pass" for finding in report.findings)
    text = f"{passed} passed, {_count(report.cautions, 'caution')}, {_count(report.alarms, 'alarm')}"
    return _row("checks", text)


def _count(findings: tuple[Finding, ...], word: str) -> str:
    return f"{len(findings)} {word}" + ("" if len(findings) == 1 else "s")


def _signed(number: int) -> str:
    return f"{number:+d}" if number else "0"


def _row(label: str, text: str) -> list[str]:
    first, *rest = wrap(text, WIDTH - LABEL) or [""]
    return [f"{label:<{LABEL}}{first}", *(" " * LABEL + line for line in rest)]


def _finding(finding: Finding) -> list[str]:
    where = f" ({finding.where})" if finding.where else ""
    return _row(finding.status.upper(), f"{finding.check}{where}: {finding.message} {finding.remedy}")


def _integer(verdict: Verdict) -> list[str]:
    winding = verdict.winding
    if winding is None:
        return _row("charges a cycle", "undefined: r is singular on the cycle")
    if winding.number is None:
        return _row("charges a cycle", "not proven")
    if verdict.is_void:
        return _row("charges a cycle", "none that means anything")
    if not verdict.trustworthy:
        return _row("charges a cycle", f"not to be trusted (det r winds {_signed(winding.number)} times)")
    return _row("charges a cycle", f"{_signed(winding.number)} {verdict.route}")


def _winding(winding: Winding) -> list[str]:
    lines = _row("how sure", _proof(winding))
    for crossing in winding.crossings:
        verb = "filled from" if crossing.direction > 0 else "emptied into"
        lines += _row("level crosses", f"at phi = {crossing.phase:.4f}, {verb} the probe, {breadth(crossing)}")
    if 0 < winding.leak.bound < 1:
        kind = "proven" if winding.exact else "estimated"
        lines += _row("leak", f"{kind} to be at most {winding.leak.bound:.1e} of the electrons, at every phi")
    return lines


def _resolved(resolved: Resolved) -> str:
    if not resolved.sectors:
        return f"not resolved: {resolved.reason}"
    numbers = [(part.eigenvalue, part.number) for part in resolved.sectors]
    parts = [
        f"{'not proven' if number is None else _signed(number)} at eigenvalue {value:g}" for value, number in numbers
    ]
    total = "" if resolved.carried is None else f"; {resolved.carried:+g} of it carried in a cycle"
    return ", ".join(parts) + total


def _proof(winding: Winding) -> str:
    if not winding.certified:
        shown = ", ".join(f"{a:.6g} to {b:.6g}" for a, b in winding.unproven[:SHOWN_INTERVALS])
        more = f" and {len(winding.unproven) - SHOWN_INTERVALS} more" if len(winding.unproven) > SHOWN_INTERVALS else ""
        return f"not proven: {winding.reason}; open after {winding.evaluations} evaluations: phi = {shown}{more}"
    if winding.method == "no drain":
        return "proven: without a drain det r cannot wind"
    how = "proven" if winding.exact else "proven up to an estimate of how fast H changes"
    place = " behind a good contact" if winding.method == "open reference" else ""
    return f"{how}: {winding.evaluations} evaluations{place} cover every phi"


def _gap(gap: BulkGap, units: Units | None) -> list[str]:
    unit = _unit(units)
    if not gap.is_open:
        near = max(gap.distance_upper, FLOOR / 2)
        place = f"k = {gap.momentum:.4f}, phi = {gap.phase:.4f}"
        return _row("bulk gap", f"closed, or the level closer than {near:.1e}{unit} to a band, at {place}")
    kind = "proven" if gap.exact else "estimated"
    low, high = gap.lower_edge.upper, gap.upper_edge.lower
    window = (
        f"{low:.5g} to {high:.5g}{unit}"
        if isfinite(high - low)
        else f"below {high:.5g}{unit}"
        if isfinite(high)
        else f"above {low:.5g}{unit}"
    )
    lines = _row("Fermi window", f"{window}, the level is {gap.distance_lower:.4g}{unit} away from the nearer edge")
    if not isfinite(gap.upper):
        return lines
    return [
        *_row(
            "bulk gap",
            f"{gap.lower:.5g} to {gap.upper:.5g}{unit} ({kind}), smallest at k = {gap.momentum:.4f}, "
            f"phi = {gap.phase:.4f}",
        ),
        *lines,
    ]
