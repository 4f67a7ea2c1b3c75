"""How broad a level is where it crosses, and what is said of one that is broader than the cycle."""

from __future__ import annotations

from math import pi

import numpy as np
import pytest

from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Lead, Wave
from scatterpump.solver.direct import solve
from scatterpump.verdict import judge

STEP = 1e-4


def chain(contact: float) -> ModulatedChain:
    probe, drain = Lead(hopping=2.0, contact=contact), Lead(hopping=2.0)
    return ModulatedChain(sites=24, fermi_level=-1.2, onsite=[Wave(1.5, 3)], probe=probe, drain=drain)


@pytest.mark.parametrize(("contact", "resonance"), [(0.5, True), (1.0, True), (4.0, False)])
def test_level_broader_than_the_cycle_is_called_no_resonance(contact: float, resonance: bool) -> None:
    pump = chain(contact).pump()
    verdict = judge(pump)
    assert verdict.winding is not None and verdict.winding.number == 1
    (crossing,) = verdict.winding.crossings
    # definition: G. Breit and E. Wigner, Phys. Rev. 49, 519 (1936) (citation from memory): theta = 2 arctan(s/w) turns
    # by 2/w at its middle; r by kwant's own solver, to second order in the step
    r = solve(pump, crossing.phase + STEP * np.array([-1.0, 1.0]), transmission=False).reflection[:, 0, 0]
    assert crossing.width == pytest.approx(2 / (abs(np.angle(r[1] / r[0])) / (2 * STEP)), rel=1e-6)
    # derived: a level whose width reaches half a cycle to either side is at the Fermi level all the time
    assert crossing.is_resonance is resonance is (crossing.width < pi)
    text = " ".join(verdict.summary().split())
    assert ("half-width" in text, "no resonance: broader than the cycle" in text) == (resonance, not resonance)
    assert ("no resonance" in verdict.winding._repr_html_()) is not resonance
