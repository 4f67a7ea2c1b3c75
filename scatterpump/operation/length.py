"""The shortest device that leaks no more than is allowed.

Inside the gap the slowest state falls by beta = |e^{ik}| < 1 in each cell, so that a device of n cells leaks about
|t|^2 ~ C beta^(2n).  beta is known from the interior alone (`bulk.decay`); C depends on the ends and is met by building
the device and looking.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from math import ceil, log
from typing import Protocol, runtime_checkable

import numpy as np

from scatterpump.bulk.decay import decay_per_cell
from scatterpump.errors import ClosedGapError, InputError, SingularReflectionError
from scatterpump.pump import Pump
from scatterpump.solver.reflect import reflect
from scatterpump.winding.certificate import certify
from scatterpump.winding.result import Winding

__all__ = ["Resizable", "ShortestDevice", "shortest_device"]

PHASES, ROUNDS = 64, 3
AROUND = (-1.0, -0.5, 0.0, 0.5, 1.0)  # half-widths from where a level crosses the Fermi level
PROPAGATING = 1 - 1e-6
MOST_CELLS = 10_000


@runtime_checkable
class Resizable(Protocol):
    """A description whose interior repeats, and that can be made `cells` cells long."""

    def resized(self, cells: int) -> Resizable:
        """Return the same device `cells` cells long."""

    def pump(self) -> Pump:
        """Build it."""


@dataclass(frozen=True)
class ShortestDevice:
    """The shortest device that leaks at most `goal`.

    Attributes
    ----------
    cells : int
        Its length in cells of the interior.
    leak : float
        Largest |t|^2 met over the cycle.
    leak_bound : float
        Proven: at no phi does more leak; 1 where nothing was proven.
    shorter_leak : float
        Largest |t|^2 met with one cell less; 1 if there is no shorter device.
    number : int or None
        The proven winding of the shortest device.
    decay : float
        Largest |beta| per cell over the cycle.
    goal : float
    """

    cells: int
    leak: float
    leak_bound: float
    shorter_leak: float
    number: int | None
    decay: float
    goal: float


def shortest_device(device: Resizable, *, leak: float = 1e-6) -> ShortestDevice:
    """Find how many cells a device needs so that at most `leak` of the electrons pass it at any phi.

    Parameters
    ----------
    device : Resizable
        A description with a length, such as a chain, a channel or an optical lattice.
    leak : float
        Allowed transmission probability, between 0 and 1.

    Raises
    ------
    ClosedGapError
        If a state at the Fermi level does not decay, so that no length helps.
    InputError
        If the leak is out of range, the interior does not repeat, or the device would be unreasonably long.
    """
    if not 0 < leak < 1:
        raise InputError(f"leak is {leak}", allowed="a probability between 0 and 1")
    pump = device.pump()
    decay = decay_per_cell(pump)
    if decay >= PROPAGATING:
        raise ClosedGapError(pump.fermi_level, "a state there propagates through the interior")

    @cache
    def seen(n: int) -> tuple[float, Winding | None]:
        return _seen(device.resized(n).pump()) if n else (1.0, None)

    cells = _cells(lambda n: seen(n)[0], decay, leak)
    found, winding = seen(cells)
    bound, number = (1.0, None) if winding is None else (float(winding.leak.bound), winding.number)
    return ShortestDevice(cells, found, bound, seen(cells - 1)[0], number, decay, leak)


def _seen(pump: Pump) -> tuple[float, Winding | None]:
    """Return the largest |t|^2 met, and the winding.

    Looked at are a grid of the cycle, finer ones about the largest, and wherever the proof of the winding has a level
    cross the Fermi level: a device of few cells leaks there through resonances that no grid would meet.
    """
    try:
        winding = certify(pump)
    except SingularReflectionError:
        return 1.0, None
    crossings = [c.phase + part * c.width for c in winding.crossings for part in AROUND]
    worst = float(reflect(pump, crossings).leakage.max()) if crossings else 0.0
    centre, half = np.pi, np.pi
    for _ in range(ROUNDS):
        phases = centre + half * np.linspace(-1, 1, PHASES)
        leak = reflect(pump, phases).leakage
        worst, centre, half = max(worst, float(leak.max())), float(phases[leak.argmax()]), 4 * half / PHASES
    return worst, winding


def _cells(leak: Callable[[int], float], decay: float, goal: float) -> int:
    """Return the smallest n found with leak(n) <= goal < leak(n - 1), by steps of what the decay asks for."""
    per_cell = -2 * log(max(decay, 1e-150))
    good, bad = MOST_CELLS + 1, 0
    n = max(1, ceil(-log(goal) / per_cell))
    while good - bad > 1:
        if n > MOST_CELLS:
            raise InputError(
                f"the device would need more than {MOST_CELLS} cells", allowed="a larger leak or a wider gap"
            )
        met = leak(n)
        good, bad = (n, bad) if met <= goal else (good, n)
        step = max(1, ceil(abs(log(max(met, 1e-300) / goal)) / per_cell))
        n = min(max(n - step, bad + 1), good - 1) if met <= goal else min(max(n + step, bad + 1), good - 1)
    return good
