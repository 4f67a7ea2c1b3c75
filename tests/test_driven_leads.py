"""A lead may take a parameter of the cycle as long as its matrix elements stay the same."""

from __future__ import annotations

from collections.abc import Callable
from math import inf, nan
from typing import Any

import kwant
import numpy as np
import pytest
from geometries import GAP, PHI, sliding_chain, wire
from numpy.testing import assert_allclose

from scatterpump.audit.examine import examine
from scatterpump.audit.finding import Finding
from scatterpump.cycle import Cycle
from scatterpump.errors import InputError, SolverError
from scatterpump.pump import Pump
from scatterpump.solver.leads import driven_leads
from scatterpump.solver.modes import with_modes
from scatterpump.solver.reflect import reflect
from scatterpump.verdict import judge

Level = Callable[..., Any]
STILL: dict[str, Level] = {
    "takes no notice": lambda site, phi: 0.2,
    "cancels up to rounding": lambda site, phi: 0.2 * (np.cos(phi) ** 2 + np.sin(phi) ** 2),
}
MOVING: dict[str, Level] = {
    "a wave": lambda site, phi: 0.2 + 0.1 * np.cos(phi),
    "a wave of a billionth": lambda site, phi: 0.2 + 1e-9 * np.cos(phi),
    "a high harmonic": lambda site, phi: 0.2 + 0.1 * np.sin(16 * phi),
    "a pulse a twentieth of the cycle long": lambda site, phi: 0.2 + 0.1 * (2.0 < phi < 2.32),
}


def chain(level: Any, *, hopping: Any = -2.0, cycle: Cycle = PHI, sites: int = 36) -> Pump:
    """Return the chain with a probe of that level and hopping, and a drain of level 0.2."""
    lattice, system = sliding_chain(sites)
    for direction, own, hop in ((-1, level, hopping), (1, 0.2, -2.0)):
        lead = wire(lattice, (direction, 0), (0, 0))
        lead[lattice(0, 0)] = own
        lead[lattice(0, 0), lattice(direction, 0)] = hop
        system.attach_lead(lead)
    return Pump(system, cycle, GAP)


def finding(pump: Pump) -> Finding:
    (found,) = (f for f in examine(pump, quick=True).findings if f.check == "leads still")
    return found


@pytest.mark.parametrize("level", STILL.values(), ids=STILL)
def test_lead_that_stays_the_same_is_accepted(level: Level) -> None:
    pump = chain(level)
    verdict = judge(pump)
    # D. J. Thouless et al., Phys. Rev. Lett. 49, 405 (1982): t = +1
    assert (verdict.winding.number, verdict.trustworthy) == (1, True)
    phases = [0.3, 2.0, 4.0]
    assert_allclose(reflect(pump, phases).reflection, reflect(chain(0.2), phases).reflection, rtol=0, atol=1e-11)


def test_audit_says_that_it_was_sampled() -> None:
    found = finding(chain(STILL["takes no notice"]))
    assert (found.status, found.basis) == ("pass", "sampled")
    assert found.message == "Lead 0 takes phi, but its elements are the same at all 33 phases sampled."
    assert finding(chain(0.2)).basis == "exact"


@pytest.mark.parametrize("level", MOVING.values(), ids=MOVING)
def test_lead_that_changes_is_refused(level: Level) -> None:
    pump = chain(level, sites=6)
    with pytest.raises(InputError, match="lead 0 depends on phi, which the cycle sets: its elements change by up to"):
        with_modes(pump)
    found = finding(pump)
    assert (found.status, found.where.lead) == ("alarm", 0)
    assert found.message.endswith("so its modes change along the cycle and det r is not comparable.")


def test_hop_counts_as_well_as_the_level() -> None:
    pump = chain(0.2, hopping=lambda one, other, phi: -2.0 * np.exp(0.1j * np.sin(phi)), sites=6)
    (lead,) = driven_leads(pump)
    # derived: |e^{ia} - 1| = 2 sin(a/2), at most at a = 0.1
    assert lead.change == pytest.approx(4 * np.sin(0.05), rel=1e-2)
    assert not lead.is_still


def test_spike_at_a_corner_of_a_recorded_cycle_is_met() -> None:
    """Of 100 recorded points one differs, between all phases that are spread over the cycle."""
    spike = [0.0] * 101
    spike[57] = 0.1
    cycle = Cycle.through({"phi": np.sin(np.linspace(0, 2 * np.pi, 101)).tolist(), "gate": spike})
    (lead,) = driven_leads(chain(lambda site, gate: gate, cycle=cycle, sites=6))
    assert lead.change == pytest.approx(0.1)
    assert lead.phase == pytest.approx(2 * np.pi * 0.57)


def test_lead_given_by_its_modes_alone_is_refused() -> None:
    """It has no elements to look at, and may do anything with the parameter."""
    lattice, system = sliding_chain(6)
    own = wire(lattice, (-1, 0), (0, 0)).finalized()

    def modes(energy: float, args: Any = (), *, params: Any = None) -> Any:
        return own.modes(energy)

    system.leads.append(kwant.builder.ModesLead(modes, [lattice(-1, 0)], ["phi"]))
    system.attach_lead(wire(lattice, (1, 0), (0, 0)))
    pump = Pump(system, PHI, GAP)
    assert driven_leads(pump)[0].change == inf
    with pytest.raises(InputError, match="is given by its modes alone"):
        with_modes(pump)
    assert finding(pump).status == "alarm"


@pytest.mark.parametrize(
    ("level", "words"),
    [
        (lambda site, phi: 0.2 if phi < 3 else nan, "not finite"),
        (lambda site, phi: 0.2 if phi < 3 else {}["gate"], "gate"),
    ],
    ids=["nan", "raises"],
)
def test_lead_that_fails_at_some_phase_says_where(level: Level, words: str) -> None:
    with pytest.raises(SolverError, match=words) as caught:
        judge(chain(level, sites=6))
    assert caught.value.phase >= 3
    assert str(caught.value).startswith("lead 0 failed at phi = ")
    found = finding(chain(level, sites=6))
    assert (found.status, found.remedy) == ("alarm", "Mend the value functions of that lead.")


def test_leads_are_looked_at_once_for_all_fermi_levels() -> None:
    pump = chain(STILL["takes no notice"], sites=6)
    assert driven_leads(pump.at_fermi_level(-1.0)) == driven_leads(pump)
    here = driven_leads(pump)
    assert driven_leads(pump.at_fermi_level(-0.9)) is here
