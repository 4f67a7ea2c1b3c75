"""The folder that a sweep is kept in: one small file for every finished batch, none of which is ever changed.

    plan.json                                      the plan, written once
    parts/000000120-000000144-0-<digest>.npz       the points at positions 120 to 143 of the plan's order, none failed
    runs/<host>-<process>.json                     how far each run is

The name of a part says which positions it holds and how many of them failed, and repeats the digest of its content: a
listing tells what is done, and a damaged file gives itself away.  Any number of runs may write at once; should two of
them do the same points, a success counts more than a failure, and else the first name.  Nothing is ever unpickled.
"""

from __future__ import annotations

import hashlib
import io
import json
import platform
import time
import zipfile
from collections.abc import Collection
from contextlib import suppress
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from socket import gethostname
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import InputError
from scatterpump.sweep.files import create_whole, sweep_leftovers, write_whole
from scatterpump.sweep.order import points_at
from scatterpump.sweep.plan import SweepPlan, absent, fingerprint, flattened
from scatterpump.sweep.worker import Batch
from scatterpump.version import version

__all__ = ["Part", "Store", "versions"]

DIGEST = 16  # bytes; by accident two files agree once in 2^64 pairs
SHOWN_DIFFERENCES = 3


@dataclass(frozen=True, order=True)
class Part:
    """A file of finished points, as its name tells: positions [start, stop), number of failures, digest."""

    start: int
    stop: int
    failed: int
    digest: str

    @property
    def name(self) -> str:
        return f"{self.start:09d}-{self.stop:09d}-{self.failed}-{self.digest}.npz"

    @classmethod
    def of(cls, name: str) -> Part | None:
        """Read a name, or return None if it is not one of a part."""
        start, _, rest = name.removesuffix(".npz").partition("-")
        stop, _, rest = rest.partition("-")
        failed, _, digest = rest.partition("-")
        if not name.endswith(".npz") or not (start.isdigit() and stop.isdigit() and failed.isdigit() and digest):
            return None
        return cls(int(start), int(stop), int(failed), digest)


class Store:
    """A folder of results and the plan they belong to.  Open one with `open` to write, with `read` to look."""

    def __init__(self, folder: Path, plan: SweepPlan, fingerprint: str) -> None:
        self.folder, self.plan, self.fingerprint = folder, plan, fingerprint
        self.damaged: set[str] = set()
        self._seen: dict[str, Part] = {}

    @classmethod
    def open(cls, folder: str | Path, plan: SweepPlan) -> Store:
        """Open the folder for results of `plan`, making it if needed.

        Raises
        ------
        InputError
            If it holds the results of another plan; the message names the difference.
        SweepError
            If it cannot be written to.
        """
        folder = Path(folder)
        try:
            for place in (folder / "parts", folder / "runs"):
                place.mkdir(parents=True, exist_ok=True)
        except OSError as error:
            raise InputError(f"the folder cannot be made: {error.strerror}", where=str(folder)) from error
        if not (folder / "plan.json").exists():
            create_whole(folder / "plan.json", plan.to_json().encode())
        _refuse_other(folder, plan)
        for place in (folder, folder / "parts", folder / "runs"):
            sweep_leftovers(place)
        return cls(folder, plan, plan.fingerprint)

    @classmethod
    def read(cls, folder: str | Path) -> Store:
        """Open a folder of results to look at them; nothing in it is changed."""
        data = _stored_plan(Path(folder))
        return cls(
            Path(folder), SweepPlan.from_dict(data, absent if data.get("device") is None else None), fingerprint(data)
        )

    def parts(self, start: int = 0, stop: int | None = None) -> list[Part]:
        """Return the whole parts that touch the positions [start, stop), in the order of their names."""
        end = self.plan.size if stop is None else stop
        listed = (
            {path.name for path in (self.folder / "parts").iterdir()} if (self.folder / "parts").is_dir() else set()
        )
        for name in listed - self._seen.keys() - self.damaged:
            part = Part.of(name)
            if part is not None and part.start < end and part.stop > start and self._content(part) is not None:
                self._seen[name] = part
        return sorted(part for name, part in self._seen.items() if name in listed)

    def progress(self, start: int = 0, stop: int | None = None) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
        """Tell for each of the positions [start, stop) whether it is done, and whether it failed instead."""
        end = self.plan.size if stop is None else stop
        done, failed = np.zeros(end - start, bool), np.zeros(end - start, bool)
        for part in self.parts(start, end):
            here = slice(max(part.start - start, 0), max(part.stop - start, 0))
            if part.failed == 0:
                done[here] = True
                continue
            for position in range(max(part.start, start), min(part.stop, end)):
                (failed if position in self.errors(part) else done)[position - start] = True
        return done, failed & ~done

    def errors(self, part: Part) -> dict[int, str]:
        """Return the error of each position of `part` that failed."""
        return {int(position): text for position, text in self.load(part)[1]["errors"].items()} if part.failed else {}

    def load(self, part: Part, names: Collection[str] | None = None) -> tuple[dict[str, NDArray[Any]], dict[str, Any]]:
        """Return the arrays of `part`, or those called `names`, a row a position, and what is said about them."""
        content, path = self._content(part), self.folder / "parts" / part.name
        if content is None:
            raise InputError("the part is gone or damaged", where=str(path))
        try:
            with np.load(io.BytesIO(content), allow_pickle=False) as arrays:
                found = {name: arrays[name] for name in names or arrays.files if name != "about"}
                return found, json.loads(str(arrays["about"]))
        except (ValueError, KeyError, OSError, EOFError, zipfile.BadZipFile) as error:
            raise InputError(
                f"the part was not written by a sweep ({error})", allowed="remove it", where=str(path)
            ) from error

    def write(self, batch: Batch) -> Part:
        """Keep a finished batch.

        Raises
        ------
        SweepError
            If the disk is full, or the folder cannot be written to.
        """
        content = _encoded(self, batch)
        part = Part(batch.start, batch.stop, len(batch.errors), _digest(content, self.fingerprint))
        write_whole(self.folder / "parts" / part.name, content)
        self._seen[part.name] = part
        return part

    def set_damaged_aside(self) -> int:
        """Rename the damaged files met so far, so that they are done again and can still be looked at."""
        for name in self.damaged:
            path = self.folder / "parts" / name
            with suppress(FileNotFoundError):  # another run was faster
                path.rename(path.with_suffix(".damaged"))
        return len(self.damaged)

    def _content(self, part: Part) -> bytes | None:
        try:
            content = (self.folder / "parts" / part.name).read_bytes()
        except OSError:
            content = b""
        if _digest(content, self.fingerprint) == part.digest:
            return content
        self.damaged.add(part.name)
        return None


@cache
def versions() -> dict[str, str]:
    """Return the versions that results depend on."""
    from importlib.metadata import version as installed

    names = ("kwant", "numpy", "scipy", "tinyarray")
    return {
        "scatterpump": version(),
        "python": platform.python_version(),
        **{name: installed(name) for name in names},
    }


def _encoded(store: Store, batch: Batch) -> bytes:
    """Return a part's content: what was kept, and what it was made from."""
    plan = store.plan
    points = points_at(np.arange(batch.start, batch.stop, dtype=np.int64), plan.size)
    places = np.unravel_index(points, plan.shape)
    seeds = {
        f"seed_{axis.name}": np.array([axis.values[i][0] for i in place])
        for axis, place in zip(plan.axes, places, strict=True)
        if axis.is_seed
    }
    about = {
        "inputs": hashlib.sha256(store.fingerprint.encode() + points.tobytes()).hexdigest(),
        "versions": versions(),
        "host": gethostname(),
        "written": time.time(),
        "errors": batch.errors,
    }
    file = io.BytesIO()
    arrays = {"point": points, "seconds": batch.seconds, "about": np.array(json.dumps(about)), **seeds}
    np.savez(file, allow_pickle=False, **arrays, **batch.columns)
    return file.getvalue()


def _digest(content: bytes, fingerprint: str) -> str:
    """Hash a part's content under its plan, so that a part of another plan is as useless as a damaged one."""
    return hashlib.blake2b(content, digest_size=DIGEST, key=bytes.fromhex(fingerprint)).hexdigest()


def _stored_plan(folder: Path) -> dict[str, Any]:
    """Return the plan that the folder's results belong to."""
    path = folder / "plan.json"
    try:
        data = json.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise InputError(
            f"there are no results: {error.strerror}",
            allowed="a folder that 'scatterpump sweep' wrote",
            where=str(path),
        ) from error
    except (ValueError, RecursionError) as error:
        raise InputError(
            "this is no plan any more", allowed="the plan.json written by the first run", where=str(path)
        ) from error
    if not isinstance(data, dict):
        raise InputError("this is no plan", allowed="the plan.json written by the first run", where=str(path))
    return data


def _refuse_other(folder: Path, plan: SweepPlan) -> None:
    """Refuse a folder whose results belong to another plan, and name up to three differences."""
    stored, asked = _stored_plan(folder), json.loads(plan.to_json())
    if stored == asked:
        return
    there, here = flattened(stored), flattened(asked)
    absent = "nothing"
    differences = [
        f"{key}: {there.get(key, absent)!r:.60} there, {here.get(key, absent)!r:.60} here"
        for key in dict.fromkeys((*here, *there))
        if there.get(key, absent) != here.get(key, absent)
    ]
    more = f", and {len(differences) - SHOWN_DIFFERENCES} more" if len(differences) > SHOWN_DIFFERENCES else ""
    raise InputError(
        f"the folder holds results of another plan ({'; '.join(differences[:SHOWN_DIFFERENCES])}{more})",
        allowed="the plan it was begun with, or another folder",
        where=str(folder),
    )
