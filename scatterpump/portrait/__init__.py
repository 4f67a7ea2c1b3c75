"""What a pump looks like along its cycle: sampled, for the eye; nothing here is a proof."""

from scatterpump.portrait.density import LocalDensity, local_density
from scatterpump.portrait.length import Lengths, leakage_by_length
from scatterpump.portrait.parameters import ParameterPlane, parameter_plane
from scatterpump.portrait.potential import Potential, potential
from scatterpump.portrait.spectrum import Spectrum, spectrum
from scatterpump.portrait.turning import Turning, turning

__all__ = [
    "Lengths",
    "LocalDensity",
    "ParameterPlane",
    "Potential",
    "Spectrum",
    "Turning",
    "leakage_by_length",
    "local_density",
    "parameter_plane",
    "potential",
    "spectrum",
    "turning",
]
