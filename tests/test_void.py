"""Where an alarm leaves no r(phi) to speak of, nothing is called proven beside it."""

from __future__ import annotations

from types import SimpleNamespace
from typing import Any

import pytest
from sound import bench

from scatterpump.operation.sheet import Sheet, operating_sheet


def absorbing(site: Any, phi: Any) -> Any:
    """Return an imaginary level, which swallows electrons."""
    return -0.3j


@pytest.fixture(scope="module")
def sheet() -> Sheet:
    return operating_sheet(SimpleNamespace(pump=lambda: bench(cells=8, value=absorbing)), samples=0)


def test_verdict_without_a_hermitian_hamiltonian_proves_nothing(sheet: Sheet) -> None:
    verdict = sheet.verdict
    assert [finding.check for finding in verdict.audit.alarms] == ["Hamiltonian Hermitian"]
    assert (verdict.is_void, verdict.trustworthy) == (True, False)
    assert verdict.to_dict()["is_void"] is True
    text = verdict.summary()
    assert "how sure          not at all" in text
    for claim in ("proven:", "proven to be", "bulk gap  ", "det r winds"):
        assert claim not in text


def test_sheet_without_a_hermitian_hamiltonian_has_no_figures(sheet: Sheet) -> None:
    assert (sheet.limits, sheet.plateaus) == ((), ())
    assert [line.label for line in sheet.output] == ["charges a cycle"]
    assert "none to tell: with what the alarm names" in sheet.summary()


def test_alarm_about_a_device_that_scatters_leaves_its_proofs() -> None:
    """A device that leaks is no pump, but its r is what it is, and so is its winding."""
    verdict = operating_sheet(SimpleNamespace(pump=lambda: bench(cells=2)), samples=0).verdict
    assert "leakage" in {finding.check for finding in verdict.audit.alarms}
    assert not verdict.is_void and verdict.to_dict()["is_void"] is False
    assert "how sure          proven" in verdict.summary()
