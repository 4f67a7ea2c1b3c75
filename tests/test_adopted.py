"""Geometries as people bring them get a verdict, and it is the one that an independent route gives."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from math import sqrt
from types import SimpleNamespace
from typing import Any

import kwant
import numpy as np
import pytest
from berry import bloch_of, carried
from geometries import (
    GAP,
    honeycomb_cell,
    honeycomb_ribbon,
    metallic_ring,
    ribbon_with_side_probe,
    side_attached,
    three_leads,
    two_orbital_bloch,
    two_orbitals,
    with_island,
    with_moving_lead,
)

from scatterpump.audit.examine import examine
from scatterpump.bulk.gap import bulk_gap
from scatterpump.cycle import Cycle
from scatterpump.errors import CycleError, InputError, SolverError
from scatterpump.pump import Pump
from scatterpump.solver.direct import scattering_matrices
from scatterpump.solver.reflect import reflect
from scatterpump.verdict import judge
from scatterpump.winding.certificate import certify


def test_metallic_ring_with_a_flux_is_never_called_quantised() -> None:
    """Y. Gefen, Y. Imry, M. Ya. Azbel, Phys. Rev. Lett. 52, 129 (1984) (from memory): a ring transmits, up to fully."""
    pump = metallic_ring()
    verdict = judge(pump)
    passed = [abs(scattering_matrices(pump, np.array([phi]))[0][1, 0]) ** 2 for phi in np.linspace(0, 2 * np.pi, 25)]
    assert max(passed) > 0.9  # no pump at all
    assert not verdict.trustworthy
    assert {"leakage", "reflection invertible"} <= {alarm.check for alarm in verdict.audit.alarms}
    assert verdict.gap is None
    assert "no cell that changes repeats" in verdict.summary().replace("\n" + 18 * " ", " ")


@pytest.mark.parametrize("filled", [1, 2])
def test_honeycomb_ribbon_carries_what_its_bands_do(filled: int) -> None:
    bloch = bloch_of(honeycomb_cell())
    verdict = judge(honeycomb_ribbon(energy={1: -5.1, 2: -3.8}[filled]))
    assert verdict.trustworthy
    # independent route: the motion of the bands' centre, on the cell as kwant repeats it
    assert verdict.winding.number == verdict.chern == round(carried(bloch, filled))
    assert verdict.gap.filled == filled
    assert verdict.interior.startswith("a cell of 12 orbitals")


@pytest.mark.parametrize(("mass", "twist"), [(1.0, 1), (-1.0, 1), (3.0, 1), (1.0, -1)])
def test_two_orbital_insulator_winds_as_its_chern_number(mass: float, twist: int) -> None:
    """X.-L. Qi, Y.-S. Wu, S.-C. Zhang, Phys. Rev. B 74, 085308 (2006), from memory: +-1 for 0 < |m| < 2, else 0."""
    pump = two_orbitals(mass=mass, twist=twist)
    verdict = judge(pump)
    assert reflect(pump, [0.3]).reflection.shape == (1, 2, 2)
    assert verdict.trustworthy
    assert abs(verdict.winding.number) == (abs(mass) < 2)
    # the sign by an independent route
    assert verdict.winding.number == round(carried(lambda k, phi: two_orbital_bloch(k, twist * phi, mass), 1))


@pytest.mark.parametrize(("level", "root"), [(3.0, -1), (-2.0, 1)])
def test_chain_with_side_attached_sites_is_the_chain_at_another_energy(level: float, root: int) -> None:
    """Eliminating the dangling sites leaves the chain at E - u^2 / (E - level) (derived), whose integer is known."""
    coupling = 0.4
    middle, product = (level + GAP) / 2, level * GAP - coupling**2
    energy = middle + root * sqrt(middle**2 - product)
    assert energy - coupling**2 / (energy - level) == pytest.approx(GAP)
    assert certify(side_attached(coupling=coupling, level=level, energy=energy)).number == 1


def test_charge_that_one_of_three_leads_gives_the_others_take() -> None:
    """The numbers of all leads add up to nothing, whichever is asked (derived: det S comes back after a cycle)."""
    numbers = [certify(three_leads(probe=lead, drain=1 if lead != 1 else 0)).number for lead in range(3)]
    # D. J. Thouless et al., Phys. Rev. Lett. 49, 405 (1982): t = +1 from left to right
    assert numbers == [1, -1, 0]


def test_verdict_names_the_leads() -> None:
    verdict = judge(three_leads())
    assert verdict.trustworthy
    assert "+1 from left to right and top" in verdict.summary()


@pytest.mark.parametrize("lead", range(3))
def test_probe_in_the_middle_of_an_edge(lead: int) -> None:
    """Both transverse modes of the ribbon sit in the wave's first gap, so an end pumps two; the side takes nothing."""
    pump = ribbon_with_side_probe(probe=lead, drain=1 if lead == 0 else 0)
    # derived: transverse energies +-0.2 leave GAP in the window (-1.75, -0.671) of both modes; currents add up to 0
    assert certify(pump).number == (2, -2, 0)[lead]


def test_interior_seen_from_a_side_probe_carries_nothing() -> None:
    """From the middle, the repeating cell is a piece to the left and one to the right, of opposite charges."""
    verdict = judge(ribbon_with_side_probe())
    assert verdict.chern == verdict.winding.number == 0
    assert verdict.interior.startswith("a cell of 12 orbitals")


def test_lead_that_depends_on_the_cycle_is_refused() -> None:
    pump = with_moving_lead()
    with pytest.raises(InputError, match="lead 0 depends on phi"):
        judge(pump)
    assert [alarm.check for alarm in examine(pump).alarms] == ["leads still"]


def test_device_that_takes_nothing_from_its_cycle_is_told_so() -> None:
    lattice, system = kwant.lattice.chain(norbs=1), kwant.Builder()
    system[(lattice(x) for x in range(12))] = 0.0
    system[lattice.neighbors()] = -1.0
    for direction in (-1, 1):
        lead = kwant.Builder(kwant.TranslationalSymmetry((direction,)))
        lead[lattice(0)], lead[lattice.neighbors()] = 0.0, -1.0
        system.attach_lead(lead)
    verdict = judge(Pump(system, Cycle.angle(), 0.5))
    assert not verdict.trustworthy
    assert "cycle drives the device" in {caution.check for caution in verdict.audit.cautions}


@pytest.mark.parametrize(
    ("level", "reason"),
    [
        (lambda site, phi, depth=1.5: depth * np.cos(phi), "must not have default values"),
        (lambda site, *parameters: 0.0, "must not take"),
        (lambda site, *, phi: np.cos(phi), "Keyword-only"),
    ],
    ids=["default", "starred", "keyword only"],
)
@pytest.mark.parametrize("place", ["the system", "lead 0"])
def test_value_function_whose_parameters_have_no_names_is_refused(level: Any, reason: str, place: str) -> None:
    lattice, system = kwant.lattice.chain(norbs=1), kwant.Builder()
    system[(lattice(x) for x in range(3))] = level if place == "the system" else 0.0
    system[lattice.neighbors()] = -1.0
    lead = kwant.Builder(kwant.TranslationalSymmetry((-1,)))
    lead[lattice(0)], lead[lattice.neighbors()] = level if place == "lead 0" else 0.0, -1.0
    system.attach_lead(lead)
    with pytest.raises(InputError, match=rf"line \d+\), a value function of {place}, cannot be used: .*{reason}"):
        Pump(system, Cycle.angle(), 0.5, drain=None)


@pytest.mark.parametrize("level", [0.0, GAP])
def test_island_that_nothing_connects_changes_nothing(level: float) -> None:
    """Its levels may even pass the Fermi level: no electron gets there (derived)."""
    # D. J. Thouless et al., Phys. Rev. Lett. 49, 405 (1982): t = +1 of the chain alone
    assert certify(with_island(level)).number == 1


def test_finalized_system_and_builder_are_the_same_pump() -> None:
    pump = three_leads()
    again = Pump(pump.finalized, pump.cycle, pump.fermi_level)
    phases = np.linspace(0, 6, 7)
    assert np.array_equal(reflect(pump, phases).reflection, reflect(again, phases).reflection)


def test_lead_given_by_its_modes_is_adopted() -> None:
    """kwant's own ModesLead in place of the lead it was computed from: the same physics (derived)."""
    pump = three_leads()
    lead = pump.finalized.leads[1]
    system = pump.system
    system.leads[1] = kwant.builder.ModesLead(
        lambda energy, args=(), params=None: lead.modes(energy, params=params), system.leads[1].interface, ()
    )
    assert certify(Pump(system, pump.cycle, pump.fermi_level)).number == 1


# --- what cannot be adopted ---


def without_leads() -> kwant.Builder:
    system = kwant.Builder()
    system[kwant.lattice.chain(norbs=1)(0)] = 0
    return system


def with_a_self_energy() -> kwant.Builder:
    pump = three_leads()
    pump.system.leads[2] = kwant.builder.SelfEnergyLead(
        lambda energy, args=(), params=None: np.array([[-1j]]), pump.system.leads[2].interface, ()
    )
    return pump.system


def without_an_interface() -> kwant.Builder:
    system = three_leads().system
    del system[system.leads[2].interface[0]]
    return system


BAD_SYSTEMS = {
    "nothing": (lambda: None, "no kwant system"),
    "a number": (lambda: 3, "of type int, which is no kwant system"),
    "a matrix": (lambda: np.eye(3), "no kwant system"),
    "no leads": (without_leads, "no leads"),
    "endless": (lambda: kwant.Builder(kwant.TranslationalSymmetry((-1,))), "repeats without end"),
    "endless, finalized": (lambda: three_leads().finalized.leads[0], "repeats without end"),
    "a lead without modes": (with_a_self_energy, "lead 2 is given by its self-energy alone"),
    "a lead attached to nothing": (without_an_interface, "kwant cannot finalize the system"),
    "a system without sites": (lambda: SimpleNamespace(leads=()), "site by site"),
}


@pytest.mark.parametrize(("make", "match"), BAD_SYSTEMS.values(), ids=BAD_SYSTEMS)
def test_system_that_cannot_be_adopted_is_refused(make: Callable[[], Any], match: str) -> None:
    with pytest.raises(InputError, match=match):
        Pump(make(), Cycle.angle(), 0.0)


@pytest.mark.parametrize(
    ("changes", "match"),
    [
        ({"probe": 3}, "probe is lead 3"),
        ({"probe": "left"}, "probe is lead left"),
        ({"drain": -1}, "drain is lead -1"),
        ({"probe": True}, "probe is lead True"),
        ({"drain": 0}, "both lead 0"),
        ({"drain": None}, "no drain, but the system has 3 leads"),
        ({"fermi_level": float("inf")}, "fermi_level is inf"),
        ({"fermi_level": "low"}, "fermi_level is 'low'"),
        ({"cycle": lambda phi: {"phi": phi}}, "the cycle is"),
        ({"lead_names": ("left", "right")}, "a different name for each of 3 leads"),
        ({"lead_names": ("left", "left", "top")}, "a different name for each of 3 leads"),
    ],
)
def test_parts_that_do_not_fit_are_refused(changes: dict[str, Any], match: str) -> None:
    pump = three_leads()
    usual: dict[str, Any] = {"cycle": pump.cycle, "fermi_level": GAP}
    with pytest.raises(InputError, match=match):
        Pump(pump.system, **{**usual, **changes})


def test_bulk_that_does_not_repeat_is_refused() -> None:
    pump = replace(three_leads(), bulk=without_leads())
    with pytest.raises(InputError, match="does not repeat"):
        bulk_gap(pump)


def test_parameter_that_nothing_sets_is_named() -> None:
    pump = three_leads().on(Cycle.angle("theta"))
    with pytest.raises(InputError, match=r"nothing sets the parameter\(s\) phi"):
        certify(pump)


def test_failure_of_a_value_function_tells_phi_and_cause() -> None:
    def onsite(site: Any, phi: Any) -> Any:
        return 1 / 0 if np.any(np.asarray(phi) > 2) else 0.0

    pump = three_leads()
    pump.system[next(iter(pump.system.sites()))] = onsite
    with pytest.raises(SolverError, match=r"phi = .*ZeroDivisionError: division by zero \(in onsite, line") as caught:
        certify(Pump(pump.system, pump.cycle, GAP))
    assert caught.value.phase > 2
    assert caught.value.parameters == {"phi": caught.value.phase}


@pytest.mark.parametrize("function", [lambda phi: {"phi": 1 / 0}, lambda phi: 3, lambda phi: {3: phi}])
def test_failure_of_a_cycle_tells_phi_and_cause(function: Callable[[float], Any]) -> None:
    with pytest.raises(CycleError, match="the cycle's function failed at phi = 0"):
        certify(three_leads().on(Cycle(function)))
