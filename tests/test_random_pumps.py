"""The proof against a count that shares nothing with it.

Random pumps, dense matrices, steps small enough by a textbook bound.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import kwant
import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from scatterpump.cycle import Cycle
from scatterpump.errors import SingularReflectionError
from scatterpump.pump import Pump
from scatterpump.winding.certificate import certify
from scatterpump.winding.result import Winding

Complex = NDArray[np.complex128]
TURN = 2 * np.pi
MOST_STEPS = 15_000


@dataclass(frozen=True)
class RandomPump:
    """A chain of `sites` sites with m orbitals each.

    H(phi) = H_0 + e^{i phi} H_1 + h.c., between two wires of m channels.
    """

    seed: int
    channels: int
    sites: int
    contact: float
    far_contact: float
    degree: int

    def blocks(self) -> tuple[Complex, Complex]:
        """On-site and hopping blocks of every harmonic 0 ... degree, shape (degree+1, sites, m, m)."""
        rng = np.random.default_rng(self.seed)
        shape = (2, self.degree + 1, self.sites, self.channels, self.channels)
        raw = rng.standard_normal(shape) + 1j * rng.standard_normal(shape)
        onsite, hopping = raw / np.sqrt(2 * self.channels)
        onsite[0] = (onsite[0] + onsite[0].conj().swapaxes(1, 2)) / 2
        return onsite * np.array([1.0, *([0.6] * self.degree)])[:, None, None, None], hopping

    def pump(self, *, cycle: Cycle | None = None, shift: float = 0.0, rotation: Complex | None = None) -> Pump:
        """Build it in kwant; `shift` moves the energy zero, `rotation` a constant unitary on the probe wire."""
        onsite, hopping = self.blocks()
        lattice, system, one = kwant.lattice.chain(norbs=self.channels), kwant.Builder(), np.eye(self.channels)

        def level(site: Any, phi: float) -> Complex:
            waves = sum(np.exp(1j * k * phi) * onsite[k, site.tag[0]] for k in range(1, self.degree + 1))
            return onsite[0, site.tag[0]] + waves + np.conj(waves).T + shift * one

        def bond(right: Any, left: Any, phi: float) -> Complex:
            return sum(np.exp(1j * k * phi) * hopping[k, left.tag[0]] for k in range(self.degree + 1))

        system[(lattice(x) for x in range(self.sites))] = level
        system[((lattice(x + 1), lattice(x)) for x in range(self.sites - 1))] = bond
        for end, inside, direction, contact in (
            (-1, 0, -1, self.contact),
            (self.sites, self.sites - 1, 1, self.far_contact),
        ):
            turned = rotation if rotation is not None and end < 0 else one
            system[lattice(end)] = shift * one
            system[lattice(inside), lattice(end)] = contact * turned
            lead = kwant.Builder(kwant.TranslationalSymmetry((direction,)))
            lead[lattice(0)], lead[lattice(0), lattice(1)] = shift * one, -1.5 * one
            system.attach_lead(lead)
        return Pump(system, cycle or Cycle.angle(), shift)

    def brute_force(self) -> int | None:
        """Walk round the cycle in steps that cannot miss a turn; None if that takes too many or r is singular.

        From one point r^-1 r(phi + s) stays within 1 of the identity while s < 1/(l (|G| + |r^-1| w^2)), l = sup
        |H'| (von Neumann's series, any textbook of linear algebra), so half of that keeps every eigenphase below a
        quarter turn.
        """
        onsite, hopping = self.blocks()
        size, m = self.sites * self.channels, self.channels
        harmonics = [_assembled(onsite[k], hopping[k], self.degree and k == 0) for k in range(self.degree + 1)]
        speed = sum(2 * k * np.linalg.norm(h, ord=2) for k, h in enumerate(harmonics))
        out = 1j / 1.5  # surface Green function of the wire at its middle is -i / hopping
        still = np.zeros((size, size), dtype=complex)
        still[:m, :m] += self.contact**2 * out * np.eye(m)
        still[size - m :, size - m :] += self.far_contact**2 * out * np.eye(m)
        width = self.contact * np.sqrt(2 / 1.5) * np.eye(size, m)
        phase, turned, first, before = 0.0, 0.0, None, None
        for _ in range(MOST_STEPS):
            waves = sum(np.exp(1j * k * phase) * h for k, h in enumerate(harmonics) if k)
            green = np.linalg.inv(still - harmonics[0] - waves - np.conj(waves).T)
            here = 1j * width.T @ green @ width - np.eye(m)
            first = here if first is None else first
            turned += 0.0 if before is None else _turn(before, here)
            smallest = np.linalg.svd(here, compute_uv=False)[-1]
            if smallest < 1e-6:
                return None
            before = here
            phase += 0.5 / (speed * (np.linalg.norm(green, ord=2) + width[0, 0] ** 2 / smallest) + 1e-300)
            if phase >= TURN:
                return round((turned + _turn(here, first)) / TURN)
        return None


def _assembled(onsite: Complex, hopping: Complex, constant: bool) -> Complex:
    """One harmonic as a matrix.

    Hoppings carry their Hermitian partners only in the constant one (the caller adds them else).
    """
    sites, m, _ = onsite.shape
    matrix = np.zeros((sites * m, sites * m), dtype=complex)
    for x in range(sites):
        here = slice(x * m, (x + 1) * m)
        matrix[here, here] = onsite[x]
        if x + 1 < sites:
            there = slice((x + 1) * m, (x + 2) * m)
            matrix[there, here] = hopping[x]
            if constant:
                matrix[here, there] = hopping[x].conj().T
    return matrix


def _turn(before: Complex, after: Complex) -> float:
    return float(np.angle(np.linalg.eigvals(np.linalg.solve(before, after))).sum())


def proven(pump: Pump) -> Winding | None:
    """The certificate, or None where r is singular."""
    try:
        return certify(pump, budget=300)
    except SingularReflectionError:
        return None


PUMPS = st.builds(
    RandomPump,
    seed=st.integers(0, 10**6),
    channels=st.integers(1, 3),
    sites=st.integers(2, 12),
    contact=st.sampled_from([1.2, 0.6, 0.3, 0.15]),
    far_contact=st.sampled_from([1.2, 0.5, 0.05]),
    degree=st.integers(1, 2),
)
CHECKED = settings(derandomize=True, deadline=None, max_examples=16)
FEWER = settings(derandomize=True, deadline=None, max_examples=4)


@CHECKED
@given(pump=PUMPS)
def test_certified_number_is_the_brute_force_count(pump: RandomPump) -> None:
    winding, count = proven(pump.pump()), pump.brute_force()
    # von Neumann's series bounds every step of the count
    if winding is not None and winding.certified and count is not None:
        assert winding.number == count
        assert sum(crossing.direction for crossing in winding.crossings) == count


def test_most_random_pumps_get_an_answer() -> None:
    """The property above would hold for a proof that always refuses."""
    pumps = [RandomPump(seed, 1 + seed % 3, 2 + seed % 11, 0.6, 0.5, 1 + seed % 2) for seed in range(8)]
    windings = [proven(pump.pump()) for pump in pumps]
    numbers = [winding.number for winding in windings if winding is not None and winding.certified]
    assert len(numbers) >= 7
    assert any(numbers)  # and not all of them are 0


@FEWER
@given(pump=PUMPS, start=st.floats(0.1, 6.0))
def test_number_does_not_depend_on_where_the_cycle_starts(pump: RandomPump, start: float) -> None:
    # derived: a closed path has no beginning
    _agree(proven(pump.pump()), proven(pump.pump(cycle=Cycle.angle().started_at(start))), 1)


@FEWER
@given(pump=PUMPS)
def test_backwards_turns_the_sign(pump: RandomPump) -> None:
    # derived: the winding of a path run backwards
    _agree(proven(pump.pump()), proven(pump.pump(cycle=Cycle.angle().reversed())), -1)


@FEWER
@given(pump=PUMPS, times=st.integers(2, 3))
def test_repetition_multiplies(pump: RandomPump, times: int) -> None:
    # derived: windings of joined paths add
    _agree(proven(pump.pump()), proven(pump.pump(cycle=Cycle.angle().repeated(times))), times)


@FEWER
@given(pump=PUMPS, shift=st.floats(-3.0, 3.0))
def test_energy_zero_does_not_matter(pump: RandomPump, shift: float) -> None:
    # derived: only E - H enters
    _agree(proven(pump.pump()), proven(pump.pump(shift=shift)), 1)


@FEWER
@given(pump=PUMPS)
def test_basis_of_the_modes_does_not_matter(pump: RandomPump) -> None:
    rotation = np.linalg.qr(
        np.random.default_rng(pump.seed).standard_normal((2, pump.channels, pump.channels)).T @ np.array([1, 1j])
    )[0]
    # derived: det(u r v) winds as det r for constant unitary u, v
    _agree(proven(pump.pump()), proven(pump.pump(rotation=rotation.reshape(pump.channels, pump.channels))), 1)


def _agree(one: Winding | None, other: Winding | None, factor: int) -> None:
    if one is not None and other is not None and one.certified and other.certified:
        assert other.number == factor * one.number
