"""What a figure shows equals the result it was given: lines, colours, limits, labels; and its file opens."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field, replace
from math import inf
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import matplotlib.image
import numpy as np
import pytest
from devices import WIDE, loop, rice_mele
from matplotlib.colors import to_hex, to_rgb
from matplotlib.figure import Figure
from numpy.testing import assert_allclose

from scatterpump import figures
from scatterpump.anatomy.layout import inspect
from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Wave
from scatterpump.errors import InputError
from scatterpump.figures import catalogue
from scatterpump.figures.device import draw_device
from scatterpump.figures.output import save
from scatterpump.figures.sheet import draw_sheet
from scatterpump.figures.style import ACCENT, GREY, INK, PALE, cycle_map, strength_map
from scatterpump.portrait import Turning
from scatterpump.portrait.album import Album
from scatterpump.pump import Pump, Units

TURN = 2 * np.pi


@pytest.fixture(scope="module")
def album() -> Album:
    return Album(rice_mele(loop(), cells=12, energy=0.1))


@pytest.fixture
def ax() -> Iterator[Any]:
    figure = Figure()
    yield figure.add_subplot()
    figure.canvas.draw()  # warnings are errors


def label_of(line: Any) -> str:
    return str(line.get_label())


def lightness(colour: str) -> float:
    """Relative luminance of an sRGB colour (ITU-R BT.709 weights; common practice)."""
    return float(np.dot(to_rgb(colour), (0.2126, 0.7152, 0.0722)))


def test_circle_is_det_r_coloured_by_phi(album: Album, ax: Any) -> None:
    turning = album.turning
    assert figures.determinant_circle(turning, ax) is ax
    (dots,) = ax.collections
    places = dots.get_offsets() @ (1, 1j)
    # derived: the angle of each dot is that of det r, referred to phi = 0, and its colour is phi
    assert_allclose(np.exp(1j * np.angle(places)), np.exp(1j * turning.turned), atol=1e-9)
    assert_allclose(dots.get_array(), turning.phases)
    assert dots.get_clim() == (0.0, TURN)
    (rings,) = ax.lines
    assert len(rings.get_xdata()) == len(turning.winding.covering)
    assert "φ (rad)" in [other.get_ylabel() for other in ax.figure.axes]


def test_phase_is_drawn_with_crossings_and_proof(album: Album, ax: Any) -> None:
    turning, winding = album.turning, album.winding
    figures.determinant_phase(turning, ax)
    curve, *crossings = ax.lines
    # derived: the result's own numbers
    assert_allclose(curve.get_xydata(), np.column_stack([turning.phases, turning.turned / TURN]))
    assert_allclose([line.get_xdata()[0] for line in crossings], [c.phase for c in winding.crossings])
    (strip,) = ax.collections
    drawn = [(segment[0][0], segment[1][0]) for segment in strip.get_segments()]
    assert_allclose(drawn, winding.covering)
    assert ax.get_xlim() == (0.0, TURN)
    assert ax.get_ylim()[0] < min(curve.get_ydata())
    assert ax.get_title(loc="left") + ax.get_title() == f"W = +1, proven by {len(winding.covering)} intervals"


def test_unproven_stretches_are_hatched(album: Album, ax: Any) -> None:
    winding = replace(album.winding, number=None, certified=False, unproven=((1.0, 1.5), (3.0, 3.2)))
    figures.determinant_phase(replace(album.turning, winding=winding), ax)
    spans = [patch for patch in ax.patches if patch.get_hatch()]
    # derived
    assert_allclose([patch.get_window_extent().x0 < patch.get_window_extent().x1 for patch in spans], [1, 1])
    assert_allclose([(patch.get_x(), patch.get_x() + patch.get_width()) for patch in spans], winding.unproven)
    assert "not proven" in ax.get_title() + ax.get_title(loc="left")


def test_missed_level_is_dotted(album: Album, ax: Any) -> None:
    turning: Turning = replace(album.turning, winding=replace(album.winding, number=0))
    figures.determinant_phase(turning, ax)
    # derived: what the samples show is not what is proven, and the figure says so
    assert ax.lines[0].get_linestyle() == ":"
    assert "too narrow" in ax.get_title() + ax.get_title(loc="left")


def test_every_eigenphase_is_drawn(album: Album, ax: Any) -> None:
    two = replace(album.turning, eigenphases=np.hstack([album.turning.eigenphases, -album.turning.eigenphases]))
    figures.eigenphases(two, ax)
    channels = [line for line in ax.lines if line.get_marker() == "."]
    # derived
    assert_allclose(np.array([line.get_ydata() for line in channels]).T, two.eigenphases)
    assert_allclose(ax.get_ylim(), (-np.pi, np.pi))


def test_levels_are_drawn_between_bands(album: Album, ax: Any) -> None:
    found = album.spectrum
    figures.edge_levels(found, ax)
    lines = {label_of(line): line for line in ax.lines}
    free = found.is_between_bands
    # derived: levels outside bands only, full at the probe and hollow at the other end
    assert_allclose(np.sort(lines["at the probe"].get_ydata()), np.sort(found.levels[free & (found.nearness > 0.5)]))
    assert_allclose(
        np.sort(lines["at the other end"].get_ydata()), np.sort(found.levels[free & (found.nearness <= 0.5)])
    )
    assert lines["at the probe"].get_markerfacecolor() != lines["at the other end"].get_markerfacecolor()
    assert_allclose(lines["Fermi level"].get_ydata(), 0.1)
    assert found.gap is not None
    assert_allclose(lines["proven window"].get_ydata(), found.gap.lower_edge.upper)
    for area, edge in zip(ax.collections, found.bottom.T, strict=True):
        assert_allclose(area.get_paths()[0].vertices[:, 1].min(), edge.min())


def test_maps_hold_the_numbers_of_their_results(album: Album) -> None:
    first, second = Figure().subplots(1, 2)
    figures.local_density(album.density, first)
    figures.potential(album.potential, second)
    # derived
    assert_allclose(first.collections[0].get_array(), album.density.density)
    assert_allclose(second.collections[0].get_array(), album.potential.energies)
    assert_allclose(first.get_ylim(), album.density.energies[[0, -1]])
    assert_allclose(second.get_ylim(), (0.0, TURN))


def test_energies_without_an_open_mode_are_blank(album: Album, ax: Any) -> None:
    density = album.density.density.copy()
    density[0] = np.nan
    figures.local_density(replace(album.density, density=density), ax)
    # derived
    assert np.ma.getmaskarray(ax.collections[0].get_array())[0].all()
    assert not np.ma.getmaskarray(ax.collections[0].get_array())[1:].any()


@pytest.mark.parametrize(
    ("energy", "unit"), [(1.602176634e-22, "meV"), (6.62607015e-34, "pump's unit"), (None, "pump's unit")]
)
def test_energies_are_drawn_with_their_unit(energy: float | None, unit: str) -> None:
    # 1 meV in joules by the SI of 2019, exact
    pump = rice_mele(loop(), cells=6, energy=0.1)
    album = Album(pump if energy is None else replace(pump, units=Units(energy, 1e-9)))
    axes = Figure().subplots(4)
    figures.edge_levels(album.spectrum, axes[0])
    figures.local_density(album.density, axes[1])
    figures.potential(album.potential, axes[2])
    figures.parameter_plane(album.plane, axes[3])
    assert [ax.get_ylabel() for ax in axes[:2]] == [f"energy ({unit})"] * 2
    bars = [ax.get_ylabel() for ax in axes[0].figure.axes[4:]]
    assert bars == [f"states per {unit}", f"on-site ({unit})", f"nearest band ({unit})"]
    device = Figure()
    draw_device(inspect(album.pump), device)
    assert sum(f"({unit})" in label for ax in device.axes for label in (ax.get_xlabel(), ax.get_ylabel())) == 2


def test_plane_shows_the_cycle_over_the_gap(album: Album, ax: Any) -> None:
    plane = album.plane
    figures.parameter_plane(plane, ax)
    # derived
    assert_allclose(ax.lines[-2].get_xydata(), plane.path)
    assert_allclose(ax.lines[-1].get_xydata(), plane.path[:1])
    assert_allclose(np.ravel(ax.collections[0].get_array()), np.ravel(plane.distance))
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("delta (pump's unit)", "stagger (pump's unit)")
    shade = ax.collections[0].get_cmap()
    assert lightness(to_hex(shade(0.0))) < lightness(to_hex(shade(1.0)))  # closed is dark


def test_leakage_is_drawn_with_the_slowest_wave(album: Album, ax: Any) -> None:
    lengths = album.lengths
    figures.leakage_by_length(lengths, ax)
    measured, wave = ax.lines
    assert lengths.decay is not None
    # derived
    assert_allclose(measured.get_xydata(), np.column_stack([lengths.cells, lengths.leakage]))
    assert_allclose(wave.get_ydata()[-1] / wave.get_ydata()[0], lengths.decay ** (2 * np.ptp(lengths.cells)))
    assert ax.get_yscale() == "log"


@dataclass(frozen=True)
class Plateau:
    """The attributes of a plateau that are drawn."""

    lower: float
    upper: float
    number: int | None
    how: str = "proven"


def test_staircase_has_a_step_for_every_plateau(ax: Any) -> None:
    found = [
        Plateau(-0.6, 0.5, None),
        Plateau(-inf, -2.1, 0),
        Plateau(-1.7, -0.7, 1),
        Plateau(0.7, 1.5, -1, "computed"),
    ]
    figures.plateau_staircase(found, ax)
    # derived: in order, an endless one up to the edge of the figure, one without a number hatched
    assert_allclose([line.get_ydata()[0] for line in ax.lines], [0, 1, -1])
    assert_allclose(ax.lines[1].get_xdata(), (-1.7, -0.7))
    assert_allclose(ax.lines[0].get_xdata(), (ax.get_xlim()[0], -2.1))
    assert [line.get_linestyle() for line in ax.lines] == ["-", "-", "--"]
    (hatched,) = (patch for patch in ax.patches if patch.get_hatch())
    assert_allclose((hatched.get_x(), hatched.get_width()), (-0.6, 1.1))
    assert [text.get_text() for text in ax.texts] == ["0", "+1", "-1"]


@dataclass(frozen=True)
class Charge:
    """The attributes of a charge that are drawn."""

    probe: float
    frequency: float
    temperature: float
    number: int | None = 1
    error: float = 1e-3


CHARGES = [Charge(1 - f - t / 10, f, t) for f in (0.1, 0.0, 0.001, 0.01) for t in (0.0, 0.05)]


def test_charge_is_drawn_against_frequency(ax: Any) -> None:
    figures.charge_by_frequency(CHARGES, ax)
    curves = [bars.lines[0] for bars in ax.containers]
    # derived: one curve a temperature, in order of frequency
    assert_allclose(curves[0].get_xdata(orig=False), (0.0, 0.001, 0.01, 0.1))
    assert_allclose(curves[0].get_ydata(orig=False), (1.0, 0.999, 0.99, 0.9))
    assert_allclose(curves[1].get_ydata(orig=False), (0.995, 0.994, 0.985, 0.895))
    assert {label_of(bars) for bars in ax.containers} == {"$k_BT$ = 0", "$k_BT$ = 0.05"}
    assert ax.get_xscale() == "symlog"
    assert_allclose([line.get_ydata()[0] for line in ax.lines if line.get_color() == ACCENT], 1)
    assert ax.get_ylabel() == "charge a cycle (e)"


def test_charge_is_drawn_against_temperature(ax: Any) -> None:
    figures.charge_by_temperature(CHARGES, ax)
    curves = [bars.lines[0] for bars in ax.containers]
    # derived
    assert len(curves) == 4
    assert_allclose(curves[0].get_xydata(), [(0.0, 1.0), (0.05, 0.995)])


@dataclass
class Labelled:
    """What is used of an `xarray.DataArray`."""

    values: Any
    dims: tuple[str, ...] = ()
    attrs: dict[str, str] = field(default_factory=dict)


def darkest(ax: Any, x: float, y: float) -> float:
    """The darkest red of the pixels about a place of drawn axes: yellow and white are light, hatches are not."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg

    canvas = FigureCanvasAgg(ax.figure)
    canvas.draw()
    pixels = np.asarray(canvas.buffer_rgba())
    column, row = ax.transData.transform((x, y)).astype(int)
    row = len(pixels) - row
    return float(pixels[row - 12 : row + 12, column - 12 : column + 12, 0].min() / 255)


def sweep(**more: Any) -> dict[str, Labelled]:
    """A stand-in for the data set of a sweep: integers over a length and a contact."""
    integers = np.array([[1, 1, np.nan], [0, -1, 1.0]])
    return {
        "integer": Labelled(integers, ("contact", "sites")),
        "sites": Labelled(np.array([10, 20, 40]), ("sites",), {"long_name": "sites"}),
        "contact": Labelled(np.array(["weak", "good"]), ("contact",), {"long_name": "probe.contact", "units": "E"}),
        **more,
    }


def test_map_shows_integers_and_hatches_the_rest(ax: Any) -> None:
    data = sweep(proven=Labelled(np.array([[1, 1, 0], [1, 0, 1]])))
    figures.integer_map(data, ax)
    shown, hatched = ax.collections
    # derived: edges half-way between the points, one colour an integer, hatches where there is no proof
    assert_allclose(np.ma.filled(shown.get_array(), np.nan), data["integer"].values)
    assert ax.get_xlim() == (5.0, 50.0)
    assert shown.norm.boundaries.tolist() == [-1.5, -0.5, 0.5, 1.5]
    assert np.ma.getmaskarray(hatched.get_array()).tolist() == [[True, True, False], [True, False, True]]
    assert hatched.get_hatch() == "////"
    assert darkest(ax, 35.0, 0.0) < 0.3 < 0.9 < darkest(ax, 9.0, 0.0)
    assert [text.get_text() for text in ax.get_yticklabels()] == ["weak", "good"]
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("sites (1)", "probe.contact (E)")


def test_map_needs_two_axes(ax: Any) -> None:
    data = sweep(integer=Labelled(np.ones((2, 3, 4)), ("contact", "sites", "seed")))
    with pytest.raises(InputError, match="contact, sites, seed"):
        figures.integer_map(data, ax)
    with pytest.raises(InputError, match="no integers"):
        figures.integer_map({}, ax)


def test_style_survives_grey_paper() -> None:
    # derived: neighbouring shades of the palette differ in lightness, and both maps are ordered by it
    shades = sorted(map(lightness, (INK, ACCENT, GREY, PALE)))
    assert min(np.diff(shades)) > 0.1
    for shade, sign in ((cycle_map(), 1), (strength_map(), -1)):
        ladder = [lightness(to_hex(shade(place))) for place in np.linspace(0, 1, 12)]
        assert (sign * np.diff(ladder) > 0).all()


@pytest.mark.parametrize("ending", ["png", "pdf", "svg"])
def test_sheet_is_a_file_that_opens(album: Album, tmp_path: Path, ending: str) -> None:
    found = catalogue.collect(album, catalogue.named(["phase", "levels"]))
    target = tmp_path / f"sheet.{ending}"
    save(lambda figure: draw_sheet(found.finished, figure), target)
    content = target.read_bytes()
    # derived: the signatures of the three formats, and a picture that is not blank
    assert content.startswith({"png": b"\x89PNG", "pdf": b"%PDF", "svg": b"<?xml"}[ending])
    if ending == "png":
        assert matplotlib.image.imread(target).std() > 0.05


def test_interrupt_leaves_what_is_finished(album: Album) -> None:
    def interrupted(_: Any) -> Any:
        raise KeyboardInterrupt

    stopping = replace(catalogue.PICTURES["density"], result=interrupted)
    shares: list[float] = []
    phase, leakage = catalogue.PICTURES["phase"], catalogue.PICTURES["leakage"]
    found = catalogue.collect(album, [phase, stopping, leakage], progress=shares.append)
    # derived
    assert [picture.name for picture, _ in found.finished] == ["phase"]
    assert found.missing == [("density", "interrupted"), ("leakage", "interrupted")]
    assert (found.stopped, shares) == (True, [1 / 3])


def test_pictures_that_do_not_apply_are_left_out_with_a_reason() -> None:
    pump: Pump = ModulatedChain(sites=12, fermi_level=-1.2, onsite=[Wave(1.5, 3)], probe=WIDE, drain=WIDE).pump()
    found = catalogue.collect(Album(pump), catalogue.named(["parameters"]))
    # derived
    assert (found.finished, found.stopped) == ([], False)
    assert found.missing == [("parameters", "the cycle sets 1 parameter (phi)")]
    with pytest.raises(InputError, match="no picture 'density of states'"):
        catalogue.named(["density of states"])


def test_no_figure_takes_more_than_attributes() -> None:
    # derived: results of other rooms are taken by their attributes alone
    ax = Figure().add_subplot()
    figures.plateau_staircase([SimpleNamespace(lower=0.0, upper=1.0, number=2)], ax)
    assert ax.lines[0].get_ydata()[0] == 2
