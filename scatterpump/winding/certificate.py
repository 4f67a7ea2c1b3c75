"""The proof: a winding number that covers every phi, or an honest refusal.

Looks at the device are spread over the cycle, each next one in the middle of what is still open or where a look
expects a resonance.  One look proves an interval around it in which r stays invertible and turns in a known way
(see `radius`).  Where the intervals of two neighbours meet, the turn between them is exact; once the cycle is
covered, so is the winding.  A narrow level cannot hide: from far away |G| already grows like one over the distance
to it.

A level narrower than rounding allows cannot be resolved at the actual contact.  The same device behind a good
contact has the same winding as long as less leaks to the drain than the contact lets through (see `reference`), and
there nothing is narrow.  Without any drain A and B are adjoint to each other, so det r = (-1)^m det B / det A winds
minus twice as often as det A, which does not wind at all: the number is 0.

Proven: everything above, in exact arithmetic about matrices within the stated noise of the given ones, if the
bounds on the change of H are exact (`Winding.exact`). Resting on sampling: that H is the trigonometric polynomial
or broken line with which each of its elements agrees to 1e-11 or 1e-10 at the angles checked. Resting on floating
point: that noise, 20 eps |A| plus the residuals met. Estimated: the change of H along cycles that are neither
trigonometric nor straight between corners.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import InputError, SingularReflectionError
from scatterpump.pump import Pump
from scatterpump.solver.band import EPS, norm_bound, row_sum_norm
from scatterpump.solver.folded import FoldedDevice, fold
from scatterpump.solver.path import Slopes
from scatterpump.winding.cover import (
    START,
    Cover,
    Progress,
    cover_cycle,
    covering,
    is_leaky,
    join,
    open_gaps,
    smallest_over,
)
from scatterpump.winding.crossings import find_crossings
from scatterpump.winding.look import ROUNDING
from scatterpump.winding.reference import FIRST, Contact, Reference, survey
from scatterpump.winding.result import Leak, Winding

__all__ = ["behind_good_contact", "certify", "certify_device", "good_contact"]

TURN = 2 * np.pi
SINGULAR = 1e-7
WHOLE = 1e-6
GOOD_CONTACT = 2.0
LEAK_GOAL = 1e-7
LEAK_BUDGET = 96
REFERENCE_BUDGET = 160


def certify(pump: Pump, *, budget: int = 400, leak: bool = True, progress: Progress | None = None) -> Winding:
    """Prove how often det r winds over the cycle of `pump`.

    Parameters
    ----------
    pump : Pump
    budget : int
        Most looks to take for the number.
    leak : bool
        Whether to bound the leak to the other leads as well, for which the device is looked at behind a good contact;
        without it the bound is 1, and the number is proven in about half the time.
    progress : callable, optional
        Called with the share of the cycle that is covered so far, 0 to 1.

    Returns
    -------
    Winding
        With a number if and only if the proof covers the cycle; else with the intervals left open and the reason.

    Raises
    ------
    SingularReflectionError
        If r is met singular: its winding is undefined.
    ClosedProbeError
        If the probe has no open mode at the Fermi level.
    InputError
        If a lead depends on the cycle, or the budget is below 5.
    SolverError
        If the Hamiltonian fails at some phase.
    """
    if budget < START:
        raise InputError(f"budget is {budget}", allowed=f"at least {START} looks")
    from threadpoolctl import threadpool_limits

    with threadpool_limits(1):  # many small factorisations: threads would only get in each other's way
        return certify_device(fold(pump), budget=budget, leak=leak, progress=progress)


def behind_good_contact(pump: Pump) -> int | None:
    """Return the winding that the same device would have behind a good contact, or None if it cannot be proven.

    Where it differs from the winding at the actual contact, more leaks through the device than that contact lets
    through.
    """
    device = fold(pump)
    good, _ = good_contact(device)
    slopes = device.path.slopes(lambda entries: norm_bound(device.band(entries)))
    cover = cover_cycle(good, slopes, budget=200)
    return round(sum(join(list(cover.centres))) / TURN) if cover.closed else None


def certify_device(
    device: FoldedDevice, *, budget: int = 400, leak: bool = True, progress: Progress | None = None
) -> Winding:
    """Prove the winding of a device already folded; see `certify`."""
    slopes = device.path.slopes(lambda entries: norm_bound(device.band(entries)))
    good, excess = good_contact(device)
    contact = Contact(excess)
    here = Cover((), 0, "the contact is weaker than rounding can resolve")
    if not _below_rounding(device):
        here = cover_cycle(device, slopes, budget=budget, progress=progress)
    if here.closed and not leak:
        return _proven(device, here, Reference(1.0, False, (), 0, 0), here.looks)
    if here.closed:
        seen = survey(good, slopes, contact, goal=LEAK_GOAL, need_winding=False, budget=LEAK_BUDGET)
        return _proven(device, here, seen, here.looks)
    if device.drain.shape[1] == 0:
        return _by_absence_of_drain(device, here)
    _refuse_singular(here)
    if budget - here.looks < FIRST or is_leaky(here):
        return _refused(device, here, Reference(1.0, False, (), 0, 0), here.looks, here.reason)
    return _at_open_reference(device, good, contact, slopes, here, budget, progress)


def good_contact(device: FoldedDevice) -> tuple[FoldedDevice, NDArray[np.float64]]:
    """Return the device behind a good contact, and by how much its broadening of every channel is larger."""
    return device.with_broadening(GOOD_CONTACT * _scale(device))


def _scale(device: FoldedDevice) -> float:
    """A good contact's broadening: comparable with the couplings inside the device."""
    coupling = np.abs(device.still - device.matrix(0.0))
    half = device.half
    off_diagonal = np.delete(coupling, half, axis=0)
    return float(off_diagonal.max(initial=0.0)) or float(coupling.max(initial=0.0)) or 1.0


def _below_rounding(device: FoldedDevice) -> bool:
    narrowest = float((np.linalg.norm(device.probe, axis=0) ** 2).min())
    return narrowest < 10 * ROUNDING * EPS * row_sum_norm(device.matrix(0.0))


def _refuse_singular(cover: Cover) -> None:
    if not cover.centres:
        return
    worst = min(cover.centres, key=lambda c: c.seen.smallest)
    if worst.seen.smallest < SINGULAR:
        raise SingularReflectionError(worst.phase, worst.seen.smallest)


def _proven(device: FoldedDevice, cover: Cover, seen: Reference, looks: int, contact: Contact | None = None) -> Winding:
    """Read the number off a closed cover; `contact` tells that it was made behind a better one."""
    centres = list(cover.centres)
    turns = sum(join(centres)) / TURN + 0.0
    number = round(turns)
    if abs(turns - number) > WHOLE:
        return _refused(
            device, cover, seen, looks, f"the parts of the proof add up to {turns:.6f} turns, which is no integer"
        )
    smallest = float(np.sqrt(1 - seen.leak))
    if contact is None:
        smallest = max(smallest, smallest_over(centres))
    return Winding(
        number,
        True,
        looks,
        turns,
        find_crossings(device, centres, contact),
        covering(centres),
        (),
        "",
        smallest,
        Leak(seen.leak, seen.evaluations),
        device.path.exact,
        "contact" if contact is None else "open reference",
    )


def _refused(device: FoldedDevice, cover: Cover, seen: Reference, looks: int, reason: str) -> Winding:
    centres = list(cover.centres)
    turns = sum(join(centres)) / TURN if centres else 0.0
    unproven = tuple((gap.start, gap.end) for gap in open_gaps(centres)) if centres else ((0.0, TURN),)
    return Winding(
        None,
        False,
        looks,
        turns,
        (),
        covering(centres),
        unproven,
        reason,
        float(np.sqrt(1 - seen.leak)),
        Leak(seen.leak, seen.evaluations),
        device.path.exact,
        "contact",
    )


def _by_absence_of_drain(device: FoldedDevice, cover: Cover) -> Winding:
    return Winding(
        0,
        True,
        cover.looks,
        0.0,
        (),
        covering(list(cover.centres)),
        (),
        "",
        1.0,
        Leak(0.0, 0),
        device.path.exact,
        "no drain",
    )


def _at_open_reference(
    device: FoldedDevice,
    good: FoldedDevice,
    contact: Contact,
    slopes: Slopes,
    here: Cover,
    budget: int,
    progress: Progress | None,
) -> Winding:
    """Prove the winding behind a good contact, and that the actual one does not change it."""
    seen = survey(
        good, slopes, contact, goal=LEAK_GOAL, need_winding=True, budget=min(budget - here.looks, REFERENCE_BUDGET)
    )
    looks = here.looks + (seen.needed or seen.evaluations)
    if not seen.same_winding:
        return _refused(
            device,
            here,
            seen,
            looks,
            f"{here.reason}, and what leaks behind a good contact is not proven to be less than "
            f"the share {contact.transparency:.1e} that the actual one lets through; a longer device or a stronger "
            "contact may close the proof",
        )
    there = cover_cycle(good, slopes, budget=budget, progress=progress, seeds=seen.looks)
    if not there.closed:
        return _refused(device, there, seen, looks + there.looks, there.reason)
    return _proven(good, there, seen, looks + there.looks, contact)
