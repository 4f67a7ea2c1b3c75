"""The sheet of a device: what stands on it, in which units, and what the command makes of it."""

from __future__ import annotations

import json
from dataclasses import replace
from math import inf
from pathlib import Path

import pytest
from console import call

import scatterpump as sp
from scatterpump.device_file import load_device
from scatterpump.measure import Measure, with_prefix
from scatterpump.operation.sheet import Sheet

EXAMPLES = Path(__file__).parents[1] / "examples"
CONVEYOR = EXAMPLES / "conveyor.toml"
WIRE = sp.Lead(hopping=2.0)
CHAIN = sp.ModulatedChain(sites=24, fermi_level=-1.2, onsite=[sp.Wave(1.5, 3)], probe=WIRE, drain=WIRE)


@pytest.fixture(scope="module")
def sheet() -> Sheet:
    return sp.operating_sheet(CHAIN, samples=1)


def line(sheet: Sheet, label: str) -> sp.SheetLine:
    (found,) = (line for line in (*sheet.limits, *sheet.output) if line.label == label)
    return found


def test_limits_come_first_and_say_how_they_were_obtained(sheet: Sheet) -> None:
    labels = [entry.label for entry in sheet.limits]
    assert labels[:3] == ["Fermi level", "gate error", "disorder"]
    assert {entry.how for entry in sheet.limits} == {"proven", "computed", "estimated"}
    rows = sheet.summary().splitlines()
    assert rows[rows.index("") + 1].startswith("Fermi level       proven")
    assert max(map(len, rows)) <= 100  # common practice: a hundred columns


def test_window_on_the_sheet_is_the_closed_form(sheet: Sheet) -> None:
    """Gap 1 of the period-three chain is from -1.75 to -0.671165; half of it each way bears disorder."""
    # derived from the cubic of W. G. Chambers, Phys. Rev. 140, A135 (1965) (from memory)
    values = line(sheet, "Fermi level").values
    assert values["lower"] == pytest.approx(-1.75, abs=0.006)
    assert values["upper"] == pytest.approx(-0.671165, abs=0.006)
    assert line(sheet, "disorder").values["best_width"] == pytest.approx(1.078835, abs=0.01)
    assert line(sheet, "gate error").values["change"] == pytest.approx(1.2 - 0.671165, abs=0.006)
    (here,) = (p for p in sheet.plateaus if p.lower < -1.2 < p.upper)
    assert (here.number, line(sheet, "charges a cycle").values["number"]) == (1, 1)


def test_shortest_length_is_told_in_sites(sheet: Sheet) -> None:
    found = line(sheet, "shortest")
    assert f"{3 * found.values['cells']} sites" in found.text  # three sites a cell


def test_what_is_not_modelled_stands_on_it(sheet: Sheet) -> None:
    text = " ".join(sheet.summary().split())
    for word in ("Single-particle", "no interaction", "no charging energy", "no phonons"):
        assert word in text


def test_json_is_plain_and_whole(sheet: Sheet) -> None:
    found = json.loads(sheet.to_json())
    assert found["trustworthy"] is True
    assert [entry["label"] for entry in found["limits"]] == [entry.label for entry in sheet.limits]
    assert found["plateaus"][0]["lower"] is None  # below all bands: minus infinity
    assert found["verdict"]["winding"]["number"] == 1


def test_closed_gap_leaves_the_plateaus_to_move_to() -> None:
    sheet = sp.operating_sheet(replace(CHAIN, sites=6, fermi_level=0.3), samples=0)
    assert not sheet.trustworthy
    assert sheet.limits == ()
    assert {p.number for p in sheet.plateaus} >= {1, -1}
    assert "\n\nALARM" in sheet.summary()  # before anything else


def test_error_is_checked() -> None:
    with pytest.raises(sp.InputError, match="between 0 and 1/2"):
        sp.operating_sheet(CHAIN, error=0.7)


# ---- units -----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("value", "text"),
    [(1.6021766e-10, "160.2 p"), (999.96, "1 k"), (0.0, "0 "), (-2.5e6, "-2.5 M"), (4e-7, "400 n")],
)
def test_prefixes_of_the_international_system(value: float, text: str) -> None:
    # BIPM, The International System of Units, 9th ed. (2019), table 7 (from memory)
    assert with_prefix(value, "A") == text + "A"


def test_energies_in_their_units() -> None:
    assert Measure(sp.Units(1.602176634e-22, 5e-9)).energy(0.4412345) == "0.4412 meV"
    assert Measure(sp.Units(6.62607015e-34, 1e-9)).energy(3900.0) == "3900 (h x 3.9 kHz)"  # h of the SI, exact
    assert Measure(None).energies(-inf, 2.0) == "below 2"
    assert Measure(sp.Units(1.602176634e-22, 5e-9)).length(64) == "320 nm"


@pytest.mark.parametrize("units", [None, sp.Units(1.602176634e-22, 5e-9), sp.Units(6.62607015e-34, 1e-9)])
def test_sheet_says_once_that_its_energies_have_no_unit(sheet: Sheet, units: sp.Units | None) -> None:
    here = replace(sheet, measure=Measure(units))
    assert here.summary().count("the system's own unit") == (units is None)
    wanted = "the system's own unit" if units is None else "meV" if units.length == 5e-9 else "6.626e-34 J"
    assert json.loads(here.to_json())["unit_of_energy"] == wanted


def test_plateau_of_estimated_bounds_is_not_called_proven(sheet: Sheet) -> None:
    (own,) = (plateau for plateau in sheet.plateaus if plateau.lower < -1.2 < plateau.upper)
    assert own.exact and own.how == "proven"
    here = replace(sheet, plateaus=(replace(own, exact=False),))
    (row,) = (row for row in here.summary().splitlines() if row.startswith("plateaus"))
    assert row.split()[1] == "estimated"


# ---- the command -----------------------------------------------------------------------------------------------------


def test_command_from_device_file_to_sheet(tmp_path: Path) -> None:
    out = tmp_path / "sheet.json"
    result = call("window", CONVEYOR, "--set", "length=480 nm", "--samples", 0, "--hertz", 1e8, "--json", out)
    assert result.exit_code == 0, result.output
    found = json.loads(out.read_text())
    lines = {line["label"]: line for line in (*found["limits"], *found["output"])}
    assert lines["charge at rest"]["values"]["charge"] == pytest.approx(1, abs=1e-6)
    # e times 100 MHz: BIPM, The International System of Units, 9th ed. (2019) (citation from memory)
    assert lines["current"]["values"]["ampere"] == pytest.approx(16.02176634e-12, rel=1e-6)
    assert lines["temperature"]["how"] == lines["speed"]["how"] == "estimated"
    assert "meV" in result.stdout and "nm" in result.stdout
    assert found["verdict"]["winding"]["number"] == found["verdict"]["chern"] == 1
    # a well holds one level more in each window: D. J. Thouless, Phys. Rev. B 27, 6083 (1983)
    assert [plateau["number"] for plateau in found["plateaus"]] == [0, 1, 2]


def test_command_on_a_hard_wall_is_exit_code_one(tmp_path: Path) -> None:
    path = tmp_path / "chain.toml"
    path.write_text('sites = 6\nonsite = [{amplitude = 1.5, period = 3}]\nprobe = {hopping = 2.0}\ndrain = "wall"\n')
    result = call("window", path, "--set", "fermi_level=-2.6", "--samples", 0, "--json", "-")
    assert result.exit_code == 1
    assert json.loads(result.stdout)["trustworthy"] is False


@pytest.mark.parametrize(
    ("arguments", "word"),
    [(("--error", 2), "error is 2"), (("--between", 2, 1), "the lower one first"), (("--set", "depth=3 kg"), "depth")],
)
def test_command_says_what_it_cannot_use(arguments: tuple[object, ...], word: str, tmp_path: Path) -> None:
    path = tmp_path / "device.toml"
    path.write_text(CONVEYOR.read_text().replace('"960 nm"', '"160 nm"'))
    result = call("window", path, "--samples", 0, *arguments)
    assert result.exit_code == 2
    assert len(result.stderr.splitlines()) == 1
    assert word in result.stderr


def test_file_of_the_example_is_the_device_it_says() -> None:
    device = load_device(CONVEYOR)
    assert isinstance(device, sp.GatedChannel)
    assert (device.mass, device.length, device.depth) == (0.19, 960.0, 30.0)
