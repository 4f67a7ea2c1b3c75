"""``scatterpump status DIR``: how far all shares of a sweep are."""

from __future__ import annotations

from pathlib import Path

import click

from scatterpump.cli.common import named

__all__ = ["status"]

COMPLETE, INCOMPLETE = 0, 1


@click.command()
@click.argument("folder", metavar="DIR", type=click.Path(path_type=Path))
def status(folder: Path) -> None:
    """Say how far the sweep in DIR is, all shares together; nothing is changed.

    Exit code 0: every point is done; 1: points are missing or failed; 2: bad input.
    """
    from scatterpump.sweep.status import sweep_status

    with named(folder):
        found = sweep_status(folder)
    click.echo(found.summary())
    raise SystemExit(COMPLETE if found.done == found.points else INCOMPLETE)
