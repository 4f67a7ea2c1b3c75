"""The kinds of devices a file can describe: its ``kind`` to the class that has its fields.

A new kind is a class registered here.  What it needs is what `Description` says; where its file names other files, a
method ``located(folder)`` returns the same description with their paths taken from that folder.
"""

from __future__ import annotations

from typing import Protocol

from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.channel import GatedChannel
from scatterpump.builder.cylinder import FluxCylinder
from scatterpump.builder.optical import OpticalLattice
from scatterpump.builder.python_file import PythonFile
from scatterpump.builder.ribbon import ModulatedRibbon
from scatterpump.pump import Pump

__all__ = ["KINDS", "USUAL", "Description"]


class Description(Protocol):
    """A frozen dataclass with annotated fields, that refuses bad values with an `InputError` when it is made."""

    def pump(self) -> Pump:
        """Build the pump."""


KINDS: dict[str, type[Description]] = {
    "chain": ModulatedChain,
    "ribbon": ModulatedRibbon,
    "cylinder": FluxCylinder,
    "channel": GatedChannel,
    "optical": OpticalLattice,
    "python": PythonFile,
}
USUAL = "chain"
