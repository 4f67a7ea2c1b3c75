"""Which leads stay as they are along the cycle, judged by their matrix elements.

A lead may take a parameter that the cycle sets and make nothing of it, as a value function shared with the device
does.  Its elements are compared at phases that no symmetry singles out, and at the corners of the cycle: a change that
shows at none of them is not seen.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import inf

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import SolverError
from scatterpump.pump import Pump

__all__ = ["DrivenLead", "driven_leads"]

TURN = 2 * np.pi
SPREAD = 32
GOLDEN = (5**0.5 - 1) / 2  # its multiples, modulo 1, fill a circle evenly and fall in step with no harmonic
MOST_CORNERS = 128
STILL = 1e-12  # of the largest element: what rounding does to a sum of waves that should cancel


@dataclass(frozen=True)
class DrivenLead:
    """A lead that takes parameters which the cycle sets.

    Attributes
    ----------
    number : int
    names : tuple of str
        Those parameters.
    change : float
        Largest distance of a matrix element from what it is at phi = 0, in the pump's unit of energy; infinite for a
        lead that is given by its modes alone, without elements to look at.
    phase : float
        Where that was met, in radians.
    scale : float
        The lead's largest element at phi = 0.
    phases : int
        Phases looked at, 0 among them.
    """

    number: int
    names: tuple[str, ...]
    change: float
    phase: float
    scale: float
    phases: int

    @property
    def is_still(self) -> bool:
        """Whether its elements were the same at all phases looked at, up to rounding."""
        return self.change <= STILL * self.scale

    @property
    def problem(self) -> str:
        """What is wrong with a lead that is not still, in words."""
        names = ", ".join(self.names)
        if self.change == inf:
            return f"lead {self.number} depends on {names}, which the cycle sets, and is given by its modes alone"
        moves = f"its elements change by up to {self.change:.3g}"
        return f"lead {self.number} depends on {names}, which the cycle sets: {moves}"


def driven_leads(pump: Pump) -> tuple[DrivenLead, ...]:
    """Return the leads of `pump` that take parameters which the cycle sets, and how far each follows them.

    Raises
    ------
    SolverError
        If the elements of such a lead cannot be had at some phase.
    """
    found: tuple[DrivenLead, ...] = pump.once("driven leads", lambda: _looked_at(pump))
    return found


def _looked_at(pump: Pump) -> tuple[DrivenLead, ...]:
    driven = set(pump.cycle.names)
    taken = [tuple(sorted(driven & set(lead.parameters))) for lead in pump.finalized.leads]
    return tuple(_compared(pump, number, names) for number, names in enumerate(taken) if names)


def _compared(pump: Pump, number: int, names: tuple[str, ...]) -> DrivenLead:
    phases = _phases(pump)
    if not hasattr(pump.finalized.leads[number], "inter_cell_hopping"):
        return DrivenLead(number, names, inf, 0.0, 0.0, 0)
    start = _elements(pump, number, 0.0)
    changes = [float(np.abs(_elements(pump, number, phase) - start).max(initial=0.0)) for phase in phases]
    largest = int(np.argmax(changes))
    scale = float(np.abs(start).max(initial=0.0))
    return DrivenLead(number, names, changes[largest], phases[largest], scale, len(phases) + 1)


def _phases(pump: Pump) -> list[float]:
    """Phases other than 0 to look at."""
    corners = pump.cycle.corners
    some = corners[:: -(-len(corners) // MOST_CORNERS)] if corners else ()
    spread = TURN * (GOLDEN * np.arange(1, SPREAD + 1) % 1)
    return [phase for phase in (*spread.tolist(), *some) if phase % TURN]


def _elements(pump: Pump, number: int, phase: float) -> NDArray[np.complex128]:
    """The elements of a lead's cell and of its hop to the next one, in one row."""
    lead, parameters, what = pump.finalized.leads[number], pump.parameters(phase), f"lead {number}"
    try:
        parts = (lead.cell_hamiltonian(params=parameters), lead.inter_cell_hopping(params=parameters))
        found = np.concatenate([np.asarray(part, dtype=complex).ravel() for part in parts])
    except Exception as cause:  # a user's value function may raise anything
        raise SolverError(phase, parameters, cause, what) from cause
    if not np.isfinite(found).all():
        raise SolverError(phase, parameters, ValueError("it has elements that are not finite"), what)
    return found
