"""``scatterpump example``: device files to start from."""

from __future__ import annotations

from importlib.resources import files
from pathlib import Path

import click

from scatterpump.cli.common import write
from scatterpump.errors import InputError

__all__ = ["example"]


@click.command()
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
    wanted = [item for item in shelf.iterdir() if item.name in (f"{name}.toml", f"{name}.csv", f"{name}.py")]
    for item in wanted:
        if Path(item.name).exists():
            raise InputError("the file is already there", allowed="a folder without it", where=item.name)
    for item in wanted:
        write(Path(item.name), item.read_text(encoding="utf-8"))
        click.echo(item.name)
