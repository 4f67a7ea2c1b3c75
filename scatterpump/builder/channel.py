"""A gated channel in the units of a laboratory: an effective mass, gates at a depth, voltages.

    H = -(hbar^2/2m) d^2/dx^2 + V(x, phi),    0 < x < length,

on a grid (`grid`), between free wires of the same mass whose bottoms lie at the level of the leads.  V comes from gates
(`gates`) and sliding waves; it ends with the channel, as leads have to stand still.  Energies count from where the
bottom of the channel lies with all gates at 0.

Energies in meV, lengths in nm, voltages in mV, masses in electron masses; text with a unit serves as well.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from math import ceil, lcm
from typing import Annotated, Any, ClassVar

import numpy as np
from numpy.typing import NDArray

from scatterpump.builder.description import LARGEST, LONGEST, require
from scatterpump.builder.gates import Comb, Gate, SlidingWave, comb_potential, strip_potential
from scatterpump.builder.grid import Landscape, centres, endless, points, wired
from scatterpump.builder.quantity import Unit, read_quantities
from scatterpump.builder.values import box_noise
from scatterpump.cycle import Cycle
from scatterpump.errors import InputError
from scatterpump.pump import Continuum, Pump, Units

__all__ = ["GatedChannel"]

Reals = NDArray[np.float64]

MEV, NANOMETRE = 1.602176634e-22, 1e-9  # joules, exact since 2019; metres


@dataclass(frozen=True, kw_only=True)
class GatedChannel:
    """A one-dimensional channel under gates, between two wires.

    Parameters
    ----------
    mass : float
        Effective mass along the channel, in electron masses.
    length, step : float
        Length of the channel, a whole number of steps of its grid; nm.
    fermi_level : float
        Energy of the electrons sent in, meV.
    lead_level : float
        Bottom of the wires on both sides, meV; below the Fermi level, so that they are open.
    depth : float
        How far below the gates the channel lies, nm; 0 for potentials with sharp edges.
    comb : Comb, optional
        Equal gates along the whole channel, driven in turn.
    gates : sequence of Gate
        Single gates.
    waves : sequence of SlidingWave
        Potentials that run along.
    disorder, seed : float and int
        Full width in meV of a box from which a static energy is drawn at each point of the grid, and which sample.
    cycle : Cycle
        What the pump is driven round; by default phi itself.  Gates with a trace need it to set that parameter.
    name : str
        What to call the device in a report.

    Raises
    ------
    InputError
        If a value is out of range, or a gate needs a parameter that the cycle does not set.

    Notes
    -----
    The interior, whose gap and Chern number are proven, is that of the comb and the waves; single gates belong to the
    ends.  There is one where a whole number of steps makes a period.
    """

    mass: Annotated[float, Unit("electron_mass")]
    length: Annotated[float, Unit("nm")]
    step: Annotated[float, Unit("nm")]
    fermi_level: Annotated[float, Unit("meV")]
    lead_level: Annotated[float, Unit("meV")] = 0.0
    depth: Annotated[float, Unit("nm")] = 0.0
    comb: Comb | None = None
    gates: Sequence[Gate] = ()
    waves: Sequence[SlidingWave] = ()
    disorder: Annotated[float, Unit("meV")] = 0.0
    seed: int = 0
    cycle: Cycle = field(default_factory=Cycle.angle)
    name: str = "gated channel"

    __pydantic_config__: ClassVar[Any] = {"extra": "forbid"}

    def __post_init__(self) -> None:
        read_quantities(self)
        for name in ("mass", "length", "step"):
            require(0 < getattr(self, name) < LARGEST, name, getattr(self, name), "a positive quantity")
        require(self.length / self.step < LONGEST, "step", self.step, f"a step of which up to {LONGEST} fit the length")
        whole = points(self.length, self.step)
        near = self.length / max(1, ceil(self.length / self.step))
        require(whole is not None, "step", self.step, f"a whole part of the length, such as {near:.6g} nm")
        require(self.lead_level < self.fermi_level, "lead_level", self.lead_level, "an energy below the Fermi level")
        top = self.lead_level + 4 * self.hopping
        require(self.fermi_level < top, "step", self.step, "a step so fine that the wires still have a wave there")
        require(self.depth >= 0, "depth", self.depth, "a length of at least 0")
        require(self.disorder >= 0, "disorder", self.disorder, "a width of at least 0")
        self._require_parameters()

    def _require_parameters(self) -> None:
        have = self.cycle.names
        for name in sorted(self._landscape().needs - set(have)):
            raise InputError(
                f"a gate or wave uses the parameter {name!r}, which the cycle does not set",
                allowed=f"parameters of the cycle: {', '.join(have)}",
            )

    @property
    def hopping(self) -> float:
        """The grid's t = hbar^2/(2 m a^2), meV."""
        return self._continuum.hopping

    @property
    def cell(self) -> int | None:
        """Number of points after which comb and waves repeat, or None if they do not within the channel."""
        periods = [wave.wavelength for wave in self.waves] + ([self.comb.period] if self.comb else [])
        counts = [points(period, self.step) for period in periods]
        if not counts or any(count is None or len(count) == 0 for count in counts):
            return None
        cell = lcm(*(len(count) for count in counts if count is not None))
        return cell if cell <= round(self.length / self.step) else None

    def resized(self, cells: int) -> GatedChannel:
        """Return the same channel `cells` cells long."""
        if self.cell is None:
            raise InputError("the channel's interior does not repeat", allowed="a step that divides its period")
        return replace(self, length=cells * self.cell * self.step)

    def pump(self) -> Pump:
        """Build the kwant system and return it as a `Pump`: probe lead 0, drain lead 1; energies in meV."""
        landscape = self._landscape()
        noise = box_noise(self.disorder, len(landscape.still), f"onsite {self.seed}")
        rough = replace(landscape, still=landscape.still + noise)
        levels = (self.lead_level, self.lead_level)
        return Pump(
            wired(rough, self.hopping, levels, self.cycle),
            self.cycle,
            self.fermi_level,
            bulk=None if self.cell is None else endless(self._interior(self.cell), self.hopping, self.cycle),
            name=self.name,
            continuum=self._continuum,
            units=Units(MEV, self.step * NANOMETRE),
        )

    def potential(self, phases: Any) -> tuple[Reals, Reals]:
        """Return the grid's points in nm, shape (n,), and the potential there in meV, shape (phases, n)."""
        where = points(self.length, self.step)
        assert where is not None  # the length has been checked
        found = [self._landscape().at(self.cycle.at(float(phase))) for phase in np.atleast_1d(phases)]
        return where, np.array(found)

    @property
    def _continuum(self) -> Continuum:
        from scipy.constants import m_e

        return Continuum(self.step * NANOMETRE, self.mass * float(m_e), MEV)

    def _landscape(self) -> Landscape:
        where = points(self.length, self.step)
        assert where is not None  # the length has been checked
        comb = self.comb
        count = 0 if comb is None else int(self.length / comb.pitch + 1e-9)
        gates = [*self.gates, *(comb.gate(j) for j in range(count) if comb is not None)]
        strips = [_under(gate, strip_potential(where - gate.position, gate.width, self.depth)) for gate in gates]
        return sum([*strips, *(_along(wave, where) for wave in self.waves)], Landscape.flat(len(where)))

    def _interior(self, cell: int) -> Landscape:
        where = centres(cell, self.step)
        found = sum((_along(wave, where) for wave in self.waves), Landscape.flat(cell))
        if self.comb is None:
            return found
        strips = (
            _under(gate, comb_potential(where - gate.position, gate.width, self.depth, self.comb.period))
            for gate in map(self.comb.gate, range(self.comb.phases))
        )
        return sum(strips, found)


def _under(gate: Gate, share: Reals) -> Landscape:
    """The landscape of one gate, or of all that share its voltage; positive voltages attract electrons."""
    energy = -gate.lever * share
    swing = gate.amplitude * energy
    traces = {} if gate.trace is None else {gate.trace: energy}
    return Landscape(gate.voltage * energy, swing * np.cos(gate.lag), swing * np.sin(gate.lag), traces)


def _along(wave: SlidingWave, where: Reals) -> Landscape:
    angle = 2 * np.pi * where / wave.wavelength + wave.lag
    return Landscape(0 * angle, wave.amplitude * np.cos(angle), wave.amplitude * np.sin(angle))
