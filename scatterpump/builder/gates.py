"""Gates over a channel: what they are, and the potential they make in it.

A strip of width w on the surface, held at the potential V, makes

    V (arctan((x + w/2)/d) - arctan((x - w/2)/d)) / pi

at the depth d below it and the distance x from its middle, if the surface beside it is held at 0: the pinned surface
of J. H. Davies, I. A. Larkin, E. V. Sukhorukov, J. Appl. Phys. 77, 4504 (1995) (formula and citation from memory).  A
comb of period P is the sum over all its strips, which is the same with

    sum_m arctan((x - m P)/d)  ->  pi round(x/P) + arctan(tan(pi x/P) / tanh(pi d/P)).

Positive voltages attract electrons.  Lengths in nanometres, voltages in millivolts, energies in meV, angles in radians.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Annotated, Any, ClassVar

import numpy as np
from numpy.typing import NDArray

from scatterpump.builder.description import require
from scatterpump.builder.quantity import Unit, read_quantities
from scatterpump.cycle import NAMES, is_name

__all__ = ["Comb", "Gate", "SlidingWave", "comb_potential", "strip_potential"]

Reals = NDArray[np.float64]

FEWEST_PHASES = 3


def strip_potential(x: Reals, width: float, depth: float) -> Reals:
    """Return the potential at distances `x` from the middle of a strip at potential 1."""
    edges = (np.arctan2(x + side * width / 2, depth) for side in (1, -1))
    right, left = edges
    return np.asarray((right - left) / np.pi)


def comb_potential(x: Reals, width: float, depth: float, period: float) -> Reals:
    """Return the potential of endlessly many strips at potential 1, one every `period`, one of them at 0."""

    def summed(place: Reals) -> Reals:
        turn = place / period
        near = np.pi * (turn - np.round(turn))
        return np.asarray(
            np.pi * np.round(turn) + np.arctan2(np.sin(near), np.cos(near) * np.tanh(np.pi * depth / period))
        )

    return np.asarray((summed(x + width / 2) - summed(x - width / 2)) / np.pi)


@dataclass(frozen=True, kw_only=True)
class Gate:
    """One gate across the channel, at the voltage ``voltage + amplitude cos(phi - lag) + trace``.

    Parameters
    ----------
    position, width : float
        Its middle, from the channel's beginning, and its width; nm.
    voltage, amplitude : float
        Mean voltage and swing, mV.
    lag : float
        By how much of the cycle it is late, radians.
    trace : str, optional
        Name of a parameter of the cycle that is added to the voltage, mV: a column of a recorded table.
    lever : float
        Lever arm: by how many meV the electrons right below a wide gate go down for each mV.
    """

    position: Annotated[float, Unit("nm")]
    width: Annotated[float, Unit("nm")]
    voltage: Annotated[float, Unit("mV")] = 0.0
    amplitude: Annotated[float, Unit("mV")] = 0.0
    lag: float = 0.0
    trace: str | None = None
    lever: float = 1.0

    __pydantic_config__: ClassVar[Any] = {"extra": "forbid"}

    def __post_init__(self) -> None:
        read_quantities(self)
        require(self.width > 0, "width", self.width, "a positive length in nm")
        require(self.trace is None or is_name(self.trace), "trace", self.trace, NAMES)


@dataclass(frozen=True, kw_only=True)
class Comb:
    """Equal gates one `pitch` apart along the whole channel, driven in turn by several phases.

    Gate j is at the voltage ``voltage + amplitude cos(phi - 2 pi j/phases)``: its turn to attract comes later than that
    of the gate before, so electrons are carried away from the probe.  The first gate's middle is half a pitch from the
    channel's beginning.

    Parameters
    ----------
    pitch, width : float
        Distance from gate to gate, and width of each; nm.
    phases : int
        Number of phases, at least 3: with two the potential would have no direction.
    amplitude, voltage : float
        Swing and mean voltage, mV.
    traces : sequence of str
        Instead of an amplitude: the names of the cycle's parameters, one a phase, in the order of the gates.  They are
        the voltages, mV: columns of a recorded table.
    lever : float
        Lever arm: by how many meV the electrons right below a wide gate go down for each mV.
    """

    pitch: Annotated[float, Unit("nm")]
    width: Annotated[float, Unit("nm")]
    phases: int = 4
    amplitude: Annotated[float, Unit("mV")] = 0.0
    voltage: Annotated[float, Unit("mV")] = 0.0
    traces: Sequence[str] = ()
    lever: float = 1.0

    __pydantic_config__: ClassVar[Any] = {"extra": "forbid"}

    def __post_init__(self) -> None:
        read_quantities(self)
        require(0 < self.width <= self.pitch, "width", self.width, f"a positive length up to the pitch, {self.pitch:g}")
        least = f"a whole number of at least {FEWEST_PHASES}, as fewer phases have no direction"
        require(self.phases >= FEWEST_PHASES, "phases", self.phases, least)
        require(
            len(self.traces) in (0, self.phases), "traces", list(self.traces), f"one name a phase, {self.phases} in all"
        )
        require(not (self.traces and self.amplitude), "amplitude", self.amplitude, "0 where there are traces")
        for name in self.traces:
            require(is_name(name), "a name in traces", name, NAMES)

    @property
    def period(self) -> float:
        """Length after which the gates repeat with their phases, nm."""
        return self.phases * self.pitch

    def gate(self, j: int) -> Gate:
        """Return gate number `j`, counted from 0."""
        phase = j % self.phases
        return Gate(
            position=(j + 0.5) * self.pitch,
            width=self.width,
            voltage=self.voltage,
            amplitude=self.amplitude,
            lag=2 * np.pi * phase / self.phases,
            trace=self.traces[phase] if self.traces else None,
            lever=self.lever,
        )


@dataclass(frozen=True, kw_only=True)
class SlidingWave:
    """A potential A cos(2 pi x/wavelength - phi + lag) that runs away from the probe, as of a surface acoustic wave.

    Parameters
    ----------
    amplitude : float
        A, meV.
    wavelength : float
        nm; it moves on by one in a cycle.
    lag : float
        Radians.
    """

    amplitude: Annotated[float, Unit("meV")]
    wavelength: Annotated[float, Unit("nm")]
    lag: float = 0.0

    __pydantic_config__: ClassVar[Any] = {"extra": "forbid"}

    def __post_init__(self) -> None:
        read_quantities(self)
        require(self.wavelength > 0, "wavelength", self.wavelength, "a positive length in nm")
