"""Geometries as people bring them get a verdict, and it is the one that an independent route gives."""

from __future__ import annotations

from math import sqrt

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
from scatterpump.errors import InputError
from scatterpump.pump import Pump
from scatterpump.solver.direct import scattering_matrix
from scatterpump.solver.reflect import reflect
from scatterpump.verdict import judge
from scatterpump.winding.certificate import certify


def test_metallic_ring_with_a_flux_is_never_called_quantised() -> None:
    """Y. Gefen, Y. Imry, M. Ya. Azbel, Phys. Rev. Lett. 52, 129 (1984) (from memory): a ring transmits, up to fully."""
    pump = metallic_ring()
    verdict = judge(pump)
    passed = [abs(scattering_matrix(pump, phi)[1, 0]) ** 2 for phi in np.linspace(0, 2 * np.pi, 25)]
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
