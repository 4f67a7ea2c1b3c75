"""A Python file as a device: it runs, what it returns is judged, and whatever goes wrong is told in one line."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner, Result
from hypothesis import example, given, settings
from hypothesis import strategies as st

from scatterpump.cli import main
from scatterpump.device_file import load_device
from scatterpump.errors import InputError

CODE = """
import kwant
from math import pi
import numpy as np
import scatterpump as sp


def system(sites, depth=1.5, onsite=None, leads=2):
    lattice, found = kwant.lattice.chain(norbs=1), kwant.Builder()
    def wave(site, phi):
        return depth * np.cos(2 * pi * site.tag[0] / 3 - phi)
    found[(lattice(x) for x in range(sites))] = onsite or wave
    found[lattice.neighbors()] = -1
    wire = kwant.Builder(kwant.TranslationalSymmetry((-1,)))
    wire[lattice(0)], wire[lattice.neighbors()] = 0, -2
    for lead in (wire, wire.reversed())[:leads]:
        found.attach_lead(lead)
    return found


def pump(sites):
    return sp.Pump(system(sites), sp.Cycle.angle(), -1.2, lead_names=("source", "sink"), name="mine")


def broken(sites):
    def onsite(site, phi):
        return 1 / (site.tag[0] - 7) if phi > 3 else 0.0
    return system(sites, onsite=onsite)


def not_finite(sites):
    return system(sites, onsite=lambda site, phi: float("nan"))


def too_few(sites):
    raise ValueError(f"{sites} sites are too few")


def nothing(sites):
    return None


def lonely(sites):
    return system(sites, leads=0)


def endless(sites):
    return kwant.Builder(kwant.TranslationalSymmetry((-1,)))


def leaves(sites):
    raise SystemExit(0)


def unset(sites):
    return system(sites, onsite=lambda site, phi, gate: gate)
"""


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("python")
    (place / "mine.py").write_text(CODE)
    return place


def device(folder: Path, function: str = "system", **changes: Any) -> Path:
    content = {"kind": "python", "file": "mine.py", "function": function, "fermi_level": -1.2, **changes}
    content.setdefault("arguments", {"sites": 36})
    lines = [f"{key} = {toml(value)}" for key, value in content.items() if value is not None]
    path = folder / "device.toml"
    path.write_text("\n".join(lines))
    return path


def toml(value: Any) -> str:
    if isinstance(value, dict):
        return "{" + ", ".join(f"{key} = {toml(item)}" for key, item in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(map(toml, value)) + "]"
    return json.dumps(value) if isinstance(value, str | bool) else repr(value)


def verdict(path: Path, *arguments: str) -> Result:
    return CliRunner().invoke(main, ["verdict", str(path), *arguments])


def complaint(result: Result) -> str:
    assert isinstance(result.exception, SystemExit), repr(result.exception)
    assert (result.exit_code, result.stdout) == (2, "")
    assert result.stderr.count("\n") == 1
    return result.stderr


def test_builder_gets_a_verdict(folder: Path) -> None:
    result = verdict(device(folder), "--json", "-")
    found = json.loads(result.stdout)
    # D. J. Thouless et al., Phys. Rev. Lett. 49, 405 (1982): t = +1 in the lowest gap
    assert (result.exit_code, found["winding"]["number"], found["chern"], found["name"]) == (0, 1, 1, "system")


def test_pump_keeps_what_the_file_does_not_say(folder: Path) -> None:
    pump = load_device(device(folder, "pump", fermi_level=None)).pump()
    assert (pump.fermi_level, pump.name, pump.route) == (-1.2, "mine", "from source to sink")


def test_file_overrides_what_the_pump_says(folder: Path) -> None:
    path = device(folder, "pump", fermi_level=1.2, name="upper", probe="sink", drain="source")
    pump = load_device(path).pump()
    assert (pump.fermi_level, pump.name, pump.probe, pump.drain) == (1.2, "upper", 1, 0)
    assert load_device(path, ["fermi_level=-1.1", "arguments.sites=9"]).pump().finalized.graph.num_nodes == 9


def test_one_lead_is_a_hard_wall(folder: Path) -> None:
    path = device(folder, arguments={"sites": 12, "leads": 1})
    assert load_device(path).pump().drain is None


def test_file_sees_its_neighbours_and_is_never_stale(folder: Path) -> None:
    (folder / "near.py").write_text("value = 5\n")
    other = folder / "other.py"
    for length in (5, 7):
        other.write_text(f"from near import value\nfrom mine import system\ndef make():\n    return system({length})\n")
        path = device(folder, "make", file="other.py", arguments={})
        assert load_device(path).pump().finalized.graph.num_nodes == length


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"file": "absent.py"}, ("absent.py", "cannot be read")),
        ({"file": "."}, ("cannot be read",)),
        ({"function": "pumpe"}, ("no function 'pumpe'", "pump")),
        ({"function": "too_few"}, ("too_few(sites=36)", "36 sites are too few", "of mine.py")),
        ({"function": "nothing"}, ("of type NoneType", "no kwant system")),
        ({"function": "lonely"}, ("no leads",)),
        ({"function": "endless"}, ("repeats without end",)),
        ({"function": "leaves"}, ("SystemExit",)),
        ({"function": "unset"}, ("gate",)),
        ({"function": "broken"}, ("phi = ", "ZeroDivisionError", "onsite", "mine.py")),
        ({"function": "not_finite"}, ("not finite",)),
        ({"arguments": {"site": 3}}, ("system(site=3)", "TypeError")),
        ({"arguments": 3}, ("arguments", "table")),
        ({"fermi_level": None}, ("Fermi level is missing",)),
        ({"probe": 2}, ("probe is lead 2",)),
        ({"probe": "left"}, ("no lead is named 'left'",)),
        ({"probe": 1, "drain": 1}, ("both lead 1",)),
        ({"lead_names": ["a"]}, ("named 'a'",)),
        ({"fucntion": "system"}, ("fucntion", "function")),
        ({"cycle": {"kind": "angle", "name": "theta"}}, ("phi",)),
    ],
    ids=lambda value: str(next(iter(value))) if isinstance(value, dict) else "",
)
def test_what_goes_wrong_is_told_in_one_line(folder: Path, changes: dict[str, Any], words: tuple[str, ...]) -> None:
    told = complaint(verdict(device(folder, **changes)))
    assert all(word in told for word in words), told
    assert "Traceback" not in told


@pytest.mark.parametrize(
    ("code", "word"),
    [
        ("def f(:", "SyntaxError"),
        ("1 / 0", "line 1 of bad.py"),
        ("import absent_module", "ModuleNotFoundError"),
        ("\0", ""),
    ],
)
def test_file_that_does_not_run_is_told(folder: Path, code: str, word: str) -> None:
    (folder / "bad.py").write_text(code)
    assert word in complaint(verdict(device(folder, file="bad.py")))


# --- fuzzing ---

VALUES = st.one_of(
    st.none(),
    st.booleans(),
    st.integers(-3, 30),
    st.floats(),
    st.text(max_size=5),
    st.lists(st.integers(-1, 3), max_size=3),
)
KEYS = ["kind", "file", "function", "fermi_level", "probe", "drain", "lead_names", "name", "cycle", "arguments"]


@given(changes=st.dictionaries(st.sampled_from(KEYS), VALUES, max_size=3), sites=st.integers(-1, 9))
@settings(derandomize=True, deadline=None, max_examples=60)
def test_no_device_file_ends_in_a_traceback(folder: Path, changes: dict[str, Any], sites: int) -> None:
    path = device(folder, **{"arguments": {"sites": sites}, **changes})
    result = verdict(path)
    assert result.exception is None or isinstance(result.exception, SystemExit), repr(result.exception)
    assert result.exit_code in (0, 1, 2)


SLIDING = "1.5 * np.cos(2 * np.pi * site.tag[0] / 3 - phi)"
RETURNS = [
    SLIDING,
    "1.0",
    "0",
    "phi",
    "np.nan",
    "np.inf",
    "1j * phi",
    "'text'",
    "None",
    "1e300 * phi",
    "[1, 2]",
    "np.cos(phi)",
    "np.cos(phi) if phi < 3 else 'text'",
    "1 / (site.tag[0] - 2)",
    "np.ones((2, 2))",
    "np.sqrt(phi - 3)",
]
CYCLES = ["sp.Cycle.angle()", "sp.Cycle(lambda p: {'phi': p % 2})", "sp.Cycle(lambda p: {'phi': 1 / (p - 1)})"]
CYCLES += ["sp.Cycle(lambda p: {'phi': 1.0 if p < 3 else 'text'})", "sp.Cycle(lambda p: {} if p > 2 else {'phi': p})"]
CYCLES += ["sp.Cycle(lambda p: p)", "3"]


@given(
    onsite=st.sampled_from(RETURNS),
    hopping=st.sampled_from(["-1", "0", "np.exp(1j * phi)", "np.nan", "'text'", "1e-300", "phi"]),
    cycle=st.sampled_from(CYCLES),
    level=st.sampled_from([-1.2, 0.0, 4.0, 1e308, 5e-324]),
)
@settings(derandomize=True, deadline=None, max_examples=12)
@example(onsite=SLIDING, hopping="-1", cycle=CYCLES[0], level=-1.2)
@example(onsite=SLIDING, hopping="-1 - 0.1 * np.cos(phi)", cycle=CYCLES[0], level=-1.2)
def test_no_system_ends_in_a_traceback_or_a_hollow_verdict(
    folder: Path, onsite: str, hopping: str, cycle: str, level: float
) -> None:
    """A trustworthy verdict has no number in it that is not finite, but for the edges of windows without an end."""
    (folder / "any.py").write_text(
        "import warnings\nwarnings.simplefilter('ignore')\n"
        "import numpy as np\nimport kwant\nimport scatterpump as sp\nfrom mine import system\n"
        "def make():\n"
        f"    found = system(12, onsite=lambda site, phi: {onsite})\n"
        "    chain = kwant.lattice.chain(norbs=1)\n"
        f"    found[chain(2), chain(3)] = lambda to, fro, phi: {hopping}\n"
        f"    return sp.Pump(found, {cycle}, {level!r})\n"
    )
    result = verdict(device(folder, "make", file="any.py", arguments={}, fermi_level=None), "--json", "-")
    assert result.exception is None or isinstance(result.exception, SystemExit), repr(result.exception)
    assert result.exit_code in (0, 1, 2)
    if (onsite, hopping, cycle, level) == (SLIDING, "-1", CYCLES[0], -1.2):
        assert result.exit_code == 0  # so that what follows is looked at
    if result.exit_code == 0:
        found = json.loads(result.stdout)
        winding = found["winding"]
        assert isinstance(winding["number"], int)
        assert None not in (winding["turns"], winding["leak"]["bound"], winding["smallest_reflection"])
        assert all(finding["value"] is not None for finding in found["audit"]["findings"])


def test_errors_of_a_device_are_of_one_family(folder: Path) -> None:
    with pytest.raises(InputError, match="mine.py"):
        load_device(device(folder, "too_few")).pump()
