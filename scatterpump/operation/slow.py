"""The charge of a slow cycle beside the proven integer, at the Fermi level and at the energies around it.

A level behind a weak contact can be too narrow for any panel to notice.  The proof of the winding knows where levels
pass, so panels are made to end there; a charge that is not conserved tells that a level of another lead was passed by.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import ClosedProbeError, SingularReflectionError
from scatterpump.operation.frozen import FrozenCharge, frozen_charge
from scatterpump.operation.wires import seen_from, wires
from scatterpump.pump import Pump
from scatterpump.winding.certificate import certify
from scatterpump.winding.result import Winding

__all__ = ["SlowCharge", "SlowCharges", "slow_charge"]

Floats = NDArray[np.float64]
NARROW = 0.02  # half-width, in radians, below which panels may pass a level by without noticing
LOST = 1e-6
AROUND = 1e-8  # accuracy at other energies than the Fermi level


@dataclass(frozen=True, eq=False)
class SlowCharge:
    """Brouwer's charge at the Fermi level beside the proven integer.

    Attributes
    ----------
    found : FrozenCharge
    number : int or None
    narrow : bool
        Whether a level passes the Fermi level so fast that it has to be looked up beforehand.
    proven : bool
        Whether the proof of the number came to an end; if not, a level may have been passed by.
    """

    found: FrozenCharge
    number: int | None
    narrow: bool
    proven: bool

    @property
    def residual(self) -> float | None:
        """Charge less number and leak, which is what the integral misses; None without a number."""
        return (
            None if self.number is None else float(self.found.leads[self.found.probe]) - self.number - self.found.leak
        )

    @property
    def error(self) -> float:
        """Estimated error of the charge from any lead."""
        missed = 0.0 if self.proven else 1.0
        return max(missed, self.found.error, abs(self.residual or 0.0), abs(float(self.found.leads.sum())))


def slow_charge(pump: Pump, winding: Winding | None = None) -> SlowCharge:
    """Return Brouwer's charge at the Fermi level, and the integer if one is proven.

    Parameters
    ----------
    pump : Pump
    winding : Winding, optional
        The pump's winding, if it is known already.
    """
    known = winding or _certified(pump)
    number, crossings = (None, ()) if known is None else (known.number, known.crossings)
    found = frozen_charge(pump, levels=[crossing.phase for crossing in crossings], leak=number is not None)
    if abs(found.leads.sum()) > LOST:
        found = frozen_charge(pump, levels=_levels(pump), leak=number is not None)
    narrow = any(crossing.width < NARROW for crossing in crossings)
    return SlowCharge(found, number, narrow, known is None or known.certified)


@dataclass(eq=False)
class SlowCharges:
    """Brouwer's charges at energies measured from the Fermi level, and how many problems were solved for them."""

    pump: Pump
    slow: SlowCharge
    evaluations: int = 0

    def at(self, energy: float, accuracy: float = AROUND) -> Floats:
        """Return the charge from each lead at `energy`, within `accuracy`; all 0 where the probe is closed."""
        there = self.pump.at_fermi_level(self.pump.fermi_level + energy)
        similar = None if self.slow.narrow else self.slow.found.edges[::2]
        try:
            found = frozen_charge(
                there, levels=_levels(there) if self.slow.narrow else (), edges=similar, accuracy=accuracy
            )
            if abs(found.leads.sum()) > LOST and not self.slow.narrow:  # a level was passed by
                self.evaluations += found.evaluations
                found = frozen_charge(there, levels=_levels(there), accuracy=accuracy)
        except ClosedProbeError:
            return np.zeros_like(self.slow.found.leads)
        self.evaluations += found.evaluations
        return found.leads


def _certified(pump: Pump) -> Winding | None:
    try:
        return certify(pump)
    except SingularReflectionError:
        return None


def _levels(pump: Pump) -> list[float]:
    """Phases at which a level passes the Fermi level, seen from any open lead, as far as proofs find them."""
    found: list[float] = []
    for lead, wire in enumerate(wires(pump)):
        if wire.channels(pump.fermi_level):
            seen = _certified(seen_from(pump, lead))
            found += [] if seen is None else [crossing.phase for crossing in seen.crossings]
    return found
