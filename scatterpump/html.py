"""Results as HTML, for notebooks: tables without any style of their own, every text escaped."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from html import escape
from typing import TYPE_CHECKING

from scatterpump.audit.finding import AuditReport, Finding
from scatterpump.pump import Pump
from scatterpump.summary import LABEL, breadth, summarise
from scatterpump.winding.result import Winding

if TYPE_CHECKING:
    from scatterpump.verdict import Verdict

__all__ = ["audit_table", "pump_line", "verdict_table", "winding_table"]

SHOWN = 40  # crossings: a notebook need not show thousands


def verdict_table(verdict: Verdict) -> str:
    """Return the verdict's summary as a table."""
    title, _, *lines = summarise(verdict).splitlines()
    return _table(title, (), _rows(lines))


def audit_table(report: AuditReport) -> str:
    """Return the findings, alarms and cautions first."""
    noted = [*report.alarms, *report.cautions]
    findings = [*noted, *(finding for finding in report.findings if finding.status == "pass")]
    title = f"{len(report.alarms)} alarms, {len(report.cautions)} cautions, {len(findings) - len(noted)} passed"
    heads = ("", "check", "value", "limit", "unit", "basis", "where", "what it means")
    unseen = [("not made", name, "", "", "", "", "", "") for name in report.unseen]
    return _table(title, heads, [*map(_finding, findings), *unseen])


def winding_table(winding: Winding) -> str:
    """Return the number, its proof and its crossings."""
    number = "not proven" if winding.number is None else f"{winding.number:+d}" if winding.number else "0"
    proof = f"{winding.evaluations} evaluations, {'exact' if winding.exact else 'estimated'} bounds, {winding.method}"
    rows = [("number", number), ("proof", proof if winding.certified else f"open: {winding.reason}")]
    rows += [("open", f"phi = {start:.6g} to {end:.6g}") for start, end in winding.unproven[:SHOWN]]
    for crossing in winding.crossings[:SHOWN]:
        verb = "filled" if crossing.direction > 0 else "emptied"
        rows.append(("level crosses", f"phi = {crossing.phase:.6g}, {verb}, {breadth(crossing)}"))
    hidden = len(winding.crossings) - SHOWN
    rows += [("", f"and {hidden} more crossings")] if hidden > 0 else []
    return _table("Winding of det r", (), [*rows, ("leak", f"at most {winding.leak.bound:.2g} of the electrons")])


def pump_line(pump: Pump) -> str:
    """Return what a pump is in one line."""
    sites, leads = pump.finalized.graph.num_nodes, len(pump.finalized.leads)
    about = f"{sites} sites, {leads} lead{'s' * (leads != 1)}, Fermi level {pump.fermi_level:g}, pumped {pump.route}"
    return f"<b>{escape(pump.name)}</b>: {escape(about)}"


def _finding(finding: Finding) -> tuple[str, ...]:
    said = f"{finding.message} {finding.remedy}".strip()
    numbers = (f"{finding.value:.4g}", f"{finding.limit:.4g}")
    return (finding.status, finding.check, *numbers, finding.unit, finding.basis, str(finding.where), said)


def _rows(lines: Sequence[str]) -> list[tuple[str, str]]:
    """Put the broken lines of a summary together again, a label and its text each."""
    rows: list[tuple[str, str]] = []
    for line in lines:
        label, text = line[:LABEL].strip(), line[LABEL:].strip()
        if label or not rows:
            rows.append((label, text))
        else:
            rows[-1] = (rows[-1][0], f"{rows[-1][1]} {text}")
    return rows


def _table(title: str, heads: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    head = f"<thead><tr>{_cells('th', heads)}</tr></thead>" if heads else ""
    body = "".join(f"<tr>{_cells('td', row)}</tr>" for row in rows)
    return f"<table><caption>{escape(title)}</caption>{head}<tbody>{body}</tbody></table>"


def _cells(tag: str, texts: Sequence[str]) -> str:
    return "".join(f'<{tag} style="text-align: left">{escape(text)}</{tag}>' for text in texts)
