"""Every check of the audit fires on a device built to break just its rule, and is silent on sound devices."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from devices import RICE_MELE_LOOPS, WIDE, loop, rice_mele
from scipy.constants import electron_mass, electron_volt
from sound import LATTICE, SOUND, bench, fine_step, on, stagger, superlattice, weak, wire, with_lead

from scatterpump.audit.check import Check
from scatterpump.audit.evidence import Evidence
from scatterpump.audit.examine import CHECKS, examine, run_checks
from scatterpump.audit.finding import AuditReport, Finding
from scatterpump.builder.description import Lead
from scatterpump.pump import Continuum, Pump

NAMED = {check.name: check for check in CHECKS}
Make = Callable[[], Pump]
SLOW = {"splined trace"}  # its proof takes seconds, and other tests make it


def gone(x: int, y: int = 0, *, where: float = 0.99) -> Any:
    """Return an edit: a site whose energy is no number for cos phi beyond `where`."""
    return on(x, y, lambda site, phi: float("nan") if np.cos(phi) > where else 0.0)


def step(height: float) -> Any:
    """Return an edit: a site deep inside whose energy is `height` higher for a part of the cycle."""
    return on(20, 0, lambda site, phi: stagger(site, phi) + height * ((phi > 2) & (phi < 4)))


def step_beside(height: float) -> Any:
    """Return an edit: a site beside the chain that is still but for a step."""

    def edit(system: Any) -> None:
        system[LATTICE(20, 1)] = lambda site, phi: 3 + height * ((phi > 2) & (phi < 4))
        system[LATTICE(20, 1), LATTICE(20, 0)] = -0.4

    return edit


def drift(height: float) -> Any:
    """Return an edit: a site deep inside that does not come back."""
    return on(20, 0, lambda site, phi: stagger(site, phi) + height * phi / (2 * np.pi))


def lossy(rate: float) -> Any:
    return on(20, 0, lambda site, phi: stagger(site, phi) - 1j * rate)


def barrier(height: float) -> Any:
    """Return an edit: a site beside the chain, at a huge energy."""

    def edit(system: Any) -> None:
        system[LATTICE(20, 1)] = height
        system[LATTICE(20, 1), LATTICE(20, 0)] = -0.5

    return edit


def island(system: Any) -> None:
    system[LATTICE(7, 5)] = 0.3


def nothing_between(system: Any) -> None:
    system[LATTICE(10, 0), LATTICE(13, 0)] = 0.0


def cut(system: Any) -> None:
    system[LATTICE(20, 0), LATTICE(21, 0)] = 0.0


def far_island(system: Any) -> None:
    system[LATTICE(60, 5)] = 0.0


def coarse(hopping: float) -> Pump:
    """The lattice of the workbench said to stand for a continuum of another hopping."""
    pump = fine_step()
    assert pump.continuum is not None
    return replace(
        pump, continuum=replace(pump.continuum, energy=pump.continuum.energy * pump.continuum.hopping / hopping)
    )


def still(site: Any, phi: Any) -> float:
    return 0.0


BROKEN: tuple[tuple[str, str, Make], ...] = (
    ("elements finite", "alarm", lambda: bench(edit=gone(12))),
    ("Hamiltonian Hermitian", "alarm", lambda: bench(edit=lossy(1e-12))),
    ("cycle closes", "caution", lambda: bench(edit=drift(1e-10))),
    ("cycle closes", "alarm", lambda: bench(edit=drift(1e-3))),
    ("cycle continuous", "caution", lambda: bench(edit=step_beside(1e-5))),
    ("cycle continuous", "alarm", lambda: bench(edit=step(0.1))),
    ("cycle drives the device", "caution", lambda: bench(value=lambda s, phi: 0.5, bond=-1.0, energy=-2.0)),
    ("couplings present", "caution", lambda: bench(edit=nothing_between)),
    ("sites reached", "caution", lambda: bench(edit=island)),
    ("leads attached", "caution", lambda: with_lead(wire((0, 1), [(60, 5)]), edit=far_island)),
    ("leads attached", "alarm", lambda: bench(edit=cut)),
    ("leads apart", "caution", lambda: with_lead(wire((1, 0), [(0, 0)]))),
    ("leads apart", "alarm", lambda: with_lead(wire((-1, 0), [(0, 0)]))),
    ("continuum resolved", "caution", lambda: coarse(5.0)),
    ("continuum resolved", "alarm", lambda: coarse(1.0)),
    ("leads still", "alarm", lambda: bench(drain=wire((1, 0), [(0, 0)], level=lambda site, phi: np.sin(phi)))),
    ("probe open", "alarm", lambda: bench(probe=wire((-1, 0), [(0, 0)], level=9.0))),
    ("modes move", "caution", lambda: bench(drain=wire((1, 0), [(0, 0)], level=0.1 + 4.0 - 2e-4))),
    ("modes move", "alarm", lambda: bench(drain=wire((1, 0), [(0, 0)], level=4.0), energy=0.0)),
    ("drain present", "caution", lambda: replace(with_lead(wire((0, 1), [(7, 5)]), edit=island), drain=2)),
    ("drain present", "alarm", lambda: bench(drain=wire((1, 0), [(0, 0)], level=9.0))),
    ("drain present", "alarm", lambda: rice_mele(loop(), cells=20, drain="wall")),  # type: ignore[arg-type]
    ("drain present", "alarm", lambda: bench(rows=2, between=0.0, drain=wire((1, 0), [(0, 0)]))),
    ("well conditioned", "caution", lambda: bench(edit=barrier(1e10))),
    ("well conditioned", "alarm", lambda: bench(edit=barrier(1e13))),
    ("leakage", "caution", lambda: rice_mele(loop(), cells=10)),
    ("leakage", "alarm", lambda: rice_mele(loop(), cells=3)),
    ("reflection invertible", "caution", lambda: rice_mele(loop(), cells=2)),
    ("reflection invertible", "alarm", lambda: rice_mele(loop(), cells=1)),
    ("leak falls with length", "caution", lambda: rice_mele(loop(), cells=10)),
    ("leak falls with length", "alarm", lambda: superlattice(fermi_level=0.3)),
    ("contact above leak", "caution", lambda: weak(0.015, cells=8)),
    ("contact above leak", "alarm", lambda: weak(1e-3, cells=8)),
    ("start clear of levels", "caution", lambda: rice_mele(loop().started_at(np.pi), cells=20)),
    ("Fermi level in gap", "caution", lambda: rice_mele(loop(), cells=80, energy=0.48)),
    ("Fermi level in gap", "alarm", lambda: superlattice(fermi_level=0.3)),
)
# What a broken rule entails: no other alarm may come with it.
ENTAILED = {
    ("leads apart", "alarm"): {"leakage"},
    ("leads attached", "alarm"): {"drain present", "Fermi level in gap"},
    ("drain present", "caution"): {"leads attached"},
    ("well conditioned", "alarm"): {"Fermi level in gap", "leak falls with length"},
    ("leakage", "alarm"): set(),
    ("reflection invertible", "caution"): {"leakage"},
    ("reflection invertible", "alarm"): {"leakage"},
    ("leak falls with length", "alarm"): {"leakage", "Fermi level in gap"},
    ("Fermi level in gap", "alarm"): {"leakage", "leak falls with length"},
}


def found(report: AuditReport, name: str) -> Finding:
    (finding,) = (finding for finding in report.findings if finding.check == name)
    return finding


@pytest.mark.parametrize("name", SOUND)
def test_audit_is_silent_on_a_sound_device(name: str) -> None:
    report = examine(SOUND[name](), quick=name in SLOW)
    # derived: long, gapped, open, closed cycle
    assert [(f.check, f.status, f.message) for f in report.findings if f.status != "pass"] == []
    assert name in SLOW or report.unseen == ()


def test_there_are_twenty_sound_devices() -> None:
    assert len(SOUND) >= 20


@pytest.mark.parametrize(("name", "status", "make"), BROKEN, ids=[f"{row[0]}-{row[1]}" for row in BROKEN])
def test_check_fires_on_a_device_that_breaks_just_its_rule(name: str, status: str, make: Make) -> None:
    report = examine(make(), quick=True)
    finding = found(report, name)
    # derived: the device's own mistake
    assert finding.status == status, finding
    assert finding.message
    assert finding.remedy
    allowed = {name} if status == "alarm" else set()
    assert {f.check for f in report.alarms} <= allowed | ENTAILED.get((name, status), set()), report.alarms


PROVEN: tuple[tuple[str, Make], ...] = (
    ("cycle covered", lambda: superlattice(fermi_level=0.3)),
    ("integer agrees with bulk", lambda: weak(1e-4, cells=8)),
)


@pytest.mark.parametrize(("name", "make"), PROVEN)
def test_check_of_the_proof_fires(name: str, make: Make) -> None:
    # derived: a level in a band; a contact weaker than the leak
    assert found(examine(make()), name).status == "alarm"


@pytest.mark.parametrize(
    ("name", "error", "status"),
    [
        ("engines agree", 1e-9, "pass"),
        ("engines agree", 1e-7, "caution"),
        ("engines agree", 1e-3, "alarm"),
        ("S unitary", 1e-10, "pass"),
        ("S unitary", 1e-7, "caution"),
        ("S unitary", 1e-3, "alarm"),
    ],
)
def test_check_of_the_arithmetic_fires_on_a_solver_that_loses_digits(name: str, error: float, status: str) -> None:
    evidence = Evidence(SOUND["dimer"](), quick=True)
    change = np.exp(1j * error) if name == "engines agree" else 1 + error / 2
    evidence.__dict__["scattering"] = evidence.scattering * change  # what a worse solver would have found
    # derived: a common phase keeps S unitary, a common factor does not
    assert found(run_checks(evidence), name).status == status


def test_every_status_of_every_check_is_shown() -> None:
    """Each check that knows a caution or an alarm is in the tables above with it."""
    shown = {(name, status) for name, status, _ in BROKEN} | {(name, "alarm") for name, _ in PROVEN}
    shown |= {(name, status) for name in ("engines agree", "S unitary") for status in ("caution", "alarm")}
    spoken = {(c.name, s) for c in CHECKS for s in ("caution", "alarm") if getattr(c, s)}
    assert spoken == shown


@pytest.mark.parametrize("check", CHECKS, ids=[check.name for check in CHECKS])
def test_catalogue_says_all_about_a_check(check: Check) -> None:
    # derived: the record's own fields
    assert check.asks.endswith("?")
    assert check.because.endswith(".")
    assert check.remedy.endswith(".")
    assert check.caution or check.alarm
    text = " ".join(check.explained().split())
    assert all(part in text for part in (check.name, check.asks, check.because, check.remedy))
    assert max(map(len, check.explained().splitlines())) <= 100


def test_findings_say_where() -> None:
    # derived: the places that were broken
    finite = found(examine(bench(edit=gone(12)), quick=True), "elements finite")
    assert (finite.where.site, finite.where.phase) == ((12.0, 0.0), 0.0)
    jump = found(examine(bench(edit=step(0.1)), quick=True), "cycle continuous")
    assert jump.where.phase is not None
    assert min(abs(jump.where.phase - edge) for edge in (2.0, 4.0)) < 1e-6
    assert jump.value == pytest.approx(0.1 / 1.5, rel=1e-6)
    lost = found(examine(bench(edit=island), quick=True), "sites reached")
    assert (lost.where.site, lost.value) == ((7.0, 5.0), 1)
    moved = found(examine(bench(drain=wire((1, 0), [(0, 0)], level=stagger)), quick=True), "leads still")
    assert moved.where.lead == 1


def test_length_that_is_needed_is_enough() -> None:
    """The decay check's advice, followed, brings the leak down."""
    finding = found(examine(rice_mele(loop(), cells=10), quick=True), "leak falls with length")
    more = int(finding.remedy.split("at least ")[1].split()[0])
    # derived: W. Kohn, Phys. Rev. 115, 809 (1959) (citation from memory): exponential decay in the gap
    assert 1 <= more <= 10
    assert found(examine(rice_mele(loop(), cells=10 + more), quick=True), "leakage").status == "pass"


def test_alarm_on_what_everything_rests_on_ends_the_audit() -> None:
    report = examine(bench(edit=gone(12)), quick=True)
    # derived: without H nothing can be looked at, and the report says so
    assert [finding.check for finding in report.findings] == ["elements finite"]
    assert set(report.unseen) == set(NAMED) - {"elements finite"}


def test_quick_findings_claim_no_proof() -> None:
    report = examine(SOUND["dimer"](), quick=True)
    # derived
    assert report.quick
    assert all(finding.basis != "proven" for finding in report.findings)
    assert set(report.unseen) == {"cycle covered", "integer agrees with bulk"}
    assert "sampled" in found(report, "leakage").message


def test_full_findings_are_proven() -> None:
    report = examine(SOUND["dimer"]())
    # derived
    proven = {finding.check for finding in report.findings if finding.basis == "proven"}
    assert {"leakage", "cycle covered", "integer agrees with bulk", "Fermi level in gap"} <= proven


def test_hopping_of_a_continuum() -> None:
    # CODATA: hbar^2 / (2 m_e) = 0.0380998 eV nm^2
    continuum = Continuum(step=1e-9, mass=electron_mass, energy=electron_volt)
    assert continuum.hopping == pytest.approx(0.0380998, rel=1e-5)


@pytest.mark.parametrize("angle", [0.1, 0.3, 1.0])
def test_error_of_a_coarse_lattice(angle: float) -> None:
    """The share (ka)^2/12 against the exact dispersions of lattice and parabola."""
    share = 1 - 2 * (1 - np.cos(angle)) / angle**2
    # series expansion of the cosine; the next term is (ka)^4/360
    assert share == pytest.approx(angle**2 / 12, abs=angle**4 / 360)
    pump = bench(value=lambda site, phi: 2.0 + 1e-9 * np.sin(phi), bond=-1.0, energy=2 * (1 - np.cos(angle)))
    pump = replace(pump, continuum=coarse_record())
    finding = found(examine(pump, quick=True), "continuum resolved")
    assert finding.value == pytest.approx(angle**2 / 12, rel=1e-6)


def coarse_record() -> Continuum:
    """A record whose hopping is 1."""
    record = Continuum(step=1e-9, mass=electron_mass, energy=electron_volt)
    return replace(record, energy=record.energy * record.hopping)


def test_trivial_loop_behind_a_weak_contact_is_no_alarm() -> None:
    """No level comes to the Fermi level, so nothing can drain it from behind."""
    pump = rice_mele(
        RICE_MELE_LOOPS["trivial side"][0], cells=10, energy=0.05, probe=Lead(2.0, contact=1e-4), drain=WIDE
    )
    # derived
    assert found(examine(pump, quick=True), "contact above leak").status == "pass"
