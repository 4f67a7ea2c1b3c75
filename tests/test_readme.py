"""What the README says is what happens: its commands run, its Python runs, its output is the output.

Every fenced block says what it is by its language: `python` is run in a folder with the examples, lines of `sh` that
start with `scatterpump` are run one after the other in an empty one, `toml` is a device or a plan; `text` is shown
only.
"""

from __future__ import annotations

import re
import shlex
import shutil
from pathlib import Path

import pytest
from click.testing import CliRunner

from scatterpump.cli import main
from scatterpump.cli.draw import NAMES
from scatterpump.device_file import load_device
from scatterpump.figures.catalogue import PICTURES
from scatterpump.sweep.plan_file import load_plan

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")
BLOCKS = re.findall(r"^```(\w*)\n(.*?)^```$", README, flags=re.MULTILINE | re.DOTALL)
LARGEST = 200 * 1024  # bytes of a binary file in the repository


def blocks(language: str) -> list[str]:
    return [content for name, content in BLOCKS if name == language]


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder with the examples in it and in `examples`, to run things in."""
    for place in (tmp_path, tmp_path / "examples"):
        place.mkdir(exist_ok=True)
        for file in (ROOT / "examples").iterdir():
            if file.suffix in (".toml", ".csv", ".py"):
                shutil.copy(file, place)
    monkeypatch.chdir(tmp_path)
    return tmp_path


def test_all_kinds_of_blocks_are_met() -> None:
    # derived: the tests below are not empty
    assert len(blocks("python")) >= 3
    assert len(blocks("sh")) >= 1
    assert len(blocks("toml")) >= 1


@pytest.mark.parametrize("code", blocks("python"))
def test_python_runs(folder: Path, code: str) -> None:
    exec(compile(code, "README.md", "exec"), {"__name__": "readme"})


@pytest.mark.parametrize("block", blocks("sh"))
def test_commands_run(folder: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, block: str) -> None:
    empty = tmp_path / "empty"
    empty.mkdir()
    monkeypatch.chdir(empty)
    commands = [shlex.split(line)[1:] for line in block.splitlines() if line.startswith("scatterpump ")]
    assert commands
    for arguments in commands:
        result = CliRunner().invoke(main, arguments)
        # derived: all of them are shown as what works
        assert (result.exit_code, result.stderr) == (0, ""), (arguments, result.output)
        if "-o" in arguments:
            assert Path(arguments[arguments.index("-o") + 1]).stat().st_size > 10_000


def test_first_output_is_the_output(folder: Path) -> None:
    (line, *_), (shown, *_) = blocks("")[0].splitlines(), blocks("text")
    arguments = shlex.split(line)
    assert arguments[:3] == ["uv", "run", "scatterpump"]
    result = CliRunner().invoke(main, arguments[3:])
    # derived: the README shows it, figures by figure
    assert result.output == shown


@pytest.mark.parametrize("content", blocks("toml"))
def test_device_and_plan_files_load(folder: Path, content: str) -> None:
    file = folder / "written.toml"
    file.write_text(content)
    if "[sweep]" in content:
        assert load_plan(file).size > 1
    else:
        assert load_device(file).pump().finalized is not None


def test_synopsis_names_every_command_and_option() -> None:
    (synopsis,) = (block for block in blocks("text") if block.startswith("scatterpump "))
    for name, command in main.commands.items():
        lines = [line for line in synopsis.splitlines() if line.startswith(f"scatterpump {name}")]
        options = [parameter.opts for parameter in command.params if parameter.opts[0].startswith("-")]
        # derived: nothing is left out
        assert lines, name
        assert [names for names in options if not any(option in " ".join(lines) for option in names)] == [], name


def test_help_lists_the_pictures_there_are() -> None:
    # derived
    assert tuple(PICTURES) == NAMES
    shown = " ".join(CliRunner().invoke(main, ["draw", "--help"]).output.split())
    assert ", ".join(PICTURES) in shown
    assert [name for name in PICTURES if f"`{name}`" not in README] == []


@pytest.mark.parametrize(
    ("words", "expected"), [("scatterpump re", "report"), ("scatterpump draw x --what pa", "parameters")]
)
def test_shell_completes(words: str, expected: str) -> None:
    count = len(words.split()) - 1
    environment = {"_SCATTERPUMP_COMPLETE": "zsh_complete", "COMP_WORDS": words, "COMP_CWORD": str(count)}
    result = CliRunner().invoke(main, [], env=environment, prog_name="scatterpump")
    # derived: click's own completion, as the README says how to switch it on
    assert expected in result.output.split()
    assert "_SCATTERPUMP_COMPLETE=bash_source" in README


def test_pictures_exist_and_are_small() -> None:
    links = re.findall(r"!\[[^\]]*\]\(([^)]+)\)", README)
    # derived: the gallery draws them all, and none of them burdens a clone
    assert links
    gallery = (ROOT / "examples" / "gallery.py").read_text()
    for link in links:
        assert (ROOT / link).stat().st_size <= LARGEST
        assert Path(link).name in gallery
