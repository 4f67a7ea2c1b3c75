"""Where levels cross the Fermi level, read off a finished proof.

In the basis of the probe's broadening r = -1 + i W^+ G W = -(1 - iK/2)/(1 + iK/2) with K = W^+ (E - H - Re Sigma_p
- Sigma_d)^-1 W: an eigenvalue of r is +1 exactly where the device, closed towards the probe, has a level at E,
whatever the contact.  Between two looks the proof knows the turn of det r exactly, and so the number of eigenvalues
that passed +1; bisection finds the places.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.band import apply, factor
from scatterpump.solver.folded import FoldedDevice
from scatterpump.winding.cover import Arm, Centre, neighbours
from scatterpump.winding.reference import Contact
from scatterpump.winding.result import Crossing
from scatterpump.winding.unwrap import turn

__all__ = ["find_crossings"]

Complex = NDArray[np.complex128]
TURN = 2 * np.pi
FINEST = 4e-16
SAME = 1e-12
APART = 1e-3  # of an interval: how far on either side of a guess to look


def find_crossings(device: FoldedDevice, centres: list[Centre], contact: Contact | None = None) -> tuple[Crossing, ...]:
    """Return all net crossings over a covered cycle, in order of their phases.

    Parameters
    ----------
    contact : Contact, optional
        If `device` stands behind a better contact than the actual one, how they compare; widths are then the actual
        ones.
    """
    found: list[Crossing] = []
    for left, right, end in neighbours(centres):
        count = _Counter(device, left, right, end)
        low, high = _Stand(left.phase, 0, _closeness(left.seen.reflection)), count(end)
        if high.passed:
            found += [_described(device, phase, number, contact) for phase, number in _located(count, low, high)]
    return tuple(sorted(found, key=lambda crossing: crossing.phase))


@dataclass(frozen=True)
class _Stand:
    """How things stand at a phase: eigenvalues of r that have passed +1, and tan(theta/2) of the one nearest to it.

    The tangent is linear in the distance of the level from the Fermi level, over its width: 1/K up to a factor.
    """

    phase: float
    passed: int
    closeness: float


@dataclass(frozen=True, eq=False)
class _Counter:
    """Number of eigenvalues of r that passed +1 upwards since the left one of two neighbours."""

    device: FoldedDevice
    left: Centre
    right: Centre
    end: float

    def __call__(self, phase: float) -> _Stand:
        start, stop = self.end - self.right.below.reach, self.left.phase + self.left.above.reach
        meet = min(max((start + stop) / 2, self.left.phase), self.end)
        begin = self.left.seen.reflection
        if phase <= meet:
            here = _reflection(self.device, phase)
            turned = _turn(self.left.above, phase - self.left.phase, here)
        else:
            near, far = meet - self.left.phase, meet - self.end
            here = self.right.seen.reflection if phase == self.end else _reflection(self.device, phase)
            joint = self.right.below.model.at(far)
            turned = (
                _turn(self.left.above, near, joint)
                - self.right.below.model.turned(far)
                + _turn(self.right.below, phase - self.end, here)
            )
        change = _angles(here).sum() - _angles(begin).sum()
        return _Stand(phase, round(float(turned - change) / TURN), _closeness(here))


def _turn(arm: Arm, s: float, here: Complex) -> float:
    """Exact turn of det r from a look to where r is `here`, at distance s within its reach."""
    return arm.model.turned(s) + turn(arm.model.at(s), here)


def _angles(reflection: Complex) -> NDArray[np.float64]:
    """Eigenphases in [0, 2 pi)."""
    return np.asarray(np.angle(np.linalg.eigvals(reflection)) % TURN)


def _reflection(device: FoldedDevice, phase: float) -> Complex:
    lu = factor(device.matrix(phase))
    size = device.probe.shape[1]
    return (
        np.eye(size, dtype=complex)
        if lu is None
        else 1j * (device.probe.conj().T @ lu.solve(device.probe)) - np.eye(size)
    )


def _closeness(reflection: Complex) -> float:
    """tan(theta/2) of the eigenvalue of r that is nearest to +1."""
    angles = np.angle(np.linalg.eigvals(reflection))
    return float(np.tan(angles[np.abs(angles).argmin()] / 2))


def _located(count: Callable[[float], _Stand], low: _Stand, high: _Stand) -> list[tuple[float, int]]:
    """Find the places where the number of passed eigenvalues changes, and by how much.

    Bisection, but for a single eigenvalue guesses by the straight line between the ends, with a look on either side.
    """
    if low.passed == high.passed:
        return []
    width, middle = high.phase - low.phase, (low.phase + high.phase) / 2
    if width <= max(FINEST * max(1.0, abs(high.phase)), 1e-15) or middle in (low.phase, high.phase):
        return [(middle, high.passed - low.passed)]
    places = [middle]
    if abs(high.passed - low.passed) == 1 and low.closeness * high.closeness < 0:
        guess = low.phase - low.closeness * width / (high.closeness - low.closeness)
        places = [guess - APART * width, guess + APART * width, middle]
    for place in places:
        if low.phase < place < high.phase and high.phase - low.phase > width / 2:
            here = count(place)
            if here.passed == low.passed:
                low = here
            elif here.passed == high.passed:
                high = here
            else:
                return [*_located(count, low, here), *_located(count, here, high)]
    return _located(count, low, high)


def _described(device: FoldedDevice, phase: float, number: int, contact: Contact | None) -> Crossing:
    rate = _rate(device, phase, contact)
    place = phase % TURN
    return Crossing(0.0 if TURN - place < SAME else place, int(np.sign(number)), 2 / rate if rate > 0 else np.inf)


def _rate(device: FoldedDevice, phase: float, contact: Contact | None) -> float:
    """|d theta / d phi| of the eigenphase that passes +1: |x^+ W^+ B^-1 H' G W x|, by the derivative of r."""
    lu = factor(device.matrix(phase))
    if lu is None:
        return np.inf
    right, left = lu.solve(device.probe), lu.solve(device.probe, adjoint=True)
    reflection = 1j * (device.probe.conj().T @ right) - np.eye(device.probe.shape[1])
    values, vectors = np.linalg.eig(reflection)
    x = vectors[:, [int(np.abs(values - 1).argmin())]]
    slope = 1j * (left.conj().T @ apply(device.derivative(phase, 1), right))
    weight = 1.0 if contact is None else float((np.abs(x[:, 0]) ** 2 * contact.excess).sum())
    return weight * float(np.abs(x.conj().T @ np.linalg.solve(reflection, slope @ x))[0, 0])
