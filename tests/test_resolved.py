"""Several orbitals and spin: matrices on a chain's sites, and windings resolved by what is conserved."""

from __future__ import annotations

from math import pi
from typing import Any

import kwant
import numpy as np
import pytest
from berry import carried
from devices import WIDE, loop, rice_mele

from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Wave
from scatterpump.cycle import Cycle
from scatterpump.errors import ClosedProbeError, InputError
from scatterpump.pump import Pump
from scatterpump.solver.reflect import reflect
from scatterpump.verdict import judge
from scatterpump.winding.certificate import certify
from scatterpump.winding.resolved import resolve

ELLIPSE = loop()


def two_chains(
    sense: int, *, between: float = 0.1, conserved: str | None = None, energy: float = 0.05
) -> ModulatedChain:
    """Return two dimerised chains side by side, the second with `sense` times the stagger of the first."""
    return ModulatedChain(
        sites=40,
        orbitals=2,
        fermi_level=energy,
        cycle=ELLIPSE,
        onsite=[Wave("stagger", 2, harmonic=0, matrix=((1, 0), (0, sense)))],
        bonds=[Wave("delta", 2, lag=-pi / 2, harmonic=0)],
        onsite_matrix=((0, between), (between, 0)),
        conserved=conserved,
        probe=WIDE,
        drain=WIDE,
    )


@pytest.mark.parametrize(("sense", "number"), [(1, 2), (-1, 0)])
def test_two_coupled_chains_add_up(sense: int, number: int) -> None:
    """Windings of uncoupled chains add up, and a coupling smaller than the gap changes nothing (common practice)."""
    pump = two_chains(sense).pump()
    assert reflect(pump, [0.3]).reflection.shape == (1, 2, 2)
    assert certify(pump).number == number


def test_opposite_spins_carry_spin_and_no_charge() -> None:
    found = resolve(two_chains(-1, between=0.0, conserved="sigma_z").pump())
    # M. J. Rice, E. J. Mele, Phys. Rev. Lett. 49, 1455 (1982) (from memory): +1 counter-clockwise, -1 clockwise
    assert [(part.eigenvalue, part.number) for part in found.sectors] == [(-1.0, -1), (1.0, 1)]
    assert (found.charge, found.carried) == (0, 2.0)


def test_sector_is_the_pump_that_it_was_put_together_from() -> None:
    """The upper spin alone is the dimerised chain itself: same crossings of the same level (derived)."""
    found = resolve(two_chains(1, between=0.0, conserved="sigma_z").pump())
    alone = certify(rice_mele(ELLIPSE, cells=20, energy=0.05))
    for part in found.sectors:
        assert part.winding.number == alone.number == 1
        (one,), (other,) = part.winding.crossings, alone.crossings
        assert one.phase == pytest.approx(other.phase, abs=1e-9)


def test_quantity_need_not_be_diagonal() -> None:
    """With equal chains tied together, even and odd combinations are conserved (derived)."""
    found = resolve(two_chains(1, between=0.1).pump(), law=np.array([[0, 1], [1, 0]]))
    assert [(part.eigenvalue, part.number) for part in found.sectors] == [(-1.0, 1), (1.0, 1)]
    assert (found.charge, found.carried) == (2, 0.0)


def test_charge_of_all_sectors_is_the_winding_of_the_whole() -> None:
    pump = two_chains(1, between=0.0, conserved="sigma_z").pump()
    assert resolve(pump).charge == certify(pump).number


def test_spin_without_an_open_mode_carries_nothing() -> None:
    """The leads of the lower spin end at 9 - 4 = 5, far above the Fermi level (derived)."""
    lattice, system = kwant.lattice.chain(norbs=2), kwant.Builder()
    system[(lattice(x) for x in range(18))] = lambda site, phi: (
        1.5 * np.cos(2 * pi * site.tag[0] / 3 - phi) * np.diag([1, 0]) + 9 * np.diag([0, 1])
    )
    system[lattice.neighbors()] = -np.eye(2)
    lead = kwant.Builder(kwant.TranslationalSymmetry((-1,)), conservation_law=np.diag([1, -1]))
    lead[lattice(0)], lead[lattice.neighbors()] = np.diag([0, 9]), -2 * np.eye(2)
    system.attach_lead(lead)
    system.attach_lead(lead.reversed())
    found = resolve(Pump(system, Cycle.angle(), -1.2))
    assert [(part.number, part.winding is None) for part in found.sectors] == [(0, True), (1, False)]
    assert (found.charge, found.carried) == (1, 1.0)


@pytest.mark.parametrize(
    ("make", "match"),
    [
        (lambda: two_chains(1, between=0.1, conserved="sigma_z"), "does not conserve"),
        (lambda: two_chains(1), "no conservation law"),
    ],
)
def test_what_is_not_conserved_is_refused(make: Any, match: str) -> None:
    with pytest.raises(InputError, match=match):
        resolve(make().pump())


def test_law_that_fits_no_orbital_is_refused() -> None:
    with pytest.raises(InputError, match="does not fit"):
        resolve(two_chains(1).pump(), law=np.eye(3))


def test_closed_probe_is_said_so() -> None:
    with pytest.raises(ClosedProbeError):
        resolve(two_chains(-1, between=0.0, conserved="sigma_z", energy=9.0).pump())


def test_pair_of_sites_as_two_orbitals_is_the_same_chain() -> None:
    """A dimerised chain with both sites of a pair as orbitals of one site, and a bond matrix that is not Hermitian."""
    pair = ModulatedChain(
        sites=20,
        hopping=0.0,
        orbitals=2,
        fermi_level=0.1,
        cycle=Cycle.ellipse(x=("delta", 0.0, 0.5), y=("stagger", 0.0, 0.5)),
        onsite_matrix=((0, -1), (-1, 0)),
        bond_matrix=((0, 0), (1, 0)),
        onsite=[
            Wave("stagger", 1, harmonic=0, matrix="sigma_z"),
            Wave("delta", 1, lag=pi, harmonic=0, matrix="sigma_x"),
        ],
        bonds=[Wave("delta", 1, lag=0.0, harmonic=0, matrix=((0, 0), (1, 0)))],  # cos(2 pi (x + 1/2)) = -1
        probe=WIDE,
        drain=WIDE,
    )

    def bloch(k: float, phi: float) -> Any:
        delta, stagger = 0.5 * np.cos(phi), 0.5 * np.sin(phi)
        off = -(1 + delta) - (1 - delta) * np.exp(-1j * k)
        return np.array([[stagger, off], [np.conj(off), -stagger]])

    verdict = judge(pair.pump())
    # M. J. Rice, E. J. Mele, as above; closed form of the gap, 2 sqrt(D^2 + (t1 - t2)^2) at its smallest (derived)
    assert verdict.winding.number == verdict.chern == round(carried(bloch, 1)) == 1
    assert verdict.gap.lower <= 1.0 <= verdict.gap.upper + 1e-9


@pytest.mark.parametrize(
    ("changes", "match"),
    [
        ({"orbitals": 0}, "orbitals is 0"),
        ({"onsite_matrix": "sigma"}, "onsite_matrix is 'sigma'"),
        ({"onsite_matrix": ((0, 1), (0, 0))}, "onsite_matrix is not Hermitian"),
        ({"bond_matrix": ((1, 0),)}, "matrix is 1 by 2"),
        ({"bond_matrix": ((1, 0), (0, "x"))}, "no number"),
        ({"conserved": ((0, 1j), (1j, 0))}, "conserved is not Hermitian"),
        ({"onsite": [Wave(1.0, 3, matrix=((0, 1), (0, 0)))]}, "matrix is not Hermitian"),
        ({"onsite_matrix": ((float("nan"), 0), (0, 0))}, "not finite"),
        ({"onsite_matrix": 3}, "a matrix is 3"),
    ],
)
def test_matrices_that_cannot_be_are_refused(changes: dict[str, Any], match: str) -> None:
    with pytest.raises(InputError, match=match):
        ModulatedChain(**{"sites": 6, "orbitals": 2, **changes})


def test_matrix_on_one_orbital_is_a_number() -> None:
    one = ModulatedChain(sites=3, onsite=[Wave(1.0, 3, matrix=((2,),))], onsite_matrix=((0.5,),))
    other = ModulatedChain(sites=3, level=0.5, onsite=[Wave(2.0, 3)])
    first, second = (chain.pump().finalized.hamiltonian_submatrix(params={"phi": 0.7}) for chain in (one, other))
    # derived
    np.testing.assert_allclose(first, second, atol=1e-15)


def test_verdict_tells_what_each_spin_carries() -> None:
    verdict = judge(two_chains(-1, between=0.0, conserved="sigma_z").pump())
    assert verdict.resolved.carried == 2.0
    assert "-1 at eigenvalue -1, +1 at eigenvalue 1; +2 of it carried in a cycle" in " ".join(verdict.summary().split())


def test_verdict_tells_why_spins_are_not_resolved() -> None:
    verdict = judge(two_chains(1, between=0.1, conserved="sigma_z").pump())
    assert (verdict.trustworthy, verdict.resolved.carried, verdict.winding.number) == (True, None, 2)
    assert "not resolved: the device does not conserve" in " ".join(verdict.summary().split())
