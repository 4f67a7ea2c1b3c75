"""Files that are either there whole or not at all, whenever the process is killed.

A file is written under another name, flushed to the disk, and renamed; the folder is flushed after that.  `on_step` is
told every step, so that a test can kill the process, or fill the disk, at each of them.
"""

from __future__ import annotations

import os
import time
from collections.abc import Callable
from contextlib import suppress
from itertools import count
from pathlib import Path
from socket import gethostname

from scatterpump.errors import SweepError

__all__ = ["create_whole", "on_step", "sweep_leftovers", "write_whole"]

LEFTOVER = ".tmp"
OLD = 86_400.0  # a file nobody wrote to for a day is nobody's, whichever machine it came from

on_step: Callable[[str], None] = lambda step: None  # noqa: E731  # replaced by tests

_numbers = count()


def write_whole(path: Path, data: bytes, *, durable: bool = True) -> None:
    """Write `data` to `path`, replacing what is there.

    Raises
    ------
    SweepError
        If the disk is full, or the place cannot be written to.
    """
    temporary = _temporary(path)
    try:
        _fill(temporary, data, durable)
        os.replace(temporary, path)
        on_step("renamed")
        _flush_folder(path.parent, durable)
    except OSError as error:
        raise _refused(path, temporary, error) from error


def create_whole(path: Path, data: bytes) -> bool:
    """Write `data` to `path` unless there is a file already; tell whether there was none."""
    temporary = _temporary(path)
    try:
        _fill(temporary, data, True)
        try:
            os.link(temporary, path)  # unlike renaming it fails if another process was faster
        except FileExistsError:
            return False
        finally:
            on_step("linked")
            temporary.unlink()
        _flush_folder(path.parent, True)
        return True
    except OSError as error:
        raise _refused(path, temporary, error) from error


def sweep_leftovers(folder: Path) -> int:
    """Remove what killed processes left half written, and tell how many files that were."""
    removed = 0
    for path in folder.glob(f".*{LEFTOVER}"):
        with suppress(OSError):
            if _is_abandoned(path):
                path.unlink()
                removed += 1
    return removed


def _temporary(path: Path) -> Path:
    return path.with_name(f".{path.name}.{os.getpid()}-{next(_numbers)}@{gethostname()}{LEFTOVER}")


def _fill(path: Path, data: bytes, durable: bool) -> None:
    with path.open("xb") as file:
        on_step("opened")
        file.write(data[: len(data) // 2])
        file.flush()
        on_step("half written")
        file.write(data[len(data) // 2 :])
        file.flush()
        on_step("written")
        if durable:
            os.fsync(file.fileno())
            on_step("flushed")


def _flush_folder(folder: Path, durable: bool) -> None:
    if not durable or os.name != "posix":
        return
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
    on_step("folder flushed")


def _refused(path: Path, temporary: Path, error: OSError) -> SweepError:
    with suppress(OSError):
        temporary.unlink(missing_ok=True)
    return SweepError(
        f"{path}: it cannot be written: {error.strerror}; what is finished is safe; make room there and run the same "
        "command again, which does only what is missing"
    )


def _is_abandoned(path: Path) -> bool:
    if time.time() - path.stat().st_mtime > OLD:
        return True
    name, _, host = path.name.removesuffix(LEFTOVER).rpartition("@")
    process = name.rpartition(".")[2].partition("-")[0]
    return host == gethostname() and Path("/proc/self").exists() and not Path("/proc", process).exists()
