"""Checks on the cycle: it must close, have no jumps, and do something."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from scatterpump.anatomy.motion import Motion
from scatterpump.audit.check import Outcome, caution, check, graded, passed
from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import Place

__all__ = ["cycle_closes", "cycle_continuous", "cycle_drives"]

Indices = NDArray[np.int64]
CLOSURE = (1e-11, 1e-8)  # of the largest element: rounding of many turns; a turn of r that narrow levels would show
JUMP = (1e-7, 1e-3)  # of the largest element: what a steep slope leaves at the finest step; a jump that moves levels
SUSPECTS = 6
FINEST = 1e-11  # radians: a slope of 1e4 leaves less than a jump, and phases are still far apart in floating point
MEMORY, MOST_PIECES = 2**22, 64  # complex numbers held at a time


@check(
    "cycle closes",
    unit="1",
    because="det r has a winding only if it comes back, that is if H after one cycle is H at its start.",
    caution=f"H(2 pi) differs from H(0) by more than {CLOSURE[0]:g} of the largest element",
    alarm=f"H(2 pi) differs from H(0) by more than {CLOSURE[1]:g} of the largest element",
    remedy="Let every parameter return to its first value; put a flux that threads the device on one seam of bonds, "
    "so that one cycle changes it by a whole quantum on each bond that carries it.",
)
def cycle_closes(evidence: Evidence) -> Outcome | None:
    """Is the Hamiltonian after one cycle the one it began with?"""
    motion = evidence.motion
    value = float(motion.closure.max(initial=0.0)) / max(motion.scale, 1e-300)
    worst = int(motion.closure.argmax()) if motion.closure.size else 0
    site = evidence.geometry.at(int(motion.site_of[motion.driven.rows[worst]]))
    well = value <= CLOSURE[0]
    return graded(
        value,
        CLOSURE,
        "After one cycle the Hamiltonian is back at its start.",
        f"After one cycle the Hamiltonian differs from its start by {value:.1e} of its size, and as far as that tells "
        "in r, det r does not come back and has no winding.",
        Place(phase=0.0, site=None if well else site),
        basis="exact",
    )


@check(
    "cycle continuous",
    unit="1",
    because="A pump follows its cycle slowly; across a jump nothing is followed, and the turn of det r there is a "
    "matter of convention.",
    caution=f"an element jumps by more than {JUMP[0]:g} of the largest one",
    alarm=f"an element jumps by more than {JUMP[1]:g} of the largest one",
    remedy="Join the two sides by a ramp; look for a remainder, a rounding, a sign or a comparison in the function.",
)
def cycle_continuous(evidence: Evidence) -> Outcome | None:
    """Does H(phi) jump anywhere on the cycle?"""
    motion = evidence.motion
    jump, phase = _homed_in(evidence, _suspects(motion))
    value = jump / max(motion.scale, 1e-300)
    return graded(
        value,
        JUMP,
        "H follows phi without jumps where it changes fastest.",
        f"H jumps by {value:.1e} of its size, and what happens across a jump is not a matter of slow pumping.",
        Place(phase=phase),
    )


def _suspects(motion: Motion) -> Indices:
    """Elements whose longest step is most unlike their others."""
    unlike = np.where(motion.longest_step > JUMP[0] * motion.scale, motion.longest_step, 0.0)
    unlike /= np.maximum(motion.mean_step, 1e-300)
    return np.argsort(unlike)[-SUSPECTS:]


def _homed_in(evidence: Evidence, elements: Indices) -> tuple[float, float]:
    """Cut their longest steps up again and again, keeping the piece on which they change most: what is left is a jump.

    A smooth change goes down with the length of the piece, a jump stays.  Returns the largest jump and its phase.
    """
    motion, driven = evidence.motion, evidence.motion.driven
    low, high = (motion.phases[motion.longest_at[elements] + side] for side in (0, 1))
    pieces = int(np.clip(MEMORY // max(1, len(elements) * len(driven.rows)), 4, MOST_PIECES))
    each = np.arange(len(elements))
    while True:
        phases = np.linspace(low, high, pieces + 1, axis=1)
        values = driven.many(phases.ravel()).reshape(*phases.shape, -1)[each, :, elements]
        steps = np.abs(np.diff(values, axis=1))
        largest = steps.argmax(axis=1)
        low, high, jumps = phases[each, largest], phases[each, largest + 1], steps[each, largest]
        if jumps.max(initial=0.0) <= JUMP[0] * motion.scale or (high - low).max() <= FINEST:
            worst = int(jumps.argmax())
            return float(jumps[worst]), float(low[worst])


@check(
    "cycle drives the device",
    unit="elements",
    because="A Hamiltonian that does not change pumps nothing; the number is 0 for any device.",
    caution="no matrix element changes along the cycle",
    remedy="Let the value functions use the parameters that the cycle sets.",
)
def cycle_drives(evidence: Evidence) -> Outcome | None:
    """Does anything change along the cycle?"""
    count = int(evidence.motion.moves.sum())
    if count:
        return passed(count, 1, f"{count} matrix elements change along the cycle.")
    names = ", ".join(evidence.pump.cycle.names)
    return caution(0, 1, f"No matrix element changes with {names}, so nothing is pumped.")
