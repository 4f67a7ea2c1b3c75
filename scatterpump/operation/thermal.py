"""Averages of a charge over energy: what temperature and the quanta of the drive mix.

At temperature T (k_B T, an energy) and frequency omega (hbar omega, an energy) the charge in a cycle is

    Q = integral de w(e) q(e),            w(e) = [f(e - hbar omega) - f(e)] / hbar omega,

f being the leads' Fermi function: w is -f' for a slow cycle, a box for a cold one, and q(mu) is left where it is both
(see `floquet`).  All of q is averaged, inside the window and in the bands; energies at which a lead is closed add
nothing from it.  What is integrated is q(e) - q(mu), which vanishes throughout the window: a deviation of 1e-9 does not
have to come out as a difference of numbers of order 1.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from scatterpump.operation.panels import gauss, integrate

__all__ = ["Average", "ChargeAt", "Floats", "Levels", "average", "edges", "weight"]

Floats = NDArray[np.float64]
ChargeAt = Callable[[float], Floats]
NODES = 4
TAIL = 30.0  # the Fermi function is 1e-13 there
SPLIT = 10.0  # where a thermal weight turns from a hill into a tail


@dataclass(frozen=True, eq=False)
class Average:
    """An average over energy.

    Attributes
    ----------
    shift : (k, l) float array
        Average of q(e) - q(mu) for each of k weights and l leads.
    errors : (k, l) float array
        Estimated from what panels and their halves differ by.
    edges : (p+1,) float array
        Energies between the panels.
    converged : bool
    """

    shift: Floats
    errors: Floats
    edges: Floats
    converged: bool


@dataclass(eq=False)
class Levels:
    """q(e) - q(mu) at many energies, each of them asked for once.

    Attributes
    ----------
    charge_at : callable
        Energy to q, shape (l,).
    reference : (l,) float array
        q(mu).
    """

    charge_at: ChargeAt
    reference: Floats
    known: dict[float, Floats] = field(default_factory=dict)

    def shifts(self, energies: Floats) -> Floats:
        """Return q(e) - q(mu) at energies of any shape, shape (..., l)."""
        for energy in energies.ravel().tolist():
            if energy not in self.known:
                self.known[energy] = self.charge_at(energy) - self.reference
        found = [self.known[energy] for energy in energies.ravel().tolist()]
        return np.array(found).reshape(*energies.shape, len(self.reference))

    def averaged(self, starts: Floats, ends: Floats, weights: Callable[[Floats], Floats]) -> Floats:
        """Return the average over each panel for each of k weights (energies to (k, ...)), shape (p, k, l)."""
        nodes, parts = gauss(NODES)
        half = (ends - starts) / 2
        energies = starts[:, None] + half[:, None] * (1 + nodes)
        return np.asarray(np.einsum("kpi,pil,i,p->pkl", weights(energies), self.shifts(energies), parts, half))


def average(
    levels: Levels,
    weights: Callable[[Floats], Floats],
    start: Floats,
    *,
    absolute: Floats,
    relative: float,
    budget: int = 600,
) -> Average:
    """Average q(e) - q(mu) over the panels between the energies `start`, halving them until converged.

    Parameters
    ----------
    levels : Levels
    weights : callable
        Energies of any shape to k weights at each, shape (k, ...).
    start : (p+1,) float array
    absolute : (l,) float array
        Error to be allowed for each lead.
    relative : float
        The same as a share of the average itself; the larger one counts.
    budget : int
        Most panels to measure; a panel takes four energies.
    """
    count, leads = len(weights(start)), len(levels.reference)

    def measure(starts: Floats, ends: Floats) -> Floats:
        return levels.averaged(starts, ends, weights).reshape(len(starts), -1)

    found = integrate(measure, start, absolute=np.tile(absolute, count), relative=relative, budget=budget)
    return Average(found.values.reshape(count, leads), found.errors.reshape(count, leads), found.edges, found.converged)


def weight(energies: Floats, temperature: float, frequency: float) -> Floats:
    """Return w at `energies` measured from the Fermi level; `temperature` and `frequency` as energies, not both 0."""
    if temperature == 0:
        return ((energies >= 0) & (energies <= frequency)) / frequency
    if frequency == 0:
        return _fermi(energies, temperature) * _fermi(-energies, temperature) / temperature
    return (_fermi(energies - frequency, temperature) - _fermi(energies, temperature)) / frequency


def edges(temperature: float, frequency: float) -> Floats:
    """Return the energies, from the Fermi level, between which to begin averaging with `weight`."""
    steps = temperature * np.array([SPLIT, TAIL]) if temperature > 0 else np.empty(0)
    return np.unique(np.concatenate([-steps, [0.0, frequency], frequency + steps]))


def _fermi(energies: Floats, temperature: float) -> Floats:
    return np.asarray(0.5 - 0.5 * np.tanh(energies / (2 * temperature)))
