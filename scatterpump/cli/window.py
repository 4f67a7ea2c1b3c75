"""``scatterpump window DEVICE``: what a laboratory asks about one device, on one sheet."""

from __future__ import annotations

from pathlib import Path

import click

from scatterpump.cli.common import NOT_QUANTISED, QUANTISED, device_argument, named, progress_bar, set_option, write

__all__ = ["window"]


@click.command()
@device_argument
@click.option("--error", type=float, default=1e-6, show_default=True, help="Allowed deviation from the integer.")
@click.option(
    "--between",
    type=float,
    nargs=2,
    metavar="LOW HIGH",
    help="Range of Fermi levels to find plateaus in; without it, the level's own and its neighbours.",
)
@click.option("--samples", type=click.IntRange(0, 1000), default=3, show_default=True, help="Samples of disorder.")
@click.option("--hertz", type=float, help="Cycles a second; then the sheet tells the current.")
@click.option("--compute", is_flag=True, help="Compute temperature, speed and current, not estimate them: minutes.")
@click.option(
    "--json", "json_file", metavar="FILE", help="Also write the sheet as JSON; '-' prints it instead of the table."
)
@set_option
def window(
    device: Path,
    error: float,
    between: tuple[float, float] | None,
    samples: int,
    hertz: float | None,
    compute: bool,
    json_file: str | None,
    changes: tuple[str, ...],
) -> None:
    """Say in which window of Fermi level, disorder, drive and length the pump in DEVICE works.

    Each limit comes with how it was obtained: proven, computed or estimated.  Single-particle theory.

    Exit code 0: quantised and no alarm; 1: an alarm, or no integer; 2: bad input.
    """
    from scatterpump.device_file import load_device
    from scatterpump.operation.sheet import operating_sheet

    with named(device), progress_bar("looking at each limit") as progress:
        sheet = operating_sheet(
            load_device(device, changes),
            error=error,
            between=between,
            samples=samples,
            hertz=hertz,
            compute=compute,
            progress=progress,
        )
    if json_file == "-":
        click.echo(sheet.to_json())
    else:
        click.echo(sheet.summary())
    if json_file not in (None, "-"):
        write(Path(str(json_file)), sheet.to_json() + "\n")
    raise SystemExit(QUANTISED if sheet.trustworthy else NOT_QUANTISED)
