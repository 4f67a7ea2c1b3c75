"""Whatever is wrong with a device file, the command says it in one line and ends with exit code 2.

The line names the file and the key and says what would be allowed.
"""

from __future__ import annotations

import json
from copy import deepcopy
from pathlib import Path
from types import SimpleNamespace
from typing import Any
from unittest.mock import patch

import console
import pytest
from click.testing import Result
from hypothesis import given, settings
from hypothesis import strategies as st

NAN, INF = float("nan"), float("inf")
GOOD: dict[str, Any] = {
    "name": "wave",
    "sites": 12,
    "hopping": 1.0,
    "level": 0.0,
    "fermi_level": -1.2,
    "onsite": [{"amplitude": 1.5, "period": 3}],
    "bonds": [],
    "probe": {"hopping": 2.0},
    "drain": {"hopping": 2.0},
    "disorder": {"onsite": 0.0},
}
TRACE = "left,right\n0,0\n1,0\n1,1\n0,1\n0,0\n"
ELLIPSE = {"kind": "ellipse", "x": ["left", 0.0, 1.0], "y": ["right", 0.0, 1.0]}
TABLE = {"kind": "table", "table": "trace.csv"}


def toml(value: Any) -> str:
    """Write a value as TOML, tables inline."""
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    if isinstance(value, dict):
        return "{" + ", ".join(f"{toml(str(key))} = {toml(item)}" for key, item in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(map(toml, value)) + "]"
    return repr(value)


def device_with(**changes: Any) -> dict[str, Any]:
    return {**deepcopy(GOOD), **changes}


def written(folder: Path, content: dict[str, Any], trace: str | bytes = TRACE) -> Path:
    device = folder / "device.toml"
    device.write_text("\n".join(f"{toml(key)} = {toml(value)}" for key, value in content.items()), encoding="utf-8")
    (folder / "trace.csv").write_bytes(trace.encode() if isinstance(trace, str) else trace)
    return device


def call(*arguments: object) -> Result:
    return console.call("verdict", *arguments)


def complaint(result: Result, *words: str) -> str:
    """Return the one line the command complained with, after checking that it is fit to be read."""
    assert result.exception is None or isinstance(result.exception, SystemExit), repr(result.exception)
    assert result.exit_code == 2, result.output
    assert result.stdout == ""
    assert result.stderr.count("\n") == 1
    assert result.stderr.endswith("\n")
    assert "Traceback" not in result.stderr
    for word in words:
        assert word in result.stderr
    return result.stderr


def accepted(pump: Any, *, progress: Any = None) -> Any:
    """Stand in for the judge: the file was good, and how the device fares does not matter here."""
    return SimpleNamespace(trustworthy=True, summary=lambda: "accepted")


def test_good_file_is_accepted(tmp_path: Path) -> None:
    assert call(written(tmp_path, device_with(sites=36))).exit_code == 0


# --- keys and values ---

WRONG = {
    "unknown key": ({"hoping": 1.0}, "hoping"),
    "unknown key of a lead": ({"probe": {"hoping": 1.0}}, "probe.hoping"),
    "unknown key of a wave": ({"onsite": [{"amplitude": 1.0, "perod": 3}]}, "onsite.0"),
    "unknown key of the disorder": ({"disorder": {"sed": 3}}, "disorder.sed"),
    "unknown kind of device": ({"kind": "ring"}, "kind"),
    "kind that is no text": ({"kind": 3}, "kind"),
    "sites as text": ({"sites": "many"}, "sites"),
    "sites as a fraction": ({"sites": 3.5}, "sites"),
    "sites as true": ({"sites": True}, "sites"),
    "no sites at all": ({"sites": 0}, "sites"),
    "negative length": ({"sites": -3}, "sites"),
    "hopping as text": ({"hopping": "1"}, "hopping"),
    "hopping as a date": ({"hopping": [1979]}, "hopping"),
    "hopping not a number": ({"hopping": NAN}, "hopping"),
    "level infinite": ({"level": -INF}, "level"),
    "Fermi level not a number": ({"fermi_level": NAN}, "fermi_level"),
    "name as a number": ({"name": 5}, "name"),
    "waves as a number": ({"onsite": 3}, "onsite"),
    "waves as a table": ({"onsite": {"amplitude": 1.0, "period": 3}}, "onsite"),
    "wave as a number": ({"bonds": [3]}, "bonds.0"),
    "wave without a period": ({"onsite": [{"amplitude": 1.0}]}, "onsite.0.period"),
    "period of zero": ({"onsite": [{"amplitude": 1.0, "period": 0}]}, "onsite.0"),
    "period below zero": ({"bonds": [{"amplitude": 1.0, "period": -3.0}]}, "bonds.0"),
    "amplitude not a number": ({"onsite": [{"amplitude": NAN, "period": 3}]}, "onsite.0"),
    "amplitude as a list": ({"onsite": [{"amplitude": [1.0], "period": 3}]}, "onsite.0.amplitude"),
    "amplitude that is no name": ({"onsite": [{"amplitude": "two words", "period": 3}]}, "onsite.0"),
    "amplitude that nothing sets": ({"onsite": [{"amplitude": "depth", "period": 3}]}, "depth"),
    "harmonic as a fraction": ({"onsite": [{"amplitude": 1.0, "period": 3, "harmonic": 0.5}]}, "onsite.0.harmonic"),
    "lead as a number": ({"probe": 3}, "probe"),
    "probe as a wall": ({"probe": "wall"}, "probe"),
    "drain as something else": ({"drain": "door"}, "drain"),
    "closed contact": ({"probe": {"contact": 0.0}}, "probe"),
    "contact as text": ({"probe": {"contact": "weak"}}, "probe.contact"),
    "negative hopping of a lead": ({"drain": {"hopping": -2.0}}, "drain"),
    "negative disorder": ({"disorder": {"onsite": -0.1}}, "disorder"),
    "disorder as a number": ({"disorder": 0.1}, "disorder"),
    "seed as a fraction": ({"disorder": {"seed": 0.5}}, "disorder.seed"),
    "cycle as a number": ({"cycle": 3}, "cycle"),
    "cycle without a kind": ({"cycle": {"name": "phi"}}, "kind"),
    "unknown kind of cycle": ({"cycle": {"kind": "circle"}}, "kind"),
    "cycle that does not set phi": ({"cycle": {"kind": "angle", "name": "flux"}}, "phi"),
    "unknown key of a cycle": ({"cycle": {**ELLIPSE, "z": 1}}, "cycle: z"),
    "ellipse with one axis": ({"cycle": {"kind": "ellipse", "x": ["left", 0.0, 1.0]}}, "cycle: y"),
    "ellipse on one parameter": ({"cycle": {**ELLIPSE, "y": ["left", 0.0, 1.0]}}, "cycle"),
    "ellipse without a radius": ({"cycle": {**ELLIPSE, "x": ["left", 0.0]}}, "cycle: x"),
    "ellipse with text as radius": ({"cycle": {**ELLIPSE, "x": ["left", 0.0, "wide"]}}, "cycle: x"),
    "ellipse not a number": ({"cycle": {**ELLIPSE, "x": ["left", 0.0, NAN]}}, "cycle"),
    "cycle repeated never": ({"cycle": {"kind": "angle", "repeated": 0}}, "repeated"),
    "cycle repeated by a fraction": ({"cycle": {"kind": "angle", "repeated": 1.5}}, "cycle: repeated"),
    "cycle reversed by a number": ({"cycle": {"kind": "angle", "reversed": 1}}, "cycle: reversed"),
    "cycle started at a word": ({"cycle": {"kind": "angle", "started_at": "noon"}}, "cycle: started_at"),
    "cycle started nowhere": ({"cycle": {"kind": "angle", "started_at": NAN}}, "start"),
    "parameter that is no name": ({"cycle": {"kind": "angle", "name": "two words"}, "onsite": []}, "two words"),
    "parameter named like a keyword": ({"cycle": {"kind": "angle", "name": "lambda"}, "onsite": []}, "lambda"),
    "table as a number": ({"cycle": {**TABLE, "table": 3}}, "table"),
    "no table file": ({"cycle": {**TABLE, "table": "nothing.csv"}}, "nothing.csv"),
    "table that is a folder": ({"cycle": {**TABLE, "table": "."}}, "cycle"),
    "unknown curve": ({"cycle": {**TABLE, "curve": "cubic"}}, "cycle: curve"),
}


@pytest.mark.parametrize(("changes", "key"), WRONG.values(), ids=WRONG)
def test_wrong_value_is_one_line(tmp_path: Path, changes: dict[str, Any], key: str) -> None:
    # derived: the project's own promise
    line = complaint(call(written(tmp_path, device_with(**changes))), "device.toml", key, "allowed: ")
    assert not any(jargon in line for jargon in ("ArgsKwargs", "Input should", "codec"))


def test_missing_key_is_one_line(tmp_path: Path) -> None:
    content = device_with()
    del content["sites"]
    # derived: the project's own promise
    complaint(call(written(tmp_path, content)), "device.toml: sites", "missing", "allowed: ")


def test_several_mistakes_are_counted(tmp_path: Path) -> None:
    # derived: the project's own promise
    complaint(call(written(tmp_path, device_with(hopping="1", level="2", name=3))), "hopping", "(and 2 more)")


@pytest.mark.parametrize("fermi_level", [4.1, -7.5, 4.0, -4.0])
def test_fermi_level_outside_the_probe_band_is_one_line(tmp_path: Path, fermi_level: float) -> None:
    result = call(written(tmp_path, device_with(fermi_level=fermi_level)))
    # derived: the probe's band reaches from -4 to 4; at its very edges waves stand still
    complaint(result, "device.toml", "Fermi level", f"{fermi_level:g}", "allowed: ")


def test_fermi_level_on_the_band_edge_of_the_drain_is_one_line(tmp_path: Path) -> None:
    result = call(written(tmp_path, device_with(fermi_level=-1.0, drain={"hopping": 0.5})))
    # derived: the drain's band reaches from -1 to 1
    complaint(result, "device.toml", "Fermi level", "allowed: ")


EXTREME = {
    "amplitude at the end of double precision": {"onsite": [{"amplitude": 1e308, "period": 3}]},
    "hopping at the end of double precision": {"hopping": 1e308},
    "band of the probe at the end of double precision": {"probe": {"hopping": 1e308}},
    "band of the probe next to nothing": {"probe": {"hopping": 1e-300, "level": -1.2}},
    "contact next to nothing": {"probe": {"hopping": 2.0, "contact": 1e-300}},
    "period next to nothing": {"onsite": [{"amplitude": 1.0, "period": 1e-320}]},
}


@pytest.mark.filterwarnings("ignore::RuntimeWarning")
@pytest.mark.parametrize("changes", EXTREME.values(), ids=EXTREME)
def test_extreme_numbers_end_in_an_alarm_or_a_line(tmp_path: Path, changes: dict[str, Any]) -> None:
    result = call(written(tmp_path, device_with(**changes)))
    # derived: the project's own promise
    if result.exit_code != 1 or not isinstance(result.exception, SystemExit):
        complaint(result, "device.toml")


# --- recorded traces ---

BAD_TRACES = {
    "open": ("left\n0\n1\n2\n1\n", "'left' starts at 0 and ends at 1"),
    "binary": (bytes(range(256)), "cannot be read"),
    "missing number": ("left,right\n0,0\n1,\n1,1\n0,0\n", "row 2, column 'right'"),
    "short row": ("left,right\n0,0\n1\n1,1\n0,0\n", "row 2, column 'right'"),
    "long row": ("left,right\n0,0\n1,2,3\n1,1\n0,0\n", "row 2"),
    "long first row": ("left,right\n0,0,0\n1,2\n1,1\n0,0\n", "row 1"),
    "word": ("left,right\n0,0\n1,high\n1,1\n0,0\n", "row 2, column 'right'"),
    "decimal comma": ("left;right\n0,5;0\n1,5;0\n0,0;1\n0,5;0\n", "left;right"),
    "not a number": ("left,right\n0,0\n1,nan\n1,1\n0,0\n", "row 2, column 'right'"),
    "infinite": ("left,right\n0,0\n1,0\n1,inf\n0,0\n", "row 3, column 'right'"),
    "header only": ("left,right\n", "at least four rows"),
    "empty": ("", "at least four rows"),
    "too short": ("left\n0\n1\n0\n", "at least four rows"),
    "two columns of one name": ("left,left\n0,0\n1,0\n1,1\n0,0\n", "left"),
    "column that is no name": ("left gate (V)\n0\n1\n2\n0\n", "left gate (V)"),
    "column without a name": ("left,\n0,0\n1,0\n1,1\n0,0\n", "name"),
    "one endless line": (b"left\n" + b"1" * 200_000 + b"\n", "row 1"),
}


@pytest.mark.parametrize(("trace", "words"), BAD_TRACES.values(), ids=BAD_TRACES)
def test_bad_trace_is_one_line(tmp_path: Path, trace: str | bytes, words: str) -> None:
    device = written(tmp_path, device_with(cycle=TABLE, onsite=[]), trace)
    # derived: the project's own promise
    complaint(call(device), "device.toml", "cycle", "trace.csv", words, "allowed: ")


def test_trace_stands_next_to_its_device(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "elsewhere").mkdir()
    (tmp_path / "elsewhere" / "trace.csv").write_text("left\n0\n1\n2\n1\n")
    written(tmp_path, device_with(cycle=TABLE, onsite=[]))
    monkeypatch.chdir(tmp_path / "elsewhere")
    # derived: only the trace elsewhere is open
    with patch("scatterpump.verdict.judge", accepted):
        assert call("../device.toml").exit_code == 0


# --- files ---


def test_missing_file_is_one_line(tmp_path: Path) -> None:
    # derived: the project's own promise
    complaint(call(tmp_path / "nothing.toml"), "nothing.toml", "allowed: ")


def test_folder_is_no_device(tmp_path: Path) -> None:
    # derived: the project's own promise
    complaint(call(tmp_path), str(tmp_path), "allowed: ")


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (bytes(range(256)), "UTF-8"),
        (b"sites = ", "TOML"),
        (b"sites = 3\nsites = 4", "TOML"),
        (b"sites 3", "line 1"),
        (b"", "sites"),
        (b"sites = 3\n\x00", "TOML"),
        (b"sites = " + b"9" * 5000, "digits"),
        (b"sites = " + b"[" * 3000 + b"]" * 3000, "TOML"),
    ],
)
def test_file_that_is_no_device_is_one_line(tmp_path: Path, content: bytes, words: str) -> None:
    (tmp_path / "device.toml").write_bytes(content)
    # derived: the project's own promise
    complaint(call(tmp_path / "device.toml"), "device.toml", words, "allowed: ")


# --- --set ---


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ("sites", "'sites'"),
        ("=3", "'=3'"),
        ("", "''"),
        (" =3", "' =3'"),
        ("onsite.7.amplitude=1", "'7'"),
        ("onsite.-1.amplitude=1", "'-1'"),
        ("onsite.first.amplitude=1", "'first'"),
        ("onsite.1=1", "'1'"),
        ("onsite.\u00b2.amplitude=1", "onsite"),
        ("sites.x=1", "'x'"),
        ("name.0=1", "'0'"),
    ],
)
def test_bad_set_is_one_line(tmp_path: Path, change: str, words: str) -> None:
    # derived: the project's own promise
    complaint(call(written(tmp_path, device_with()), "--set", change), "--set", words, "allowed: ")


@pytest.mark.parametrize(
    ("change", "key"),
    [
        ("hoping=1", "hoping"),
        ("probe.hoping=1", "probe.hoping"),
        ("onsite.0.perod=1", "onsite.0.perod"),
        ("gate.x=1", "gate"),
        ("sites=many", "sites"),
        ("sites=", "sites"),
        ("fermi_level=nan", "fermi_level"),
        ("cycle.kind=circle", "cycle: kind"),
    ],
)
def test_set_to_something_wrong_is_one_line(tmp_path: Path, change: str, key: str) -> None:
    # derived: the project's own promise
    complaint(call(written(tmp_path, device_with()), "--set", change), "device.toml", key, "allowed: ")


# --- one line, whatever stands in the file ---

BROKEN_LINES = {
    "key": {"two\nlines": 1},
    "text": {"sites": "two\nlines"},
    "kind": {"kind": "two\nlines"},
    "amplitude": {"onsite": [{"amplitude": "two\nlines", "period": 3}]},
    "table": {"cycle": {**TABLE, "table": "two\nlines.csv"}},
    "parameter": {"cycle": {**ELLIPSE, "x": ["two\nlines", 0.0, NAN]}},
    "argument": {"cycle": {**ELLIPSE, "two\nlines": 1}},
}


@pytest.mark.parametrize("changes", BROKEN_LINES.values(), ids=BROKEN_LINES)
def test_line_breaks_do_not_reach_the_message(tmp_path: Path, changes: dict[str, Any]) -> None:
    # derived: the project's own promise
    complaint(call(written(tmp_path, device_with(**changes))), "device.toml")


def test_line_breaks_in_a_set_do_not_reach_the_message(tmp_path: Path) -> None:
    # derived: the project's own promise
    complaint(call(written(tmp_path, device_with()), "--set", "two\nlines=1"), "device.toml")


# --- any value at all ---

TEXT = st.text(st.characters(codec="utf-8", exclude_categories=("Cc", "Zl", "Zp")), max_size=8)
WORDS = st.sampled_from(["wall", "phi", "left", "angle", "ellipse", "trace.csv", "spline"])
PLAIN = st.one_of(st.booleans(), st.integers(-20, 20), st.floats(), TEXT, WORDS)
VALUES = st.recursive(
    PLAIN, lambda inner: st.lists(inner, max_size=3) | st.dictionaries(TEXT, inner, max_size=3), max_leaves=6
)
KEYS = st.one_of(st.sampled_from([*GOOD, "kind", "cycle"]), TEXT)
WAVE_KEYS = st.one_of(st.sampled_from(["amplitude", "period", "lag", "harmonic"]), TEXT)
LEAD_KEYS = st.one_of(st.sampled_from(["hopping", "level", "contact"]), TEXT)
CYCLE_KEYS = st.one_of(
    st.sampled_from(["kind", "x", "y", "name", "table", "curve", "reversed", "repeated", "started_at"]), TEXT
)
CYCLES = st.sampled_from([{"kind": "angle"}, ELLIPSE, TABLE])
ROWS = st.text("0123456789.,-+e\n#naif \"';", max_size=60)


def read_or_refused(folder: Path, content: dict[str, Any], trace: str | bytes = TRACE) -> None:
    device = written(folder, content, trace)
    with patch("scatterpump.verdict.judge", accepted):
        result = call(device)
    if result.exit_code != 0 or result.exception is not None:
        complaint(result, "device.toml", "allowed: ")


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("fuzz")


FUZZ = settings(derandomize=True, deadline=None, max_examples=100)


@FUZZ
@given(key=KEYS, value=VALUES)
def test_any_value_of_any_key(folder: Path, key: str, value: Any) -> None:
    # derived: the project's own promise
    read_or_refused(folder, device_with(**{key: value}))


@FUZZ
@given(part=st.sampled_from(["onsite", "bonds"]), key=WAVE_KEYS, value=VALUES)
def test_any_value_of_any_key_of_a_wave(folder: Path, part: str, key: str, value: Any) -> None:
    # derived: the project's own promise
    read_or_refused(folder, device_with(**{part: [{"amplitude": 1.0, "period": 3, key: value}]}))


@FUZZ
@given(part=st.sampled_from(["probe", "drain", "disorder"]), key=LEAD_KEYS, value=VALUES)
def test_any_value_of_any_key_of_a_lead(folder: Path, part: str, key: str, value: Any) -> None:
    # derived: the project's own promise
    read_or_refused(folder, device_with(**{part: {key: value}}))


@FUZZ
@given(cycle=CYCLES, key=CYCLE_KEYS, value=VALUES)
def test_any_value_of_any_key_of_a_cycle(folder: Path, cycle: dict[str, Any], key: str, value: Any) -> None:
    # derived: the project's own promise
    read_or_refused(folder, device_with(onsite=[], cycle={**cycle, key: value}))


@FUZZ
@given(trace=st.binary(max_size=60) | ROWS.map("left,right\n".__add__))
def test_any_trace(folder: Path, trace: str | bytes) -> None:
    # derived: the project's own promise
    read_or_refused(folder, device_with(onsite=[], cycle=TABLE), trace)


@FUZZ
@given(change=st.text(st.sampled_from("onsite.0123=\"'[]{},- \u00b2"), max_size=20) | TEXT)
def test_any_set(folder: Path, change: str) -> None:
    device = written(folder, device_with())
    with patch("scatterpump.verdict.judge", accepted):
        result = call(device, "--set", change)
    # derived: the project's own promise
    if result.exit_code != 0 or result.exception is not None:
        complaint(result, "allowed: ")
