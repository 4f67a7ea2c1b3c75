"""What the checks look at, each worked out once, when first asked for."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.anatomy.geometry import Geometry, geometry
from scatterpump.anatomy.motion import Motion, watch
from scatterpump.bulk.cell import BlochCell, known_cell
from scatterpump.bulk.chern import chern_number
from scatterpump.bulk.gap import BulkGap, bulk_gap
from scatterpump.errors import ClosedGapError, SingularReflectionError
from scatterpump.pump import Pump
from scatterpump.solver.direct import scattering_matrices
from scatterpump.solver.folded import FoldedDevice, fold
from scatterpump.solver.modes import with_modes
from scatterpump.solver.reflect import reflect
from scatterpump.solver.trace import ReflectionTrace
from scatterpump.winding.certificate import certify_device
from scatterpump.winding.result import Winding

__all__ = ["PROBED", "Evidence"]

SAMPLES = 48
PROBED = (0.3, 2.4, 4.5)  # no symmetry of a cycle singles them out


@dataclass(frozen=True, eq=False)
class Evidence:
    """A pump and all that can be found out about it.

    Parameters
    ----------
    pump : Pump
    quick : bool
        Whether to do without any proof: then there is no winding, no gap and no Chern number.
    progress : callable, optional
        Called with the share of the cycle that a proof covers so far, 0 to 1.
    """

    pump: Pump
    quick: bool = False
    progress: Callable[[float], None] | None = None

    @cached_property
    def geometry(self) -> Geometry:
        """Sites, bonds, interfaces."""
        return geometry(self.pump)

    @cached_property
    def motion(self) -> Motion:
        """H along the cycle."""
        return watch(self.pump)

    @property
    def is_sampled(self) -> bool:
        """Whether H has been sampled along the cycle without a failure."""
        return "motion" in self.__dict__

    @cached_property
    def system(self) -> Any:
        """The kwant system with the modes of its leads."""
        return with_modes(self.pump)

    @cached_property
    def device(self) -> FoldedDevice:
        """The driven part with the rest folded in."""
        return fold(self.pump)

    @cached_property
    def winding(self) -> Winding | None:
        """The winding with its proof; None if r is singular somewhere, or in a quick audit."""
        if self.quick:
            return None
        try:
            return certify_device(self.device, progress=self.progress)
        except SingularReflectionError:
            return None

    @cached_property
    def trace(self) -> ReflectionTrace:
        """Reflection and transmission at even phases and where levels are known to cross the Fermi level."""
        even = 2 * np.pi * np.arange(SAMPLES) / SAMPLES
        crossings = () if self.winding is None else self.winding.crossings
        return reflect(self.pump, np.sort([*even, *(crossing.phase for crossing in crossings)]))

    @cached_property
    def scattering(self) -> NDArray[np.complex128]:
        """The whole S from kwant's own solver at the phases `PROBED`."""
        return scattering_matrices(self.pump, np.array(PROBED))

    @cached_property
    def cell(self) -> BlochCell | None:
        """The cell that repeats in the interior, given or found, or None."""
        return known_cell(self.pump)

    @cached_property
    def gap(self) -> BulkGap | None:
        """The proven gap; None without a repeating cell, or in a quick audit."""
        return None if self.quick or self.cell is None else bulk_gap(self.pump)

    @cached_property
    def chern(self) -> int | None:
        """Chern number; None without a repeating cell, where the gap closes, or in a quick audit."""
        if self.quick or self.cell is None:
            return None
        try:
            return chern_number(self.pump)
        except ClosedGapError:
            return None
