"""Covering the cycle: looks, how far each one reaches, and what is still open between them."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from scatterpump.solver.band import apply, spectral_norm
from scatterpump.solver.folded import FoldedDevice
from scatterpump.solver.path import Side, Slopes
from scatterpump.winding.look import Look, look
from scatterpump.winding.radius import RIGHT_ANGLE, Model, Rates, length_limit, split_reach
from scatterpump.winding.unwrap import turn

__all__ = [
    "START",
    "Arm",
    "Centre",
    "Cover",
    "Gap",
    "Progress",
    "centre",
    "centre_of",
    "cover_cycle",
    "covering",
    "is_leaky",
    "join",
    "neighbours",
    "open_gaps",
    "smallest_met",
    "smallest_over",
]

Floats = NDArray[np.float64]
Progress = Callable[[float], None]
TURN = 2 * np.pi
START = 5
MARGIN = 1e-9
LEAKY = 0.5  # smallest singular value of r: three quarters leak, so no charge is quantised whatever the number
FAIR, HOPELESS = 30, 0.2  # what closes within 400 looks has covered more by then; levels inside a band cover a tenth


@dataclass(frozen=True, eq=False)
class Arm:
    """What a look proves to one side: how far, with which model of r, and where it expects resonances.

    `floor` is a lower bound on the smallest singular value of r within the reach.
    """

    reach: float
    model: Model
    poles: tuple[float, ...]
    floor: float


@dataclass(frozen=True, eq=False)
class Centre:
    """A look together with what it covers below and above its phase."""

    seen: Look
    below: Arm
    above: Arm

    @property
    def phase(self) -> float:
        """Phase of the look, in radians."""
        return self.seen.phase


@dataclass(frozen=True)
class Gap:
    """A stretch that two neighbours leave open, with the phases at which to look next."""

    start: float
    end: float
    places: tuple[float, ...]


@dataclass(frozen=True, eq=False)
class Cover:
    """Centres sorted by phase, the looks they took, and why covering stopped (empty if it closed)."""

    centres: tuple[Centre, ...]
    looks: int
    reason: str

    @property
    def closed(self) -> bool:
        """Whether the centres cover the whole cycle."""
        return not self.reason


def is_leaky(cover: Cover) -> bool:
    """Tell whether a look met so much leak that no charge can be quantised."""
    return smallest_met(cover.centres) < LEAKY


def cover_cycle(
    device: FoldedDevice, slopes: Slopes, *, budget: int, progress: Progress | None = None, seeds: tuple[Look, ...] = ()
) -> Cover:
    """Take rounds of looks until nothing is open, the budget is spent, or a look proves nothing.

    `seeds` are looks at this device already taken; without any, five are spread over the cycle.
    """
    centres = [centre_of(device, slopes, seen) for seen in seeds]
    places = [] if seeds else [TURN * i / START for i in range(START)]
    looks = 0
    while True:
        found = [centre(device, slopes, place % TURN) for place in places]
        looks += len(places)
        centres = sorted([*centres, *(c for c in found if c is not None)], key=lambda c: c.phase)
        gaps = open_gaps(centres) if centres else []
        if progress is not None:
            progress(1 - _share_open(gaps))
        places = [place for gap in gaps for place in gap.places]
        reason = _reason_to_stop(centres, found, gaps, places, looks, budget)
        if reason is not None:
            return Cover(tuple(centres), looks, reason)


def _share_open(gaps: list[Gap]) -> float:
    return sum(gap.end - gap.start for gap in gaps) / TURN


def _reason_to_stop(
    centres: list[Centre], found: list[Centre | None], gaps: list[Gap], places: list[float], looks: int, budget: int
) -> str | None:
    """Empty if the cycle is covered, a reason if it cannot be, None to go on."""
    if centres and not gaps:
        return ""
    if any(c is None or max(c.above.reach, c.below.reach) == 0.0 for c in found):
        return "a level there is too narrow for double precision"
    worst, share = smallest_met(centres), 1 - _share_open(gaps)
    if worst < LEAKY and looks >= FAIR and share < HOPELESS:
        return (
            f"most of what is sent in is not reflected (|r| down to {worst:.2g}), and {looks} looks cover only "
            f"{100 * share:.2g} % of the cycle; a Fermi level inside a gap, or a longer device, may close the proof"
        )
    if looks + len(places) > budget:
        return f"the budget of {budget} looks is spent; a larger one, or a wider gap, may close the proof"
    if len({c.phase for c in centres} | {p % TURN for p in places}) < len(centres) + len(places):
        return "phases can no longer be told apart in double precision"
    return None


def centre(device: FoldedDevice, slopes: Slopes, phase: float, *, splitting: bool = True) -> Centre | None:
    """Look at `phase` and work out the reach to both sides; None if A or B is singular there."""
    seen = look(phase, device.matrix(phase), device.probe, splitting=splitting)
    return None if seen is None else centre_of(device, slopes, seen)


def centre_of(device: FoldedDevice, slopes: Slopes, seen: Look) -> Centre:
    """Work out how far a look reaches to both sides."""
    return Centre(seen, _arm(device, slopes, seen, -1), _arm(device, slopes, seen, 1))


def _arm(device: FoldedDevice, slopes: Slopes, seen: Look, side: Side) -> Arm:
    def length(distances: Floats) -> Floats:
        return slopes.length(seen.phase, seen.phase + side * distances)

    plain = slopes.reach(seen.phase, side, length_limit(seen) - seen.noise)
    simple = Arm(plain, Model.constant(seen.reflection), (), seen.smallest * float(np.exp(-RIGHT_ANGLE)))
    if seen.split is None:
        return simple
    rates = _rates(device, slopes, seen, side)
    model = Model.of(seen.split, rates.core)
    poles = tuple(model.poles.real.tolist())
    reach, floor = split_reach(seen.split, rates, length, side, _smooth_stretch(device.path.corners, seen.phase, side))
    return Arm(reach, model, poles, floor) if reach > plain else replace(simple, poles=poles)


def _rates(device: FoldedDevice, slopes: Slopes, seen: Look, side: Side) -> Rates:
    assert seen.split is not None
    u, v = seen.split.u, seen.split.v
    first = device.derivative(seen.phase, side)
    into, out = apply(first, v), apply(first, u)
    curved = apply(device.derivative(seen.phase, side, 2), v)
    return Rates(
        u.conj().T @ into,
        spectral_norm(into),
        spectral_norm(out),
        spectral_norm(u.conj().T @ curved),
        slopes.second,
        slopes.third,
    )


def _smooth_stretch(corners: Floats, phase: float, side: Side) -> float:
    """Distance to the next corner of the cycle, at most half a turn."""
    if not corners.size:
        return np.pi
    ahead = (side * (corners - phase)) % TURN
    return float(min(np.pi, np.where(ahead > 0, ahead, TURN).min()))


def open_gaps(centres: list[Centre]) -> list[Gap]:
    """Return what neighbouring centres (sorted by phase, round the cycle) leave open."""
    found = []
    for left, right, end in neighbours(centres):
        start, stop = left.phase + left.above.reach, end - right.below.reach
        if start < stop + MARGIN * min(left.above.reach, right.below.reach):
            found.append(Gap(start, stop, _places(left, right, end, start, stop)))
    return found


def neighbours(centres: list[Centre]) -> list[tuple[Centre, Centre, float]]:
    """Pairs of neighbours, with the second one's phase counted onward from the first."""
    pairs = [(a, b, b.phase) for a, b in zip(centres, centres[1:], strict=False)]
    return [*pairs, (centres[-1], centres[0], centres[0].phase + TURN)]


def _places(left: Centre, right: Centre, end: float, start: float, stop: float) -> tuple[float, ...]:
    """A resonance that a neighbour expects inside the gap, else as many even places as the reach of both suggests."""
    expected = [left.phase + p for p in left.above.poles] + [end + p for p in right.below.poles]
    inside = sorted(p for p in expected if start < p < stop)
    if inside:
        nearest = inside[0] if inside[0] - start < stop - inside[-1] else inside[-1]
        return (nearest,)
    typical = left.above.reach + right.below.reach
    count = int(np.ceil(0.9 * (stop - start) / typical)) if typical > 0 else 1
    count = count if 1 <= count <= 3 else 1
    return tuple(start + (stop - start) * (2 * i + 1) / (2 * count) for i in range(count))


def covering(centres: list[Centre]) -> tuple[tuple[float, float], ...]:
    """Return the interval that each centre covers."""
    return tuple((c.phase - c.below.reach, c.phase + c.above.reach) for c in centres)


def smallest_over(centres: list[Centre]) -> float:
    """Return a lower bound on the smallest singular value of r over a covered cycle.

    Over a reach of rule L, r = U r_i where the smallest singular value of U is at least exp(-pi/2); rule S gives
    its own floor.
    """
    return min(arm.floor for c in centres for arm in (c.below, c.above))


def smallest_met(centres: Sequence[Centre]) -> float:
    """Return the smallest singular value of r at the looks themselves, 1 if there are none."""
    return min((c.seen.smallest for c in centres), default=1.0)


def join(centres: list[Centre]) -> list[float]:
    """Return the change of arg det r from each centre to the next one round the cycle, in radians.

    Proven where the two reaches overlap; elsewhere the same formula at the middle of the gap is only a guess.  The
    models of a centre's two arms agree at the centre up to its noise only, so the step between them is taken like
    any other.
    """
    steps = []
    for left, right, end in neighbours(centres):
        start, stop = end - right.below.reach, left.phase + left.above.reach
        meet = min(max((start + stop) / 2, left.phase), end)
        near, far = meet - left.phase, meet - end
        between = turn(left.above.model.at(near), right.below.model.at(far))
        across = turn(right.below.model.at(0.0), right.above.model.at(0.0))
        steps.append(left.above.model.turned(near) + between - right.below.model.turned(far) + across)
    return steps
