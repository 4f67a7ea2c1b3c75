"""The command: ``scatterpump verdict DEVICE.toml``.

Exit codes: 0 quantised and no alarm; 1 an alarm, or no integer; 2 bad input.
"""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from importlib.resources import files
from pathlib import Path

import click

from scatterpump.errors import InputError, PumpError
from scatterpump.version import version

__all__ = ["main"]

QUANTISED, NOT_QUANTISED, BAD_INPUT = 0, 1, 2


class _Command(click.Group):
    """A group whose commands turn every `PumpError` into one line and exit code 2."""

    def invoke(self, ctx: click.Context) -> object:
        try:
            return super().invoke(ctx)
        except PumpError as error:
            click.echo(f"scatterpump: {error}", err=True)
            ctx.exit(BAD_INPUT)


@click.group(cls=_Command, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(version(), message="%(version)s")
def main() -> None:
    """Say how many charges a quantum pump carries a cycle, whether that holds, and what breaks it.

    Single-particle theory: no interactions, no decoherence.
    """


@main.command()
@click.argument("device", type=click.Path(path_type=Path))
@click.option(
    "--json", "json_file", metavar="FILE", help="Also write the verdict as JSON; '-' prints it instead of the table."
)
@click.option(
    "--set",
    "changes",
    multiple=True,
    metavar="KEY=VALUE",
    help="Change a key of the device file, e.g. sites=120 or probe.contact=0.1 or onsite.0.amplitude=2.",
)
def verdict(device: Path, json_file: str | None, changes: tuple[str, ...]) -> None:
    """Reach a verdict on the pump described in DEVICE, a TOML file.

    Exit code 0: quantised and no alarm; 1: an alarm, or no integer; 2: bad input.
    """
    from scatterpump.device_file import load_device
    from scatterpump.verdict import judge

    with _named(device), _progress("covering the cycle") as progress:
        result = judge(load_device(device, changes).pump(), progress=progress)
    if json_file == "-":
        click.echo(result.to_json())
    else:
        click.echo(result.summary())
    if json_file not in (None, "-"):
        _write(Path(str(json_file)), result.to_json() + "\n")
    raise SystemExit(QUANTISED if result.trustworthy else NOT_QUANTISED)


@main.command()
@click.argument("name", required=False)
def example(name: str | None) -> None:
    """Write the example device NAME into this folder, with the files it needs; without NAME, list them.

    Nothing that is already there is overwritten.
    """
    shelf = files("scatterpump.examples")
    known = sorted(item.name[:-5] for item in shelf.iterdir() if item.name.endswith(".toml"))
    if name is None:
        click.echo("\n".join(known))
        return
    if name not in known:
        raise InputError(f"there is no example {name!r}", allowed=", ".join(known))
    wanted = [item for item in shelf.iterdir() if item.name in (f"{name}.toml", f"{name}.csv")]
    for item in wanted:
        if Path(item.name).exists():
            raise InputError("the file is already there", allowed="a folder without it", where=item.name)
    for item in wanted:
        _write(Path(item.name), item.read_text(encoding="utf-8"))
        click.echo(item.name)


@contextmanager
def _named(device: Path) -> Iterator[None]:
    """Say which device file an error belongs to, if it does not say so itself."""
    try:
        yield
    except InputError as error:
        where = (
            error.where if error.where.startswith((str(device), "--set")) else f"{device}: {error.where}".rstrip(": ")
        )
        raise InputError(error.problem, allowed=error.allowed, where=where) from error
    except PumpError as error:
        raise InputError(str(error), where=str(device)) from error


def _write(path: Path, text: str) -> None:
    try:
        path.write_text(text, encoding="utf-8")
    except OSError as error:
        raise InputError(
            f"the file cannot be written: {error.strerror}", allowed="a writable place", where=str(path)
        ) from error


@contextmanager
def _progress(label: str) -> Iterator[Callable[[float], None]]:
    """Yield a function that shows a share done, on a terminal's standard error and after one second only."""
    from tqdm import tqdm

    with tqdm(
        total=100,
        desc=label,
        delay=1.0,
        leave=False,
        disable=not sys.stderr.isatty(),
        file=sys.stderr,
        bar_format="{desc}: {percentage:3.0f} % |{bar}| {elapsed}",
    ) as bar:

        def show(share: float) -> None:
            bar.update(100 * share - bar.n)

        yield show
