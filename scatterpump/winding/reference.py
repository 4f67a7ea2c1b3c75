"""The same device behind a good contact: a bound on the leak, and the winding of contacts too weak to resolve.

If the actual contact has broadenings smaller by factors s_j, an exact Moebius map leads from one r to the other,
with a_j = (s_j-1)/(s_j+1),

    r = q^-1 (r_S - a) (1 - a r_S)^-1 q,     t = t_S (1 - a r_S)^-1 q,     q = (1 - a^2)^(1/2),

so a bound on t_S and on how far r_S stays from 1/a bounds t.  And no winding is lost between the two contacts if
r_S - u a is invertible for all u in [0, 1] and all phi: a zero of det B at the contact belonging to u a would be a
scattering state with r_S beta = u a beta.  At each phi one of two tests suffices: less leaks than the contact lets
through, |t_S|^2 < min_j 4 s_j / (1+s_j)^2 = 1 - max a_j^2, or r_S stays away from the segment.

Both tests are made on stretches around looks, as everywhere, and looks are added until they pass.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.folded import FoldedDevice
from scatterpump.solver.path import Slopes
from scatterpump.winding.damped import Damped, damped, sideways_slope
from scatterpump.winding.look import Look, look

__all__ = ["FIRST", "Contact", "Reference", "survey"]

Floats = NDArray[np.float64]
TURN = 2 * np.pi
ALPHAS = (0.03, 0.07, 0.14, 0.28, 0.5)
FIRST = 6
TRIED_OUT = 6
SEGMENT_POINTS = 65


@dataclass(frozen=True, eq=False)
class Contact:
    """How the actual contact compares with the good one.

    Attributes
    ----------
    excess : (m,) float array
        s_j: by how much the good contact's broadening of channel j is larger.
    """

    excess: Floats

    @property
    def a(self) -> Floats:
        """(s - 1)/(s + 1), shape (m,)."""
        return (self.excess - 1) / (self.excess + 1)

    @property
    def transparency(self) -> float:
        """min 1 - a^2, without cancellation: what a weak contact lets through."""
        return float((4 * self.excess / (1 + self.excess) ** 2).min())

    def amplified(self, leak: float, reflection: NDArray[np.complex128], error: float) -> float:
        """Bound |t|^2 at the actual contact from |t_S|^2 <= `leak` where r_S is within `error` of `reflection`."""
        largest = float((4 * self.excess / (1 + self.excess) ** 2).max())
        near_one = float((2 * np.minimum(self.excess, 1) / (1 + self.excess)).min())  # 1 - max|a|, without cancellation
        distance = _smallest(np.eye(len(self.a)) - self.a[:, None] * reflection) - float(np.abs(self.a).max()) * error
        return leak * largest / max(distance, near_one) ** 2

    def off_segment(self, reflection: NDArray[np.complex128]) -> float:
        """Lower bound on the smallest singular value of `reflection` - u a over u in [0, 1]."""
        u = np.linspace(0.0, 1.0, SEGMENT_POINTS)
        stack = reflection - u[:, None, None] * np.diag(self.a)
        return float(np.linalg.svd(stack, compute_uv=False)[:, -1].min()) - float(np.abs(self.a).max()) / (
            2 * SEGMENT_POINTS - 2
        )


@dataclass(frozen=True)
class Reference:
    """What the good contact proves about the actual one.

    Attributes
    ----------
    leak : float
        Bound on |t|^2 at the actual contact, over the whole cycle; at most 1.
    same_winding : bool
        Whether r and r_S are proven to wind equally often.
    looks : tuple of Look
        The looks taken, in order of their phases.
    evaluations : int
        All looks.
    needed : int
        Those that were taken when `same_winding` was settled.
    """

    leak: float
    same_winding: bool
    looks: tuple[Look, ...]
    evaluations: int
    needed: int


@dataclass(frozen=True, eq=False)
class _Stop:
    """One phase of the survey: a plain look and damped ones, all at the good contact."""

    seen: Look
    damped: tuple[Damped, ...]

    def error(self, length: float) -> float:
        """Bound on |r_S - r_S,i| where H's path is at most `length`."""
        x = length + self.seen.noise
        room = 1 - self.seen.g_norm * x
        return self.seen.out_columns * self.seen.in_columns * x / room if room > 0 else float("inf")


def survey(
    device: FoldedDevice, slopes: Slopes, contact: Contact, *, goal: float, need_winding: bool, budget: int
) -> Reference:
    """Look along the cycle at a device behind a good contact.

    Looks are added in the middle of every stretch whose bound on the leak exceeds both `goal` and four times what
    is met at the looks, or, if `need_winding`, where neither test passes; until none is left or `budget` is spent.
    """
    if device.drain.shape[1] == 0:
        return Reference(0.0, True, (), 0, 0)
    sideways = sideways_slope(device)
    alphas: tuple[float, ...] = ALPHAS
    phases: list[float] = []
    stops: list[_Stop | None] = []
    new, needed = [TURN * i / FIRST for i in range(FIRST)], 0
    while True:
        for phase in new:
            place = int(np.searchsorted(phases, phase))
            phases.insert(place, phase)
            stops.insert(place, _stop(device, phase, alphas, sideways))
            if len(phases) == TRIED_OUT:
                alphas = _best_alphas(stops, slopes.largest)
        stretches = [_stretch(phases, stops, i, slopes, contact) for i in range(len(phases))]
        met = max((_met(stop, contact) for stop in stops if stop is not None), default=1.0)
        wanted = max(goal, 4 * met)
        open_ones = [i for i, (_, same) in enumerate(stretches) if need_winding and not same]
        if not open_ones:
            needed = needed or len(phases)
            open_ones = [i for i, (leak, _) in enumerate(stretches) if leak > wanted]
        if not open_ones or len(phases) + len(open_ones) > budget:
            return Reference(
                min(1.0, max(leak for leak, _ in stretches)),
                all(same for _, same in stretches),
                tuple(stop.seen for stop in stops if stop is not None),
                len(phases),
                needed,
            )
        new = [(phases[i] + _after(phases, i)) / 2 for i in open_ones]


def _after(phases: list[float], i: int) -> float:
    return phases[i + 1] if i + 1 < len(phases) else TURN


def _stop(device: FoldedDevice, phase: float, alphas: tuple[float, ...], sideways: float) -> _Stop | None:
    band = device.matrix(phase)
    seen = look(phase, band, device.probe, splitting=False)
    found = (damped(device, band, alpha, sideways) for alpha in alphas)
    return None if seen is None else _Stop(seen, tuple(d for d in found if d is not None))


def _best_alphas(stops: list[_Stop | None], rate: float) -> tuple[float, ...]:
    """The two dampings that did best, on the whole, a little way from the first looks."""
    distance = TURN / 64
    scores = dict.fromkeys(ALPHAS, 0.0)
    for stop in stops:
        for d in () if stop is None else stop.damped:
            scores[d.alpha] += float(np.log(min(1.0, d.at(distance, rate * distance))))
    return tuple(sorted(scores, key=lambda alpha: scores[alpha])[:2])


def _met(stop: _Stop, contact: Contact) -> float:
    through = min((d.through for d in stop.damped), default=1.0)
    return contact.amplified(through**2, stop.seen.reflection, 0.0)


def _stretch(
    phases: list[float], stops: list[_Stop | None], i: int, slopes: Slopes, contact: Contact
) -> tuple[float, bool]:
    """Bound on |t|^2 at the actual contact, and whether a test passes, between phase i and the next."""
    start, end = phases[i], _after(phases, i)
    middle = (start + end) / 2
    leak, same = 0.0, True
    for phase, stop in ((start, stops[i]), (end, stops[(i + 1) % len(phases)])):
        if stop is None:
            return 1.0, False
        length = float(slopes.length(phase, np.array(middle)))
        through = min((d.at(middle - start, length) for d in stop.damped), default=float("inf")) ** 2
        error = stop.error(length)
        leak = max(leak, min(1.0, contact.amplified(through, stop.seen.reflection, error)))
        same = same and (through < contact.transparency or contact.off_segment(stop.seen.reflection) > error)
    return leak, same


def _smallest(matrix: NDArray[np.complex128]) -> float:
    return float(np.linalg.svd(matrix, compute_uv=False)[-1])
