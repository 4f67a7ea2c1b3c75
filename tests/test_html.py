"""Results in notebooks: tables that hold what the result holds, whatever its texts."""

from __future__ import annotations

from dataclasses import replace
from html.parser import HTMLParser

import pytest
from devices import WIDE

from scatterpump.audit.finding import AuditReport, Finding, Place
from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Wave
from scatterpump.pump import Pump
from scatterpump.verdict import Verdict, judge

HOSTILE = "<script>alert('x')</script> & \"more\""


class Cells(HTMLParser):
    """The texts of all cells, row by row, and the tags met."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.rows: list[list[str]] = []
        self.tags: list[str] = []
        self.feed(text)
        self.close()

    def handle_starttag(self, tag: str, attrs: object) -> None:
        self.tags.append(tag)
        if tag == "tr":
            self.rows.append([])
        elif tag in ("td", "th"):
            self.rows[-1].append("")

    def handle_data(self, data: str) -> None:
        if self.rows and self.rows[-1]:
            self.rows[-1][-1] += data


@pytest.fixture(scope="module")
def pump() -> Pump:
    chain = ModulatedChain(sites=36, fermi_level=-1.2, onsite=[Wave(1.5, 3)], probe=WIDE, drain=WIDE, name=HOSTILE)
    return chain.pump()


@pytest.fixture(scope="module")
def verdict(pump: Pump) -> Verdict:
    return judge(pump)


def test_verdict_is_its_summary_as_a_table(verdict: Verdict) -> None:
    found = Cells(verdict._repr_html_())
    # derived: the same words, the broken lines put together again
    assert ["charges a cycle", "+1 from probe to drain"] in found.rows
    shown = " ".join(" ".join(row) for row in found.rows)
    assert shown.split() == " ".join(verdict.summary().splitlines()[2:]).split()


def test_texts_are_escaped(pump: Pump, verdict: Verdict) -> None:
    for text in (pump._repr_html_(), verdict._repr_html_()):
        # derived: HTML 5: text between tags must not open one
        assert "script" not in Cells(text).tags
        assert "&lt;script&gt;" in text


def test_winding_shows_number_and_crossings(verdict: Verdict) -> None:
    assert verdict.winding is not None
    rows = Cells(verdict.winding._repr_html_()).rows
    crossings = [text for label, text in rows if label == "level crosses"]
    # derived: the record's own fields
    assert ["number", "+1"] in rows
    assert len(crossings) == len(verdict.winding.crossings)
    assert f"phi = {verdict.winding.crossings[0].phase:.6g}" in crossings[0]


def test_winding_without_proof_says_where_it_is_open(verdict: Verdict) -> None:
    assert verdict.winding is not None
    winding = replace(verdict.winding, number=None, certified=False, unproven=((1.0, 2.0),), reason="out of looks")
    rows = Cells(winding._repr_html_()).rows
    # derived
    assert ["number", "not proven"] in rows
    assert ["proof", "open: out of looks"] in rows
    assert ["open", "phi = 1 to 2"] in rows


def test_audit_has_a_row_for_every_check(verdict: Verdict) -> None:
    rows = Cells(verdict.audit._repr_html_()).rows[1:]
    # derived
    assert sorted(row[1] for row in rows) == sorted(finding.check for finding in verdict.audit.findings)


def test_alarms_come_first_and_are_escaped() -> None:
    passed = Finding("first", "pass", 0.0, 1.0, "1", "Fine.")
    alarm = Finding("second", "alarm", 2.0, 1.0, "E", HOSTILE, "Mend it.", Place(phase=1.5))
    found = Cells(AuditReport((passed, alarm), unseen=("third",))._repr_html_())
    # derived
    assert [row[0] for row in found.rows[1:]] == ["alarm", "pass", "not made"]
    assert found.rows[1][-1] == f"{HOSTILE} Mend it."
    assert "script" not in found.tags
