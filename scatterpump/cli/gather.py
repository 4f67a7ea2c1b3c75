"""``scatterpump gather DIR -o map.nc``: all results of a sweep in one netCDF file."""

from __future__ import annotations

from pathlib import Path

import click

from scatterpump.cli.common import named

__all__ = ["gather"]

COMPLETE, INCOMPLETE = 0, 1


@click.command()
@click.argument("folder", metavar="DIR", type=click.Path(path_type=Path))
@click.option("-o", "--output", required=True, type=click.Path(path_type=Path), help="The netCDF file to write.")
def gather(folder: Path, output: Path) -> None:
    """Merge the results in DIR, which 'scatterpump sweep' wrote, to one netCDF file.

    Exit code 0: every point is done; 1: the file is written, but points are missing or failed; 2: bad input.
    """
    from scatterpump.sweep.gather import gather_sweep, write_netcdf

    with named(folder):
        data = gather_sweep(folder)
        write_netcdf(data, output)
    done, failed = int((data.status == 1).sum()), int((data.status == -1).sum())
    missing = data.status.size - done - failed
    axes = ", ".join(f"{name} {data.sizes[name]}" for name in data.status.dims)
    click.echo(f"{output}: {done} points done, {failed} failed, {missing} missing ({axes})")
    raise SystemExit(COMPLETE if done == data.status.size else INCOMPLETE)
