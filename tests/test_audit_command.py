"""``scatterpump audit`` and ``scatterpump inspect``: what they print, draw and return, whatever the device file."""

from __future__ import annotations

import json
import warnings
from pathlib import Path
from typing import Any

import pytest
from click.testing import Result
from console import call
from hypothesis import given, settings
from hypothesis import strategies as st

from scatterpump.audit.examine import CHECKS

DEVICE = """
name = "sliding wave"
sites = 36
fermi_level = -1.2
onsite = [{amplitude = 1.5, period = 3}]
probe = {hopping = 2.0}
drain = {hopping = 2.0}
"""
FUZZ = settings(derandomize=True, deadline=None, max_examples=14)


def with_changes(command: str, device: Path, *changes: str, options: tuple[str, ...] = ()) -> Result:
    return call(command, device, *options, *(part for change in changes for part in ("--set", change)))


@pytest.fixture(scope="module")
def device(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("device") / "device.toml"
    path.write_text(DEVICE)
    return path


@pytest.mark.parametrize(
    ("changes", "options", "code", "words"),
    [
        ((), (), 0, "0 cautions, 0 alarms"),
        ((), ("--strict",), 0, "0 cautions, 0 alarms"),
        (("sites=18",), (), 0, "CAUTION leakage"),
        (("sites=18",), ("--strict",), 1, "CAUTION leakage"),
        (("drain=wall",), (), 1, "ALARM drain present"),
        (("fermi_level=9",), (), 1, "ALARM probe open"),
        (("fermi_level=0.3",), (), 1, "ALARM Fermi level in gap"),
    ],
)
def test_audit_tells_by_its_exit_code(
    device: Path, changes: tuple[str, ...], options: tuple[str, ...], code: int, words: str
) -> None:
    result = with_changes("audit", device, *changes, options=options)
    # derived: long and short, open and closed, in a gap and in a band
    assert result.exit_code == code, result.output
    assert words in " ".join(result.stdout.split())
    assert "sampled" in result.stdout
    assert max(map(len, result.stdout.splitlines())) <= 100


def test_audit_as_json(device: Path, tmp_path: Path) -> None:
    on_screen = with_changes("audit", device, "sites=18", options=("--json", "-"))
    in_file = with_changes("audit", device, "sites=18", options=("--json", str(tmp_path / "out.json")))
    found = json.loads(on_screen.stdout)
    # derived: one and the same computation, and the record's own fields
    assert json.loads((tmp_path / "out.json").read_text()) == found
    assert in_file.stdout.startswith("sliding wave, ")
    assert (found["name"], found["quick"], found["passed"]) == ("sliding wave", True, True)
    (leak,) = (finding for finding in found["findings"] if finding["check"] == "leakage")
    assert leak["status"] == "caution"
    assert leak["value"] > leak["limit"] == 1e-6
    assert 0 <= leak["where"]["phase"] < 6.3


def test_catalogue_lists_every_check() -> None:
    listed = call("audit", "--explain")
    # derived: one source
    assert listed.exit_code == 0
    assert all(check.name in listed.stdout for check in CHECKS)
    for name in ("cycle closes", "Cycle-Closes", "closes"):
        entry = call("audit", "--explain", name)
        assert (entry.exit_code, entry.stdout.splitlines()[0]) == (0, "cycle closes")


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("audit", "--explain", "nothing"), "there is no check 'nothing'"),
        (("audit", "--explain", "leads"), "several"),
        (("audit",), "no device is named"),
        (("audit", "nowhere.toml"), "cannot be read"),
        (("inspect", "nowhere.toml"), "cannot be read"),
    ],
)
def test_bad_input_is_one_line(arguments: tuple[str, ...], words: str) -> None:
    result = call(*arguments)
    # derived
    assert result.exit_code == 2
    assert result.stderr.count("\n") == 1
    assert words in result.stderr


SIGNATURES = {".png": b"\x89PNG", ".pdf": b"%PDF", ".svg": b"<?xml", ".PNG": b"\x89PNG"}


@pytest.mark.parametrize("ending", SIGNATURES)
def test_inspect_draws(device: Path, tmp_path: Path, ending: str) -> None:
    result = with_changes("inspect", device, options=("-o", str(tmp_path / f"device{ending}")))
    assert result.exit_code == 0, result.output
    # file formats' own signatures
    assert (tmp_path / f"device{ending}").read_bytes().startswith(SIGNATURES[ending])


def test_inspect_prints_the_device(device: Path) -> None:
    result = with_changes("inspect", device, options=("--text",))
    text = " ".join(result.stdout.split())
    # derived: 36 sites and a lead-like one at either end, one more layer for the drain's modes
    assert result.exit_code == 0
    for words in (
        "38, 38 orbitals",
        "bonds 37",
        "probe, attached to 1 site, 1 open mode",
        "layers 39 from the probe on, 1 unknown wide",
        "36 on-site values change, by up to 1.5; no bond changes",
        "trigonometric in phi, degree 1",
        "repeats every 3 lattice constants",
    ):
        assert words in text


def test_inspect_needs_a_display_or_a_file(device: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    for name in ("DISPLAY", "WAYLAND_DISPLAY"):
        monkeypatch.delenv(name, raising=False)
    result = call("inspect", device)
    # derived: the table is there all the same
    assert result.exit_code == 2
    assert "38 orbitals" in result.stdout
    assert "-o FILE" in result.stderr


@pytest.mark.parametrize("name", ["device.bmp", "device", "nowhere/device.png"])
def test_inspect_refuses_what_it_cannot_write(device: Path, tmp_path: Path, name: str) -> None:
    result = call("inspect", device, "-o", tmp_path / name)
    assert result.exit_code == 2
    assert result.stderr.count("\n") == 1


def test_inspect_shows_what_cannot_be_solved(device: Path, tmp_path: Path) -> None:
    result = with_changes("inspect", device, "fermi_level=9", options=("-o", str(tmp_path / "device.png")))
    # derived: outside the probe's band, but the geometry is there
    assert result.exit_code == 0
    assert "UNKNOWN" in result.stdout
    assert "0 open modes" in result.stdout


NUMBERS = st.one_of(
    st.floats(-4, 4),
    st.sampled_from([0.0, 1e-59, 1e-17, 1e-9, 1e9, 1e17, 9e59, -1e17, -9e59]),
)
POSITIVE = NUMBERS.map(abs).filter(bool)
LEADS = st.fixed_dictionaries({}, optional={"hopping": POSITIVE, "level": NUMBERS, "contact": POSITIVE})
WAVES = st.fixed_dictionaries(
    {"amplitude": NUMBERS, "period": st.one_of(st.integers(1, 4).map(float), POSITIVE)},
    optional={"lag": NUMBERS, "harmonic": st.integers(-2, 3)},
)
DEVICES = st.fixed_dictionaries(
    {"sites": st.integers(1, 24)},
    optional={
        "fermi_level": NUMBERS,
        "hopping": NUMBERS,
        "level": NUMBERS,
        "onsite": st.lists(WAVES, max_size=2),
        "bonds": st.lists(WAVES, max_size=2),
        "probe": LEADS,
        "drain": LEADS | st.just("wall"),
        "disorder": st.fixed_dictionaries({}, optional={"onsite": POSITIVE, "bonds": POSITIVE}),
    },
)


def toml(value: Any) -> str:
    if isinstance(value, dict):
        return "{" + ", ".join(f"{key} = {toml(item)}" for key, item in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(map(toml, value)) + "]"
    return json.dumps(value)


def answered(result: Result) -> None:
    """Check that a command gave an answer or one line of complaint."""
    assert result.exception is None or isinstance(result.exception, SystemExit), repr(result.exception)
    assert result.exit_code in (0, 1, 2)
    assert result.stderr.count("\n") == (result.exit_code == 2), result.stderr
    assert "Traceback" not in result.output


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("fuzz")


@FUZZ
@given(content=DEVICES)
def test_any_device_is_audited_or_refused(folder: Path, content: dict[str, Any]) -> None:
    path = folder / "device.toml"
    path.write_text("\n".join(f"{key} = {toml(value)}" for key, value in content.items()))
    # derived: the project's own promise
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # kwant's and LAPACK's remarks on absurd numbers
        answered(call("audit", path))
        answered(call("inspect", path, "--text"))
