"""Which pictures of a device there are, and collecting what they show: long work that may be stopped half-way."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from scatterpump.errors import InputError, PumpError
from scatterpump.figures.lengths import leakage_by_length
from scatterpump.figures.levels import edge_levels
from scatterpump.figures.maps import local_density, potential
from scatterpump.figures.parameters import parameter_plane
from scatterpump.figures.winding import determinant_circle, determinant_phase, eigenphases
from scatterpump.portrait.album import Album
from scatterpump.portrait.potential import Potential

__all__ = ["PICTURES", "Collection", "Picture", "collect", "named"]


@dataclass(frozen=True)
class Picture:
    """One picture of a device.

    Attributes
    ----------
    name, shows : str
        What it is called, and what it shows in a few words.
    result : callable
        From an `Album` to the result that is drawn.
    draw : callable
        (result, axes) to the axes.
    """

    name: str
    shows: str
    result: Callable[[Album], Any]
    draw: Callable[[Any, Any], Any]


PICTURES = {
    picture.name: picture
    for picture in (
        Picture("circle", "det r on its circle", lambda album: album.turning, determinant_circle),
        Picture("phase", "its turns against phi, and the proof", lambda album: album.turning, determinant_phase),
        Picture("levels", "bands and edge levels against phi", lambda album: album.spectrum, edge_levels),
        Picture("density", "local density at the probe's end", lambda album: album.density, local_density),
        Picture("potential", "on-site energies along the device", lambda album: _moving(album.potential), potential),
        Picture("eigenphases", "arguments of r's eigenvalues", lambda album: album.turning, eigenphases),
        Picture("parameters", "the cycle in the plane of two parameters", lambda album: album.plane, parameter_plane),
        Picture("leakage", "leakage against length", lambda album: album.lengths, leakage_by_length),
    )
}


@dataclass
class Collection:
    """Pictures whose results are there, and why others are not.

    Attributes
    ----------
    finished : list of (Picture, result)
    missing : list of (name, reason)
    stopped : bool
        True if the work was interrupted.
    """

    finished: list[tuple[Picture, Any]] = field(default_factory=list)
    missing: list[tuple[str, str]] = field(default_factory=list)
    stopped: bool = False


def named(names: Iterable[str]) -> list[Picture]:
    """Return the pictures of these names, in their order, each once.

    Raises
    ------
    InputError
        If there is no such picture.
    """
    for name in names:
        if name not in PICTURES:
            raise InputError(f"there is no picture {name!r}", allowed=", ".join(PICTURES))
    return [PICTURES[name] for name in dict.fromkeys(names)]


def collect(
    album: Album, pictures: Iterable[Picture], *, progress: Callable[[float], None] | None = None
) -> Collection:
    """Work out what `pictures` show; an interrupt from the keyboard leaves what is finished.

    Parameters
    ----------
    album : Album
    pictures : iterable of Picture
    progress : callable, optional
        Called with the share of pictures done, 0 to 1.
    """
    wanted, found = list(pictures), Collection()
    for count, picture in enumerate(wanted):
        try:
            found.finished.append((picture, picture.result(album)))
        except PumpError as error:
            found.missing.append((picture.name, _reason(error)))
        except KeyboardInterrupt:
            found.missing += [(rest.name, "interrupted") for rest in wanted[count:]]
            found.stopped = True
            break
        if progress is not None:
            progress((count + 1) / len(wanted))
    return found


def _reason(error: PumpError) -> str:
    return error.problem if isinstance(error, InputError) else str(error)


def _moving(potential: Potential) -> Potential:
    if not np.ptp(potential.energies, axis=0).max(initial=0.0) > 0:
        raise InputError("no on-site energy changes along the cycle", allowed="another picture")
    return potential
