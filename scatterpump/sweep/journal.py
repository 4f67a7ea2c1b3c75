"""How far each run into a folder is: one small file a run, replaced every few seconds."""

from __future__ import annotations

import json
import os
import time
from contextlib import suppress
from dataclasses import asdict, dataclass, field
from pathlib import Path
from socket import gethostname
from typing import Any, Literal

from scatterpump.sweep.files import write_whole

__all__ = ["Run", "runs_in"]

SILENT = 90.0  # a run that has not been heard of for so many seconds counts as gone
State = Literal["running", "finished", "stopped", "failed"]


@dataclass
class Run:
    """One process that works, or worked, on a share.

    Attributes
    ----------
    share, shares : int
    points : int
        Points of the share.
    done, failed : int
        How many of them are done by now, whoever did them, and how many failed.
    new : int
        How many of them this run did.
    workers : int
    state : "running", "finished", "stopped" or "failed"
    started, updated : float
        Seconds since 1970.
    host : str
    process : int
    """

    share: int
    shares: int
    points: int
    done: int = 0
    failed: int = 0
    new: int = 0
    workers: int = 1
    state: State = "running"
    started: float = field(default_factory=time.time)
    updated: float = field(default_factory=time.time)
    host: str = field(default_factory=gethostname)
    process: int = field(default_factory=os.getpid)

    @property
    def rate(self) -> float:
        """Points a second since the start."""
        return self.new / max(self.updated - self.started, 1e-3)

    @property
    def left(self) -> float | None:
        """Seconds left at that rate, if known."""
        return (self.points - self.done - self.failed) / self.rate if self.new else None

    @property
    def is_alive(self) -> bool:
        """True if it runs, as far as one can tell."""
        if self.state != "running" or time.time() - self.updated > SILENT:
            return False
        return self.host != gethostname() or not Path("/proc").exists() or Path("/proc", str(self.process)).exists()

    def write(self, folder: Path) -> None:
        """Tell everybody; it need not survive a power cut."""
        self.updated = time.time()
        path = folder / "runs" / f"{self.host}-{self.process}-{self.share}-{self.shares}.json"
        write_whole(path, json.dumps(asdict(self)).encode(), durable=False)


def runs_in(folder: Path) -> list[Run]:
    """Return all runs that left word in the folder, in the order in which they started."""
    found: list[Run] = []
    for path in (folder / "runs").glob("*.json"):
        with suppress(OSError, ValueError, TypeError):  # another version's, or gone
            data: dict[str, Any] = json.loads(path.read_text(encoding="utf-8"))
            found.append(Run(**data))
    return sorted(found, key=lambda run: run.started)
