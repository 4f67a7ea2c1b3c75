"""``scatterpump report DEVICE``: verdict, margins, findings and pictures on one to three pages."""

from __future__ import annotations

from pathlib import Path

import click

from scatterpump.cli.common import (
    INTERRUPTED,
    NOT_QUANTISED,
    QUANTISED,
    device_argument,
    named,
    progress_bar,
    set_option,
)

__all__ = ["report"]


@click.command()
@device_argument
@click.option("-o", "target", metavar="FILE", required=True, help="Where to: a file ending in .pdf.")
@set_option
def report(device: Path, target: str, changes: tuple[str, ...]) -> None:
    """Write a report on the pump described in DEVICE, a TOML file: three pages, no display is needed.

    It holds the verdict and its margins, every finding, the pictures, the device file, and how to get it all again.
    Ctrl-C while pictures are made leaves a report with those that are finished.

    Exit code 0: quantised and no alarm; 1: an alarm, or no integer; 2: bad input; 130: interrupted.
    """
    from scatterpump.device_file import load_device
    from scatterpump.report import make_report, require_pdf, source_of

    require_pdf(target)
    with named(device), progress_bar("writing the report") as progress:
        description = load_device(device, changes)
        source = source_of(device, description, changes, target)
        result = make_report(description.pump(), source=source, progress=progress)
        result.write(target)
    (number,) = (line for line in result.verdict.summary().splitlines() if line.startswith("charges a cycle"))
    click.echo(f"{target}: {number}")
    if result.pictures.stopped:
        click.echo(f"interrupted; not drawn: {', '.join(name for name, _ in result.pictures.missing)}", err=True)
        raise SystemExit(INTERRUPTED)
    raise SystemExit(QUANTISED if result.verdict.trustworthy else NOT_QUANTISED)
