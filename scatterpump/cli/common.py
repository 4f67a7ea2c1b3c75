"""What several subcommands share: exit codes, arguments, files, progress."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

import click

from scatterpump.errors import InputError, PumpError

__all__ = [
    "BAD_INPUT",
    "INTERRUPTED",
    "NOT_QUANTISED",
    "QUANTISED",
    "device_argument",
    "named",
    "progress_bar",
    "set_option",
    "write",
]

QUANTISED, NOT_QUANTISED, BAD_INPUT = 0, 1, 2
INTERRUPTED = 130  # as shells say it of Ctrl-C

device_argument = click.argument("device", type=click.Path(path_type=Path))
set_option = click.option(
    "--set",
    "changes",
    multiple=True,
    metavar="KEY=VALUE",
    help="Change a key of the device file, e.g. sites=120 or probe.contact=0.1 or onsite.0.amplitude=2.",
)


@contextmanager
def named(device: Path) -> Iterator[None]:
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


def write(path: Path, text: str) -> None:
    try:
        path.write_text(text, encoding="utf-8")
    except OSError as error:
        raise InputError(
            f"the file cannot be written: {error.strerror}", allowed="a writable place", where=str(path)
        ) from error


@contextmanager
def progress_bar(label: str) -> Iterator[Callable[[float], None]]:
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
