"""All portraits of one pump, each worked out once, when first asked for."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from scatterpump.bulk.cell import known_cell
from scatterpump.bulk.gap import BulkGap, bulk_gap
from scatterpump.portrait.density import ENERGIES, LocalDensity, local_density
from scatterpump.portrait.length import Lengths, leakage_by_length
from scatterpump.portrait.parameters import ParameterPlane, parameter_plane
from scatterpump.portrait.potential import Potential, potential
from scatterpump.portrait.spectrum import Spectrum, spectrum
from scatterpump.portrait.turning import Turning, turning
from scatterpump.portrait.window import energy_window
from scatterpump.pump import Pump
from scatterpump.winding.certificate import certify
from scatterpump.winding.result import Winding

__all__ = ["Album"]


@dataclass(frozen=True, eq=False)
class Album:
    """A pump, what is already known of it, and what its pictures show.

    Parameters
    ----------
    pump : Pump
    known_winding, known_gap : Winding, BulkGap, optional
        What a verdict has found, so that it is not looked for again.
    """

    pump: Pump
    known_winding: Winding | None = None
    known_gap: BulkGap | None = None

    @cached_property
    def winding(self) -> Winding:
        """The winding with its proof."""
        return self.known_winding or certify(self.pump)

    @cached_property
    def gap(self) -> BulkGap | None:
        """The proven gap; None where no cell repeats."""
        return self.known_gap or (None if known_cell(self.pump) is None else bulk_gap(self.pump))

    @cached_property
    def turning(self) -> Turning:
        """How det r goes round."""
        return turning(self.pump, self.winding)

    @cached_property
    def spectrum(self) -> Spectrum:
        """Bands and levels."""
        return spectrum(self.pump, self.gap)

    @cached_property
    def density(self) -> LocalDensity:
        """Density at the probe's end, over the energies that the spectrum shows."""
        return local_density(self.pump, np.linspace(*energy_window(self.spectrum), ENERGIES))

    @cached_property
    def potential(self) -> Potential:
        """On-site energies along the device."""
        return potential(self.pump)

    @cached_property
    def plane(self) -> ParameterPlane:
        """The cycle in the plane of its parameters."""
        return parameter_plane(self.pump)

    @cached_property
    def lengths(self) -> Lengths:
        """Leakage against length."""
        return leakage_by_length(self.pump)
