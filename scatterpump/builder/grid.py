"""A particle of some mass on a line, put on a grid of points one step apart.

    -(hbar^2/2m) psi'' + V psi   ->   -t psi(x - a) + (2t + V(x)) psi(x) - t psi(x + a),     t = hbar^2/(2 m a^2),

so that energies count from the bottom of a free wire.  Each point stands for the step around it: the first one lies
half a step inside.  The error is of second order in the step a; what it does to a free wave is
E = 2t (1 - cos ka) = hbar^2 k^2/2m (1 - (ka)^2/12 + ...).

A `Landscape` is a potential on such points, linear in what drives it.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.builder.values import with_parameters
from scatterpump.cycle import Cycle

if TYPE_CHECKING:
    import kwant

__all__ = ["Landscape", "centres", "endless", "points", "wired"]

Reals = NDArray[np.float64]

WHOLE = 1e-9  # of a step: lengths that come from decimal numbers are whole multiples to rounding only


@dataclass(frozen=True, eq=False)
class Landscape:
    """The potential still + cosine cos(phi) + sine sin(phi) + sum of traces times their parameters.

    Attributes
    ----------
    still, cosine, sine : (n,) float array
        Energies on the grid's points.
    traces : dict
        Parameter of the cycle to its share on the points, (n,) float array.
    """

    still: Reals
    cosine: Reals
    sine: Reals
    traces: dict[str, Reals] = field(default_factory=dict)

    @classmethod
    def flat(cls, count: int) -> Landscape:
        """Return the potential 0 on `count` points."""
        return cls(np.zeros(count), np.zeros(count), np.zeros(count))

    def __add__(self, other: Landscape) -> Landscape:
        traces = dict(self.traces)
        for name, share in other.traces.items():
            traces[name] = traces[name] + share if name in traces else share
        return Landscape(self.still + other.still, self.cosine + other.cosine, self.sine + other.sine, traces)

    @property
    def needs(self) -> frozenset[str]:
        """Names of the parameters that the potential takes from the cycle."""
        turns = bool(self.cosine.any() or self.sine.any())
        return frozenset(self.traces) | ({"phi"} if turns else set())

    def at(self, parameters: Mapping[str, Any]) -> Reals:
        """Return the potential on the points at `parameters`."""
        total = self.still
        if "phi" in self.needs:
            total = total + self.cosine * np.cos(parameters["phi"]) + self.sine * np.sin(parameters["phi"])
        return sum((share * parameters[name] for name, share in self.traces.items()), total)

    def value(self, names: Sequence[str], level: float) -> Any:
        """Return kwant's value function: `level` plus the potential, with the parameters `names`."""
        still, cosine, sine = (part.tolist() for part in (self.still + level, self.cosine, self.sine))
        place = {name: i for i, name in enumerate(names)}
        traces = [(place[name], share.tolist()) for name, share in self.traces.items()]
        phi = place.get("phi") if "phi" in self.needs else None

        def onsite(site: Any, *values: Any) -> Any:
            (x,) = site.tag
            total = still[x]
            if phi is not None:
                total = total + cosine[x] * np.cos(values[phi]) + sine[x] * np.sin(values[phi])
            for i, share in traces:
                total = total + share[x] * values[i]
            return total

        return with_parameters(onsite, 1, names)


def points(length: float, step: float) -> Reals | None:
    """Return the grid's points in a `length`, or None if it is not a whole number of steps."""
    count = round(length / step)
    return centres(count, step) if abs(length / step - count) <= WHOLE * max(count, 1) else None


def centres(count: int, step: float) -> Reals:
    """Return the middles of `count` steps."""
    return np.asarray((np.arange(count) + 0.5) * step, dtype=float)


def wired(landscape: Landscape, hopping: float, lead_levels: Sequence[float], cycle: Cycle) -> kwant.Builder:
    """Return the landscape between free wires, whose bottoms lie at `lead_levels`: probe first, then drain."""
    import kwant

    lattice, system = kwant.lattice.chain(norbs=1), kwant.Builder()
    count = len(landscape.still)
    system[(lattice(x) for x in range(count))] = landscape.value(cycle.names, 2 * hopping)
    system[((lattice(x), lattice(x + 1)) for x in range(count - 1))] = -hopping
    for level, outside, direction in zip(lead_levels, (-1, count), (-1, 1), strict=True):
        system[lattice(outside)] = level + 2 * hopping
        system[lattice(outside), lattice(outside - direction)] = -hopping
        wire = kwant.Builder(kwant.TranslationalSymmetry((direction,)))
        wire[lattice(0)] = level + 2 * hopping
        wire[lattice(0), lattice(1)] = -hopping
        system.attach_lead(wire)
    return system


def endless(landscape: Landscape, hopping: float, cycle: Cycle) -> kwant.Builder:
    """Return the landscape repeated without end: the interior of a device, one cell of it."""
    import kwant

    count = len(landscape.still)
    lattice, cell = kwant.lattice.chain(norbs=1), kwant.Builder(kwant.TranslationalSymmetry((count,)))
    cell[(lattice(x) for x in range(count))] = landscape.value(cycle.names, 2 * hopping)
    cell[((lattice(x + 1), lattice(x)) for x in range(count))] = -hopping
    return cell
