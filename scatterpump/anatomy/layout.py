"""The device as the solver sees it: sites, bonds, leads, layers, and what changes with phi and how strongly.

A device under construction need not be solvable: what cannot be known yet is None, and `troubles` says why.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.anatomy.geometry import Geometry, geometry
from scatterpump.anatomy.motion import Motion, watch
from scatterpump.anatomy.period import cell_length
from scatterpump.bulk.cell import interior
from scatterpump.errors import PumpError
from scatterpump.pump import Pump, Units
from scatterpump.solver.hamiltonian import driven_path

__all__ = ["Layout", "LeadView", "inspect"]

Floats = NDArray[np.float64]
Indices = NDArray[np.int64]
UNREACHED = -1
CELLS = 3


@dataclass(frozen=True, eq=False)
class LeadView:
    """One lead.

    Attributes
    ----------
    number : int
    name : str
        What the pump calls it; empty if it has no name.
    role : "probe", "drain" or "lead"
        Further leads count as part of the drain.
    sites : (k,) int array
        Sites of the device that it is attached to.
    modes : int or None
        Open modes at the Fermi level; None if they cannot be computed.
    cells : tuple of (k', d) float arrays
        Positions of the sites of its first cells, outward; empty if it has none.
    """

    number: int
    name: str
    role: str
    sites: Indices
    modes: int | None
    cells: tuple[Floats, ...]


@dataclass(frozen=True, eq=False)
class Layout:
    """What `inspect` found.

    Attributes
    ----------
    name : str
    fermi_level : float
    positions : (sites, d) float array
        In lattice constants.
    bonds : (bonds, 2) int array
        Pairs of sites.
    site_change, bond_change : float arrays or None
        How far the value of each strays from its mean over the cycle, in the pump's unit of energy.
    scale : float or None
        Largest matrix element of H.
    orbitals : int or None
    layer : (sites,) int array or None
        Layer of every site, counted from the probe; -1 for sites that no path leads to.
    widths : (layers,) int array or None
        Unknowns in each layer: orbitals and amplitudes of other leads' modes.
    leads : tuple of LeadView
    drive : str
        How H goes along the cycle: "trigonometric, degree 1", "straight between 4 corners", "sampled", or "unknown".
    interior : str
        Which cell repeats inside, given or found, or why none does, in words.
    period : float or None
        Its length in lattice constants; None without a cell, or if its sites are not that far apart throughout.
    troubles : tuple of str
        Why something is unknown.
    units : Units or None
        What one unit of energy and one lattice constant are; None if the pump does not say.
    """

    name: str
    fermi_level: float
    positions: Floats
    bonds: Indices
    site_change: Floats | None
    bond_change: Floats | None
    scale: float | None
    orbitals: int | None
    layer: Indices | None
    widths: Indices | None
    leads: tuple[LeadView, ...]
    drive: str
    interior: str
    period: float | None
    troubles: tuple[str, ...]
    units: Units | None

    def summary(self) -> str:
        """Return the layout as a table."""
        from scatterpump.anatomy.text import describe

        return describe(self)

    def draw(self, path: str | Path) -> None:
        """Write a drawing to `path`; its ending (.png, .pdf, .svg) says in which format."""
        from scatterpump.figures.device import draw_device
        from scatterpump.figures.output import save

        save(lambda figure: draw_device(self, figure), path)


def inspect(pump: Pump) -> Layout:
    """Look at `pump` the way the solver does."""
    troubles: list[str] = []
    found, motion = geometry(pump), _tried(watch, pump, troubles)
    problem = None if motion is None else _tried(_prepared, pump, troubles)
    return Layout(
        pump.name,
        pump.fermi_level,
        found.positions,
        found.bonds,
        None if motion is None else motion.at_sites(_changes(motion), len(found.positions)),
        None if motion is None else motion.at_bonds(_changes(motion), found.bonds),
        None if motion is None else motion.scale,
        None if motion is None else motion.driven.size,
        None if motion is None or problem is None else _layers(problem, motion, len(found.positions)),
        None if problem is None else problem.layers.widths,
        tuple(_lead(pump, found, number) for number in range(len(found.interfaces))),
        "unknown" if motion is None else _drive(driven_path(pump)[1]),
        "unknown" if motion is None else interior(pump),
        None if motion is None else cell_length(pump),
        tuple(troubles),
        pump.units,
    )


def _tried(make: Any, pump: Pump, troubles: list[str]) -> Any:
    """Return make(pump), or None with the reason noted."""
    try:
        return make(pump)
    except PumpError as error:
        troubles.append(str(error))
        return None


def _prepared(pump: Pump) -> Any:
    from scatterpump.solver.problem import prepare

    return prepare(pump)


def _changes(motion: Motion) -> Floats:
    return np.asarray(np.where(motion.moves, motion.change, 0.0))


def _layers(problem: Any, motion: Motion, sites: int) -> Indices:
    """Layer of every site: the first one that an orbital of it belongs to."""
    level = problem.layers.level[: motion.driven.size]
    first = np.full(sites, np.iinfo(np.int64).max)
    np.minimum.at(first, motion.site_of, np.where(level < 0, first[0], level))
    return np.where(first == np.iinfo(np.int64).max, UNREACHED, first)


def _drive(path: Any) -> str:
    from scatterpump.solver.path import StraightPath, TrigonometricPath

    if isinstance(path, TrigonometricPath):
        return f"trigonometric in phi, degree {path.harmonics.degree}"
    if isinstance(path, StraightPath):
        return f"straight between {len(path.corners)} corners"
    return "neither trigonometric nor straight: followed by sampling"


def _lead(pump: Pump, found: Geometry, number: int) -> LeadView:
    lead, sites = pump.finalized.leads[number], found.interfaces[number]
    role = "probe" if number == pump.probe else "drain" if number == pump.drain else "lead"
    name = pump.lead_names[number] if pump.lead_names else ""
    cells = _cells(pump.finalized, number, found.positions.shape[1])
    return LeadView(number, name, role, sites, _modes(pump, lead), cells)


def _modes(pump: Pump, lead: Any) -> int | None:
    try:
        return len(lead.modes(pump.fermi_level, params=pump.parameters(0.0))[0].momenta) // 2
    except Exception:  # anything a user's lead may raise; the audit says what is wrong with it
        return None


def _cells(system: Any, number: int, dimension: int) -> tuple[Floats, ...]:
    """Positions of the lead's first cells, outward."""
    from kwant.plotter import sys_leads_pos, sys_leads_sites

    try:
        sites, slices = sys_leads_sites(system, CELLS)
        positions = np.array(sys_leads_pos(system, sites), dtype=float)[slices[number]]
        cells = np.array([site[2] for site in sites[slices[number]]])
    except Exception:  # a lead given by its modes or self-energy only, or sites without positions
        return ()
    if positions.ndim == 1:
        positions = positions[:, None]
    if positions.shape[1] != dimension:
        return ()
    return tuple(positions[cells == n] for n in range(CELLS))
