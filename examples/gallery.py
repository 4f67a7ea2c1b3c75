"""Draw every picture of the README.

Run it with ``python examples/gallery.py``; it writes PNG files beside itself, or into the folder named after it.
"""

import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import scatterpump as sp
from scatterpump.figures.catalogue import PICTURES, collect
from scatterpump.figures.output import save
from scatterpump.figures.sheet import draw_sheet
from scatterpump.portrait.album import Album

HERE = Path(__file__).parent


def sheet(device: str, *names: str) -> Callable[[Any], None]:
    """Return what draws the pictures `names` of an example device into a figure."""
    album = Album(sp.load_device(HERE / f"{device}.toml").pump())
    found = collect(album, [PICTURES[name] for name in names])
    return lambda figure: draw_sheet(found.finished, figure)


def main(folder: Path = HERE) -> None:
    save(sheet("superlattice", "circle", "phase"), folder / "determinant.png")
    save(sheet("dimer", "levels", "density", "parameters", "leakage"), folder / "gallery.png")


if __name__ == "__main__":
    main(*map(Path, sys.argv[1:2]))
