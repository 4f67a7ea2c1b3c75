"""``scatterpump inspect DEVICE``: the device as the solver sees it, as text and as a drawing."""

from __future__ import annotations

from pathlib import Path

import click

from scatterpump.cli.common import device_argument, named, set_option

__all__ = ["inspect"]


@click.command()
@device_argument
@click.option("-o", "target", metavar="FILE", help="Write the drawing to FILE, ending in .png, .pdf or .svg.")
@click.option("--text", is_flag=True, help="Print the table only, without a drawing.")
@set_option
def inspect(device: Path, target: str | None, text: bool, changes: tuple[str, ...]) -> None:
    """Show the pump described in DEVICE, a TOML file, as the solver sees it.

    A table of sites, bonds, leads, layers and what changes along the cycle is printed; the drawing opens in a window,
    or goes to the file named with -o.

    Exit code 0: shown; 2: bad input, or no display to open a window on.
    """
    from scatterpump.anatomy.layout import inspect as look_at
    from scatterpump.device_file import load_device
    from scatterpump.figures.device import draw_device
    from scatterpump.figures.output import show

    with named(device):
        layout = look_at(load_device(device, changes).pump())
    click.echo(layout.summary())
    if target is not None:
        layout.draw(target)
    elif not text:
        show(lambda figure: draw_device(layout, figure))
