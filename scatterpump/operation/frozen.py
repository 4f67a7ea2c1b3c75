"""The charge that a slow cycle carries at one energy, into every lead, by Brouwer's formula.

With S(phi) the scattering matrix of the device frozen at phi, the charge that enters from lead m in one cycle is

    Q_m = (1/2 pi) contour integral  sum_b Im tr(S_mb^+ dS_mb),

P. W. Brouwer, Phys. Rev. B 58, R10135 (1998).  What the integer W = (1/2 pi i) contour integral d log det r misses of
it is, by unitarity and without any difference of large numbers,

    Q_0 - W = (1/2 pi) contour integral  sum_b Im tr(S_0b^+ dS_0b - S_0b^+ dr r^-1 S_0b),      b not the probe,

so that a leak of 1e-12 is known to as many digits as one of 1e-2.  S is a polynomial on each of the panels into which
the cycle is cut, at its corners and where a level is known to pass, and halved until converged.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import ClosedProbeError
from scatterpump.operation.panels import differentiation, integrate, lobatto
from scatterpump.operation.wires import seen_from, wires
from scatterpump.pump import Pump
from scatterpump.solver.layered import solve_prepared
from scatterpump.solver.problem import prepare
from scatterpump.solver.trace import ReflectionTrace

__all__ = ["FrozenCharge", "densities", "frozen_charge"]

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
TURN = 2 * np.pi
NODES = 10
PANELS = 4
ACCURACY = 1e-11  # a hundred times what S loses to rounding in a long chain
LEAK_ACCURACY = 1e-4  # of the leak itself
LEAK_FLOOR = 1e-15
BUDGET = 2000
SAME = 1e-12


@dataclass(frozen=True, eq=False)
class FrozenCharge:
    """What a slow cycle carries at one energy.

    Attributes
    ----------
    probe : int
        Number of the probe.
    leads : (l,) float array
        Charge that enters from each lead; 0 from one that is closed.
    leak : float
        Q - W of the probe, from the transmission alone; 0 where it was not asked for.
    error : float
        Estimated from what panels and their halves differ by.
    leak_error : float
    evaluations : int
        Scattering problems solved, one for each phase and open lead.
    edges : (p+1,) float array
        Phases between the panels.
    converged : bool
    """

    probe: int
    leads: Floats
    leak: float
    error: float
    leak_error: float
    evaluations: int
    edges: Floats
    converged: bool


def frozen_charge(
    pump: Pump,
    *,
    levels: Iterable[float] = (),
    edges: Floats | None = None,
    leak: bool = False,
    accuracy: float = ACCURACY,
    budget: int = BUDGET,
) -> FrozenCharge:
    """Integrate Brouwer's formula over the cycle at the pump's Fermi level.

    Parameters
    ----------
    pump : Pump
    levels : iterable of float
        Phases at which panels have to end, in radians: a level too narrow to be seen from far away.
    edges : (p+1,) float array, optional
        Phases between the panels to begin with, in place of corners, levels and even cuts.
    leak : bool
        Whether the leak is wanted; it needs r to be invertible all along the cycle.
    accuracy : float
        Error to be allowed for the charge from each lead.
    budget : int
        Most panels to measure; a panel takes ten phases.

    Raises
    ------
    ClosedProbeError
        If the probe is closed.
    InputError, SolverError
        As `scatterpump.reflect`.
    """
    device = _Frozen(pump, leak)
    count = len(device.leads)
    found = integrate(
        device.measure,
        _edges(pump.cycle.corners, levels) if edges is None else edges,
        absolute=np.append(np.full(count, accuracy), LEAK_FLOOR),
        relative=np.append(np.zeros(count), LEAK_ACCURACY),
        budget=budget,
    )
    leads = np.zeros(len(pump.finalized.leads))
    leads[device.leads] = found.values[:-1]
    return FrozenCharge(
        pump.probe,
        leads,
        float(found.values[-1]),
        float(found.errors[:-1].max()),
        float(found.errors[-1]),
        device.evaluations,
        found.edges,
        found.converged,
    )


def densities(scattering: list[list[Complex]], slopes: list[list[Complex]], probe: int | None) -> Floats:
    """Integrands of the charge from each lead and of the leak, times 2 pi.

    Parameters
    ----------
    scattering, slopes : l by l lists of (..., m_a, m_b) complex arrays
        S_ab and its derivative by phi, from lead b into lead a.
    probe : int or None
        Which lead the leak is wanted for, if any.

    Returns
    -------
    (..., l+1) float array
    """
    charges = [
        sum(_overlap(s, ds) for s, ds in zip(*rows, strict=True)) for rows in zip(scattering, slopes, strict=True)
    ]
    leak = np.zeros_like(charges[0]) if probe is None else _leak(scattering[probe], slopes[probe], probe)
    return np.stack([*charges, leak], axis=-1)


def _leak(scattering: list[Complex], slopes: list[Complex], probe: int) -> Floats:
    r, dr = scattering[probe], slopes[probe]
    found: Floats = np.zeros(r.shape[:-2])
    for b, (s, ds) in enumerate(zip(scattering, slopes, strict=True)):
        if b != probe:
            found = found + _overlap(s, ds) - _overlap(s, dr @ np.linalg.solve(r, s))
    return found


def _overlap(left: Complex, right: Complex) -> Floats:
    """Im tr(left^+ right)."""
    return np.asarray((left.conj() * right).imag.sum(axis=(-2, -1)))


def _edges(corners: Iterable[float], levels: Iterable[float]) -> Floats:
    """Ends of the first panels: corners, levels, and even cuts between."""
    given = np.sort(np.array([*corners, *levels], dtype=float) % TURN)
    given = np.concatenate([given, [given[0] + TURN]]) if given.size else np.array([0.0, TURN])
    given = given[np.concatenate([[True], np.diff(given) > SAME])]
    pieces = np.maximum(1, np.ceil(np.diff(given) / TURN * PANELS)).astype(int)
    cuts = [np.linspace(a, b, n, endpoint=False) for a, b, n in zip(given[:-1], given[1:], pieces, strict=True)]
    return np.append(np.concatenate(cuts), given[-1])


class _Frozen:
    """The frozen device seen from each of its open leads in turn, and how often it was asked."""

    def __init__(self, pump: Pump, leak: bool) -> None:
        channels = [wire.channels(pump.fermi_level) for wire in wires(pump)]
        if channels[pump.probe] == 0:
            raise ClosedProbeError(pump.fermi_level, pump.probe)
        self.leads = [lead for lead, count in enumerate(channels) if count]
        self.probe = self.leads.index(pump.probe) if leak else None
        self.views = [prepare(seen_from(pump, lead)) for lead in self.leads]
        self.evaluations = 0

    def measure(self, starts: Floats, ends: Floats) -> Floats:
        """Charge from each open lead, and leak, over each of the panels."""
        nodes, weights = lobatto(NODES)
        half = (ends - starts) / 2
        phases = (starts[:, None] + half[:, None] * (1 + nodes)).ravel()
        shape = (len(starts), NODES)
        scattering = [[block.reshape(*shape, *block.shape[1:]) for block in row] for row in self.at(phases)]
        slopes = [[_differentiated(block, half) for block in row] for row in scattering]
        found = densities(scattering, slopes, self.probe)
        return np.asarray(np.einsum("pik,i,p->pk", found, weights, half) / TURN)

    def at(self, phases: Floats) -> list[list[Complex]]:
        """S_ab at each of `phases`, from lead b into lead a."""
        columns = []
        for b, view in enumerate(self.views):
            trace = solve_prepared(view, phases, transmission=True)
            self.evaluations += len(phases)
            columns.append((b, trace))
        channels = [trace.channels for _, trace in columns]
        split = [_split(b, trace, channels) for b, trace in columns]
        return [list(row) for row in zip(*split, strict=True)]


def _split(b: int, trace: ReflectionTrace, channels: list[int]) -> list[Complex]:
    """S_ab for every lead a: r between what is transmitted into the leads before and after it."""
    others = [count for a, count in enumerate(channels) if a != b]
    parts = np.split(trace.transmission, np.cumsum(others)[:-1], axis=1) if others else []
    return [*parts[:b], trace.reflection, *parts[b:]]


def _differentiated(block: Complex, half: Floats) -> Complex:
    return np.asarray(np.einsum("ij,pjab->piab", differentiation(NODES), block) / half[:, None, None, None])
