"""``scatterpump audit DEVICE``: all checks that need no proof, for a geometry under construction."""

from __future__ import annotations

import json
from pathlib import Path

import click

from scatterpump.cli.common import NOT_QUANTISED, QUANTISED, named, set_option, write
from scatterpump.errors import InputError

__all__ = ["audit"]

CATALOGUE = "?"  # stands for --explain without a name


@click.command()
@click.argument("device", type=click.Path(path_type=Path), required=False)
@click.option("--strict", is_flag=True, help="Exit with 1 on a caution as well, for job scripts.")
@click.option(
    "--json", "json_file", metavar="FILE", help="Also write the findings as JSON; '-' prints it instead of the table."
)
@click.option(
    "--explain",
    metavar="[NAME]",
    is_flag=False,
    flag_value=CATALOGUE,
    help="Say what a check asks, why, and what to do; without NAME, list all checks.",
)
@set_option
def audit(
    device: Path | None, strict: bool, json_file: str | None, explain: str | None, changes: tuple[str, ...]
) -> None:
    """Look for everything that would make the number of DEVICE, a TOML file, meaningless.

    Quick: what is said about r and the gap holds at the phases sampled; 'scatterpump verdict' proves it.

    Exit code 0: no alarm; 1: an alarm, or with --strict a caution; 2: bad input.
    """
    if explain is not None:
        _explain(explain)
        return
    if device is None:
        raise InputError("no device is named", allowed="a device file, or --explain", where="audit")
    from scatterpump.audit.examine import examine
    from scatterpump.device_file import load_device
    from scatterpump.summary import summarise_audit

    with named(device):
        pump = load_device(device, changes).pump()
        report = examine(pump, quick=True)
    content = json.dumps({"name": pump.name, **report.to_dict()}, indent=2, allow_nan=False)
    click.echo(content if json_file == "-" else summarise_audit(report, pump.name, pump.fermi_level, pump.units))
    if json_file not in (None, "-"):
        write(Path(str(json_file)), content + "\n")
    sound = report.passed and not (strict and report.cautions)
    raise SystemExit(QUANTISED if sound else NOT_QUANTISED)


def _explain(name: str) -> None:
    from scatterpump.audit.catalogue import explain, listed

    click.echo(listed() if name == CATALOGUE else explain(name))
