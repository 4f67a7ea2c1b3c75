"""``scatterpump draw DEVICE|RESULT``: pictures of one device on a sheet, or the map of a gathered sweep."""

from __future__ import annotations

from pathlib import Path

import click

from scatterpump.cli.common import INTERRUPTED, device_argument, named, progress_bar, set_option
from scatterpump.errors import InputError

__all__ = ["draw"]

NAMES = ("circle", "phase", "levels", "density", "potential", "eigenphases", "parameters", "leakage")


def _completed(context: click.Context, parameter: click.Parameter, incomplete: str) -> list[str]:
    return [name for name in NAMES if name.startswith(incomplete)]


@click.command()
@device_argument
@click.option(
    "--what",
    "names",
    multiple=True,
    metavar="NAME",
    shell_complete=_completed,
    help=f"Which picture, may be given several times: {', '.join(NAMES)}. Without it, all that the device has.",
)
@click.option("-o", "target", metavar="FILE", required=True, help="Where to: a file ending in .png, .pdf or .svg.")
@set_option
def draw(device: Path, names: tuple[str, ...], target: str, changes: tuple[str, ...]) -> None:
    """Draw the pump described in DEVICE, a TOML file, into FILE. No display is needed.

    A netCDF file (.nc) that 'scatterpump gather' wrote of a sweep over two axes is drawn as the map of its integers.

    Ctrl-C leaves the pictures that are finished.

    Exit code 0: drawn; 2: bad input; 130: interrupted.
    """
    from scatterpump.device_file import load_device
    from scatterpump.figures import catalogue
    from scatterpump.figures.output import check_ending, save
    from scatterpump.figures.sheet import draw_sheet
    from scatterpump.portrait.album import Album

    check_ending(target)
    if device.suffix == ".nc":
        _draw_map(device, target, names or changes)
        return
    wanted = catalogue.named(names or catalogue.PICTURES)
    with named(device), progress_bar("drawing") as progress:
        album = Album(load_device(device, changes).pump())
        found = catalogue.collect(album, wanted, progress=progress)
    if names and found.missing and not found.stopped:
        raise InputError(": ".join(found.missing[0]), allowed="another --what", where=str(device))
    for reason in dict.fromkeys(reason for _, reason in found.missing):
        same = ", ".join(name for name, why in found.missing if why == reason)
        click.echo(f"left out {same}: {reason}", err=True)
    if found.finished:
        save(lambda figure: draw_sheet(found.finished, figure), target)
        click.echo(f"{target}: {', '.join(picture.name for picture, _ in found.finished)}")
    if found.stopped:
        raise SystemExit(INTERRUPTED)
    if not found.finished:
        raise InputError(
            "nothing could be drawn", allowed="a device that 'scatterpump audit' passes", where=str(device)
        )


def _draw_map(file: Path, target: str, asked: tuple[str, ...]) -> None:
    """Draw what `gather` wrote."""
    from scatterpump.figures.integers import integer_map
    from scatterpump.figures.output import save

    if asked:
        raise InputError(
            "a sweep's result has one picture, and no keys", allowed="no --what and no --set", where=str(file)
        )
    if not file.is_file():
        raise InputError("there is no such file", allowed="a file that gather wrote", where=str(file))
    try:
        import xarray

        with xarray.open_dataset(file, engine="h5netcdf") as data:
            save(lambda figure: integer_map(data, figure.subplots()), target)
    except ImportError as error:
        raise InputError(
            f"{error.name or 'xarray'} is not installed", allowed='pip install "scatterpump[store]"', where=str(file)
        ) from error
    except (OSError, ValueError) as error:
        raise InputError(
            "the file is no netCDF that can be read", allowed="a file that gather wrote", where=str(file)
        ) from error
    click.echo(f"{target}: map")
