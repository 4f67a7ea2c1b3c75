"""Figures: the only room that knows matplotlib.

Each function here takes a result and matplotlib axes, draws, and returns the axes:

    from scatterpump import figures, portrait
    figures.determinant_phase(portrait.turning(pump, sp.certify(pump)), ax)

`scatterpump.portrait` has the results that are worked out for pictures only.
"""

from scatterpump.figures.integers import integer_map
from scatterpump.figures.lengths import leakage_by_length
from scatterpump.figures.levels import edge_levels
from scatterpump.figures.maps import local_density, potential
from scatterpump.figures.operation import charge_by_frequency, charge_by_temperature, plateau_staircase
from scatterpump.figures.parameters import parameter_plane
from scatterpump.figures.winding import determinant_circle, determinant_phase, eigenphases

__all__ = [
    "charge_by_frequency",
    "charge_by_temperature",
    "determinant_circle",
    "determinant_phase",
    "edge_levels",
    "eigenphases",
    "integer_map",
    "leakage_by_length",
    "local_density",
    "parameter_plane",
    "plateau_staircase",
    "potential",
]
