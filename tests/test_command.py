"""The command says what the library finds, in a table, as JSON, and by its exit code."""

from __future__ import annotations

import json
from functools import cache
from pathlib import Path
from typing import Any

import pytest
from click.testing import Result
from console import call

from scatterpump.cli import main
from scatterpump.device_file import load_device
from scatterpump.verdict import Verdict, judge
from scatterpump.version import version

EXAMPLES = Path(__file__).parents[1] / "examples"
NAMES = sorted(path.stem for path in EXAMPLES.glob("*.toml"))

DEVICE = """
name = "sliding wave"
sites = 36
fermi_level = -1.2
onsite = [{amplitude = 1.5, period = 3}]
probe = {hopping = 2.0}
drain = {hopping = 2.0}
"""


@cache
def told(device: Path, *changes: str) -> Result:
    """Return the command's table for a device with `changes`, worked out once."""
    return call("verdict", device, *(part for change in changes for part in ("--set", change)))


def strict(text: str) -> Any:
    """Read JSON that has no NaN and no infinity, which the standard does not know (RFC 8259)."""

    def refuse(constant: str) -> Any:
        raise ValueError(f"{constant} is no JSON")

    return json.loads(text, parse_constant=refuse)


@pytest.fixture(scope="module")
def device(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("device") / "device.toml"
    path.write_text(DEVICE)
    return path


@pytest.fixture(scope="module")
def verdict(device: Path) -> Verdict:
    """What the library finds, to hold the command's output against."""
    return judge(load_device(device).pump())


def row(table: str, label: str) -> str:
    """Return the text of the row of `table` that begins with `label`."""
    (found,) = (line for line in table.splitlines() if line.startswith(label))
    return found.removeprefix(label).strip()


def test_there_are_examples() -> None:
    assert len(NAMES) >= 3


@pytest.mark.parametrize("name", NAMES)
def test_every_example_is_quantised(name: str) -> None:
    result = call("verdict", EXAMPLES / f"{name}.toml", "--json", "-")
    # derived: the examples are gapped, long and open
    assert result.exit_code == 0, result.output
    found = strict(result.stdout)
    assert found["trustworthy"] is True
    assert found["winding"]["number"] == found["chern"] != 0


def test_table_is_the_summary_of_the_library(device: Path, verdict: Verdict) -> None:
    result = told(device)
    # derived: one and the same computation
    assert (result.exit_code, result.stderr) == (0, "")
    assert result.stdout == verdict.summary() + "\n"
    assert row(result.stdout, "charges a cycle").startswith("+1 ")
    assert row(result.stdout, "Chern number").startswith("+1 ")
    assert result.stdout.splitlines()[0].startswith("sliding wave, Fermi level -1.2")


def test_json_on_the_screen_replaces_the_table(device: Path, verdict: Verdict) -> None:
    result = call("verdict", device, "--json", "-")
    # derived: one and the same computation
    assert result.exit_code == 0
    assert strict(result.stdout) == strict(verdict.to_json()) == verdict.to_dict()


def test_json_in_a_file_comes_with_the_table(device: Path, verdict: Verdict, tmp_path: Path) -> None:
    result = call("verdict", device, "--json", tmp_path / "out.json")
    # derived: one and the same computation
    assert result.exit_code == 0
    assert result.stdout == verdict.summary() + "\n"
    assert strict((tmp_path / "out.json").read_text()) == verdict.to_dict()


def test_json_carries_what_was_found(verdict: Verdict) -> None:
    found = verdict.to_dict()
    # derived: the record's own fields
    assert verdict.winding is not None
    assert verdict.gap is not None
    assert found["scatterpump"] == version()
    assert found["fermi_level"] == -1.2
    assert found["winding"]["number"] == verdict.winding.number == 1
    assert found["gap"]["lower"] == verdict.gap.lower
    assert [finding["check"] for finding in found["audit"]["findings"]] == [f.check for f in verdict.audit.findings]


def test_infinite_numbers_become_null(device: Path) -> None:
    """A Fermi level above all bands has no gap above it, so its upper edge is at infinity."""
    result = call("verdict", device, "--set", "fermi_level=3.1", "--set", "probe.hopping=3", "--json", "-")
    # derived: the bands end at 2 + 1.5 at the latest, at 2.43 in fact; nothing is pumped by full bands
    found = strict(result.stdout)
    assert result.exit_code == 0
    assert found["gap"]["upper_edge"]["lower"] is None
    assert found["chern"] == found["winding"]["number"] == 0


def test_fermi_level_above_all_bands_is_no_reason_for_caution(device: Path) -> None:
    result = told(device, "fermi_level=3.1", "probe.hopping=3")
    # derived: the nearest band ends 0.67 below
    assert "CAUTION" not in result.stdout
    assert row(result.stdout, "charges a cycle").startswith("0 ")
    assert "inf " not in result.stdout


def test_no_place_for_json_is_bad_input(device: Path, tmp_path: Path) -> None:
    result = call("verdict", device, "--json", tmp_path / "nowhere" / "out.json")
    assert result.exit_code == 2
    assert len(result.stderr.splitlines()) == 1
    assert "out.json" in result.stderr


@pytest.mark.parametrize(
    ("change", "field", "value"),
    [
        ("sites=45", "sites", 45),
        ("sites = 45", "sites", 45),
        ("fermi_level=1.2", "fermi_level", 1.2),
        ("name=short", "name", "short"),
        ('name="with spaces"', "name", "with spaces"),
        ("drain=wall", "drain", "wall"),
    ],
)
def test_set_changes_a_key(device: Path, change: str, field: str, value: object) -> None:
    # derived
    assert getattr(load_device(device, [change]), field) == value


@pytest.mark.parametrize(
    ("change", "read"),
    [
        ("probe.contact=0.1", lambda chain: chain.probe.contact),
        ("onsite.0.amplitude=0.1", lambda chain: chain.onsite[0].amplitude),
        ("disorder.onsite=0.1", lambda chain: chain.disorder.onsite),
    ],
)
def test_set_reaches_into_tables_and_lists(device: Path, change: str, read: Any) -> None:
    # derived
    assert read(load_device(device, [change])) == 0.1


def test_set_reaches_the_verdict(device: Path) -> None:
    result = call("verdict", device, "--set", "fermi_level=1.2", "--set", "name=upper gap", "--json", "-")
    # D. J. Thouless et al., Phys. Rev. Lett. 49, 405 (1982); sign derived
    found = strict(result.stdout)
    assert (found["name"], found["fermi_level"], found["winding"]["number"]) == ("upper gap", 1.2, -1)


@pytest.mark.parametrize(
    ("change", "word"),
    [("drain=wall", "hard wall"), ("sites=3", "reach another lead"), ("fermi_level=0.3", "Fermi level in gap")],
)
def test_alarm_is_exit_code_one(device: Path, change: str, word: str) -> None:
    """A closed far end, a chain of one period, a Fermi level inside a band."""
    result = told(device, change)
    # derived
    assert result.exit_code == 1, result.output
    assert "ALARM" in result.stdout
    assert word in " ".join(result.stdout.split())
    assert row(result.stdout, "charges a cycle").startswith(("not to be trusted", "not proven", "undefined"))


def test_alarm_is_in_the_json_too(device: Path) -> None:
    result = call("verdict", device, "--set", "drain=wall", "--json", "-")
    # derived
    assert result.exit_code == 1
    found = strict(result.stdout)
    assert found["trustworthy"] is False
    assert "alarm" in {finding["status"] for finding in found["audit"]["findings"]}


def test_alarms_stand_first_in_the_table(device: Path) -> None:
    lines = told(device, "drain=wall").stdout.splitlines()
    # derived
    assert lines[2].startswith("ALARM")


@pytest.mark.parametrize("change", ["drain=wall", "sites=3"])
def test_table_fits_a_screen(device: Path, change: str) -> None:
    lines = told(device, change).stdout.splitlines()
    # common practice: a hundred columns
    assert max(map(len, lines)) <= 100


def test_example_lists_its_names() -> None:
    assert call("example").stdout.split() == NAMES


@pytest.mark.parametrize("name", NAMES)
def test_example_writes_a_device_that_can_be_read(name: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    result = call("example", name)
    # derived
    assert result.exit_code == 0
    assert sorted(result.stdout.split()) == sorted(path.name for path in tmp_path.iterdir())
    assert (tmp_path / f"{name}.toml").read_text() == (EXAMPLES / f"{name}.toml").read_text()
    assert load_device(f"{name}.toml").name == load_device(EXAMPLES / f"{name}.toml").name


@pytest.mark.parametrize("there", ["two_gates.toml", "two_gates.csv"])
def test_example_overwrites_nothing(there: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / there).write_text("mine")
    result = call("example", "two_gates")
    # derived
    assert result.exit_code == 2
    assert len(result.stderr.splitlines()) == 1
    assert there in result.stderr
    assert {path.name: path.read_text() for path in tmp_path.iterdir()} == {there: "mine"}


def test_unknown_example_is_bad_input(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    result = call("example", "dimmer")
    assert result.exit_code == 2
    assert len(result.stderr.splitlines()) == 1
    assert all(word in result.stderr for word in ("'dimmer'", *NAMES))


def test_help_tells_of_every_command_in_whole_sentences() -> None:
    text = call("--help").output
    commands = text[text.index("Commands:") :]
    for name, command in main.commands.items():
        assert name in commands
        assert command.get_short_help_str(10_000).split()[-1] in commands.split()
    assert "..." not in commands


def test_version_and_help() -> None:
    assert call("--version").stdout == version() + "\n"
    assert "verdict" in call("-h").stdout
    assert "--set" in call("verdict", "-h").stdout
