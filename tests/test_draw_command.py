"""`scatterpump draw` and `scatterpump report`: files that open, exit codes, and nothing lost on the way."""

from __future__ import annotations

from dataclasses import replace
from hashlib import sha256
from pathlib import Path
from typing import Any

import matplotlib.image
import numpy as np
import pytest
import xarray
from console import call

from scatterpump.device_file import load_device
from scatterpump.figures import catalogue
from scatterpump.report import make_report, source_of

DEVICE = """
name = "short $lattice$"
sites = 24
fermi_level = -1.2
onsite = [{amplitude = 1.5, period = 3}]
probe = {hopping = 2.0}
drain = {hopping = 2.0}
"""


@pytest.fixture
def device(tmp_path: Path) -> Path:
    path = tmp_path / "device.toml"
    path.write_text(DEVICE)
    return path


@pytest.fixture
def few(monkeypatch: pytest.MonkeyPatch) -> None:
    """Only two pictures, so that a report takes no time."""
    monkeypatch.setattr(catalogue, "PICTURES", {name: catalogue.PICTURES[name] for name in ("phase", "potential")})


def test_drawing_says_what_it_holds(device: Path, tmp_path: Path) -> None:
    target = tmp_path / "all.png"
    result = call("draw", device, "-o", target, "--what", "phase", "--what", "leakage", "--what", "phase")
    # derived: each once, in the order asked for
    assert (result.exit_code, result.output) == (0, f"{target}: phase, leakage\n")
    assert matplotlib.image.imread(target).std() > 0.05


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--what", "phases", "-o", "x.png"], "there is no picture 'phases'; allowed: circle, phase"),
        (["--what", "parameters", "-o", "x.png"], "parameters: the cycle sets 1 parameter (phi)"),
        (["-o", "x.jpg"], "the ending '.jpg' is no format of a drawing"),
        (["--what", "potential", "-o", "/nowhere/x.png"], "cannot be written"),
    ],
)
def test_bad_drawings_are_refused_in_a_line(device: Path, arguments: list[str], words: str) -> None:
    result = call("draw", device, *arguments)
    # derived
    assert result.exit_code == 2
    assert words in result.stderr
    assert len(result.stderr.splitlines()) == 1


def test_interrupted_drawing_keeps_the_finished_pictures(
    device: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def interrupted(_: Any) -> Any:
        raise KeyboardInterrupt

    stopping = replace(catalogue.PICTURES["density"], result=interrupted)
    monkeypatch.setitem(catalogue.PICTURES, "density", stopping)
    target = tmp_path / "some.pdf"
    result = call("draw", device, "-o", target, "--what", "potential", "--what", "density", "--what", "leakage")
    # derived: as shells say it, 128 + SIGINT
    assert result.exit_code == 130
    assert result.stderr == "left out density, leakage: interrupted\n"
    assert target.read_bytes().startswith(b"%PDF")


@pytest.mark.usefixtures("few")
def test_report_has_three_pages(device: Path, tmp_path: Path) -> None:
    target = tmp_path / "report.pdf"
    result = call("report", device, "-o", target)
    content = target.read_bytes()
    # ISO 32000-1: every page is an object of type /Page
    assert (result.exit_code, result.stdout) == (0, f"{target}: charges a cycle   +1 from probe to drain\n")
    assert content.startswith(b"%PDF")
    assert content.rstrip().endswith(b"%%EOF")
    assert content.count(b"/Type /Page ") + content.count(b"/Type /Page\n") == 3


@pytest.mark.usefixtures("few")
def test_report_of_a_bad_device_is_written_all_the_same(device: Path, tmp_path: Path) -> None:
    target = tmp_path / "bad.pdf"
    result = call("report", device, "-o", target, "--set", "drain=wall")
    # derived: an alarm, exit code 1
    assert result.exit_code == 1
    assert result.stdout == f"{target}: charges a cycle   not to be trusted (det r winds 0 times)\n"
    assert target.stat().st_size > 10_000


def test_report_is_refused_before_any_work(device: Path, tmp_path: Path) -> None:
    result = call("report", device, "-o", tmp_path / "report.docx")
    # derived
    assert result.exit_code == 2
    assert "no format of a report; allowed: .pdf" in result.stderr


@pytest.mark.usefixtures("few")
def test_report_says_how_to_get_it_again(device: Path) -> None:
    changes = ("disorder.onsite=0.1", "disorder.seed=7")
    description = load_device(device, changes)
    report = make_report(description.pump(), source=source_of(device, description, changes, "/tmp/x y.pdf"))
    text = "\n".join(report.text())
    # derived: the command, the seed, the checksum, every check by name, and the file itself
    command = "scatterpump report device.toml --set disorder.onsite=0.1 --set disorder.seed=7 -o 'x y.pdf'"
    assert command in text
    assert "seed 7 of the disorder" in text
    assert sha256(device.read_bytes()).hexdigest() in text
    assert [finding.check for finding in report.verdict.audit.findings if finding.check not in text] == []
    assert report.listing()[2:] == DEVICE.splitlines()
    assert report.verdict.summary() in text


@pytest.mark.usefixtures("few")
def test_report_of_a_pump_built_in_python(device: Path, tmp_path: Path) -> None:
    shares: list[float] = []
    report = make_report(load_device(device).pump(), progress=shares.append)
    report.write(tmp_path / "report.pdf")
    # derived: progress grows to the whole
    assert shares == sorted(shares)
    assert shares[-1] == 1.0
    assert report.listing() == []
    assert "a program built the pump" in "\n".join(report.text())


def test_gathered_sweep_is_drawn_as_a_map(tmp_path: Path) -> None:
    integers = np.array([[0, 1, 1], [0, 1, 2]])
    data = xarray.Dataset(
        {"integer": (("fermi_level", "depth"), integers)}, {"fermi_level": [0.0, 1.0], "depth": [1, 2, 3]}
    )
    data.to_netcdf(tmp_path / "map.nc", engine="h5netcdf")
    result = call("draw", tmp_path / "map.nc", "-o", tmp_path / "map.png")
    # derived
    assert (result.exit_code, result.output) == (0, f"{tmp_path / 'map.png'}: map\n")
    assert matplotlib.image.imread(tmp_path / "map.png").std() > 0.05


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["none.nc"], "there is no such file"),
        (["text.nc"], "no netCDF that can be read"),
        (["text.nc", "--what", "circle"], "one picture"),
    ],
)
def test_results_that_cannot_be_drawn(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, arguments: list[str], words: str
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("text.nc").write_text("no netCDF")
    result = call("draw", *arguments, "-o", "x.png")
    # derived
    assert result.exit_code == 2
    assert words in result.stderr
    assert not Path("x.png").exists()
