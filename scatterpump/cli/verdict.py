"""``scatterpump verdict DEVICE``: everything found out about one device."""

from __future__ import annotations

from pathlib import Path

import click

from scatterpump.cli.common import NOT_QUANTISED, QUANTISED, device_argument, named, progress_bar, set_option, write

__all__ = ["verdict"]


@click.command()
@device_argument
@click.option(
    "--json", "json_file", metavar="FILE", help="Also write the verdict as JSON; '-' prints it instead of the table."
)
@set_option
def verdict(device: Path, json_file: str | None, changes: tuple[str, ...]) -> None:
    """Reach a verdict on the pump described in DEVICE, a TOML file.

    Exit code 0: quantised and no alarm; 1: an alarm, or no integer; 2: bad input.
    """
    from scatterpump.device_file import load_device
    from scatterpump.verdict import judge

    with named(device), progress_bar("covering the cycle") as progress:
        result = judge(load_device(device, changes).pump(), progress=progress)
    if json_file == "-":
        click.echo(result.to_json())
    else:
        click.echo(result.summary())
    if json_file not in (None, "-"):
        write(Path(str(json_file)), result.to_json() + "\n")
    raise SystemExit(QUANTISED if result.trustworthy else NOT_QUANTISED)
