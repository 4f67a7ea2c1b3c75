"""A layout is the device as the solver sees it: counted against the geometry, and drawn without a word of complaint."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import kwant
import numpy as np
import pytest
from geometries import three_leads
from numpy.testing import assert_allclose
from sound import LATTICE, bench, two_orbitals, wire, with_lead

from scatterpump.anatomy.layout import Layout, inspect
from scatterpump.cycle import Cycle
from scatterpump.errors import InputError
from scatterpump.figures.window import flattened, views
from scatterpump.pump import Pump


def island(system: Any) -> None:
    system[LATTICE(7, 9)] = 0.3


def fails(site: Any, phi: float) -> float:
    raise KeyError("gate")


def solid() -> Pump:
    """A cubic block between two leads."""
    lattice, system = kwant.lattice.cubic(norbs=1), kwant.Builder()
    system[(lattice(x, y, z) for x in range(4) for y in range(2) for z in range(2))] = lambda site, phi: np.cos(phi)
    system[lattice.neighbors()] = -1.0
    for direction in (-1, 1):
        lead = kwant.Builder(kwant.TranslationalSymmetry((direction, 0, 0)))
        lead[(lattice(0, y, z) for y in range(2) for z in range(2))] = 0.0
        lead[lattice.neighbors()] = -1.0
        system.attach_lead(lead)
    return Pump(system, Cycle.angle(), 0.3)


def honeycomb() -> Pump:
    """A graphene-lattice ribbon with a staggered level, leads along a lattice vector."""
    lattice, system = kwant.lattice.honeycomb(norbs=1), kwant.Builder()
    first, _ = lattice.sublattices

    def inside(position: Any) -> bool:
        return bool(0 <= position[0] < 8 and abs(position[1]) < 3)

    system[lattice.shape(inside, (1, 0))] = lambda site, phi: 0.5 * np.sin(phi) * (1 if site.family == first else -1)
    system[lattice.neighbors()] = -1.0
    for vector in ((-1, 0), (1, 0)):
        lead = kwant.Builder(kwant.TranslationalSymmetry(lattice.vec(vector)))
        lead[lattice.shape(lambda position: abs(position[1]) < 3, (0, 0))] = 0.0
        lead[lattice.neighbors()] = -1.0
        system.attach_lead(lead)
    return Pump(system, Cycle.angle(), 0.3)


def test_ribbon_is_counted() -> None:
    layout = inspect(bench(rows=3, cells=6))
    # derived: 12 x 3 sites, 11 x 3 + 12 x 2 bonds, a layer a column and one of the drain's modes
    assert (len(layout.positions), len(layout.bonds), layout.orbitals) == (36, 57, 36)
    assert layout.widths is not None
    assert layout.widths.tolist() == [3] * 13
    assert layout.layer is not None
    assert_allclose(layout.layer, layout.positions[:, 0])
    assert [(lead.role, lead.modes, len(lead.sites)) for lead in layout.leads] == [("probe", 3, 3), ("drain", 3, 3)]


def test_change_is_the_amplitude_of_each_wave() -> None:
    layout = inspect(bench(rows=2, cells=6))
    assert layout.site_change is not None
    assert layout.bond_change is not None
    along = layout.positions[layout.bonds[:, 0], 1] == layout.positions[layout.bonds[:, 1], 1]
    # the model's own amplitudes: levels 0.5 sin phi, bonds 1 + 0.5 cos phi along the rows, still ones between them
    assert_allclose(layout.site_change, 0.5, rtol=1e-12)
    assert_allclose(layout.bond_change[along], 0.5, rtol=1e-12)
    assert_allclose(layout.bond_change[~along], 0.0)
    assert layout.drive == "trigonometric in phi, degree 1"


def test_orbitals_are_not_sites() -> None:
    layout = inspect(two_orbitals())
    # derived: two orbitals on each of 40 sites
    assert (len(layout.positions), layout.orbitals) == (40, 80)
    assert layout.widths is not None
    assert layout.widths.max() == 2


def test_island_is_in_no_layer() -> None:
    layout = inspect(bench(edit=island))
    assert layout.layer is not None
    lost = layout.positions[layout.layer < 0]
    # derived: the site that nothing is bonded to
    assert_allclose(lost, [[7, 9]])
    assert "1 of them" in layout.summary()


def test_leads_are_drawn_outward() -> None:
    probe, drain = inspect(bench(rows=2, cells=6)).leads
    # derived: cells at -1, -2, -3 and 12, 13, 14
    assert [cell[:, 0].tolist() for cell in probe.cells] == [[-n, -n] for n in (1.0, 2.0, 3.0)]
    assert [cell[:, 0].tolist() for cell in drain.cells] == [[n, n] for n in (12.0, 13.0, 14.0)]


@pytest.mark.parametrize(
    "make",
    [
        lambda: with_lead(wire((0, 1), [(8, 0)]), cells=8),
        lambda: bench(edit=island),
        lambda: bench(cells=400, rows=4),
        solid,
        honeycomb,
    ],
    ids=["three leads", "island", "3200 sites", "solid", "honeycomb"],
)
def test_every_shape_is_drawn(make: Any, tmp_path: Path) -> None:
    layout = inspect(make())
    layout.draw(tmp_path / "device.png")
    # derived: something is on the page, and warnings are errors
    assert (tmp_path / "device.png").stat().st_size > 10_000


@pytest.mark.parametrize(
    ("names", "at", "sites", "words", "title"),
    [
        ((), 12, 24, ["probe, 1 mode", "lead 2, 1 mode", "drain, 1 mode"], None),
        (("west", "east", "gauge"), 12, 24, ["west (probe), 1 mode", "gauge, 1 mode", "east (drain), 1 mode"], None),
        (("west", "east", "gauge"), 1, 24, ["west (probe), 1 mode; gauge, 1 mode", "east (drain), 1 mode"], None),
        (("west", "east", "gauge"), 60, 120, ["west (probe), 1 mode", "east (drain), 1 mode"], "not gauge"),
    ],
)
def test_leads_are_called_by_their_names(
    names: tuple[str, ...], at: int, sites: int, words: list[str], title: str | None
) -> None:
    from matplotlib.figure import Figure

    from scatterpump.figures.device import draw_device

    figure = Figure()
    draw_device(inspect(replace(three_leads(sites, at), lead_names=names)), figure)
    texts = [text for panel in figure.axes for text in panel.texts if "mode" in text.get_text()]
    assert [text.get_text() for text in texts] == words
    assert title is None or title in figure.axes[0].get_title() + figure.axes[0].get_title(loc="left")


def test_device_that_fails_is_drawn_with_what_is_known(tmp_path: Path) -> None:
    layout = inspect(bench(value=fails))
    layout.draw(tmp_path / "device.svg")
    # derived
    assert (layout.site_change, layout.layer, layout.orbitals) == (None, None, None)
    assert "in fails, line" in " ".join(layout.summary().split())
    assert len(layout.positions) == 40


def test_unknown_ending_is_refused(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="no format"):
        layout: Layout = inspect(bench(cells=3))
        layout.draw(tmp_path / "device.doc")


@pytest.mark.parametrize(("length", "count"), [(30.0, 1), (3000.0, 2)])
def test_long_device_is_shown_by_its_ends(length: float, count: int) -> None:
    points = flattened(np.linspace(0, length, int(length) + 1)[:, None])
    found = views(points, points[:0], 1.2)
    # derived
    assert len(found) == count
    assert found[0].holds(points[:1]).all()
    assert found[-1].holds(points[-1:]).all()
