"""How far all shares of a sweep are together, read from its folder without changing it."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from scatterpump.sweep.journal import Run, runs_in
from scatterpump.sweep.store import Store
from scatterpump.sweep.watch import duration

__all__ = ["SweepStatus", "sweep_status"]

SHOWN_ERRORS = 5
ERROR_WIDTH = 100


@dataclass(frozen=True)
class SweepStatus:
    """What a folder of results holds.

    Attributes
    ----------
    folder : Path
    points, done, failed : int
    damaged : int
        Files that are there and cannot be used; a run does their points again.
    errors : dict
        The last line of each error, and how many points it struck.
    runs : tuple of Run
    """

    folder: Path
    points: int
    done: int
    failed: int
    damaged: int
    errors: dict[str, int]
    runs: tuple[Run, ...]

    @property
    def missing(self) -> int:
        """Points that are still to do."""
        return self.points - self.done - self.failed

    def summary(self) -> str:
        """Return it as a table."""
        lines = [
            f"{self.folder}: {self.points} points",
            "",
            f"done      {self.done:>12}   {self.done / self.points:6.1%}",
            f"failed    {self.failed:>12}"
            + ("   'scatterpump sweep --retry-failed' does them again" if self.failed else ""),
            f"missing   {self.missing:>12}" + (f"   {self._left()}" if self.missing else ""),
        ]
        if self.damaged:
            lines.append(f"damaged   {self.damaged:>12}   files; the next run does their points again")
        for text, count in sorted(self.errors.items(), key=lambda item: -item[1])[:SHOWN_ERRORS]:
            lines.append(f"  {count} x {text if len(text) <= ERROR_WIDTH else text[:ERROR_WIDTH] + '...'}")
        return "\n".join(lines + self._table())

    def _left(self) -> str:
        rate = sum(run.rate for run in self.runs if run.is_alive)
        return f"about {duration(self.missing / rate)} left" if rate else "nobody is at work"

    def _table(self) -> list[str]:
        if not self.runs:
            return []
        rows = [
            f"{f'{run.share}/{run.shares}':>9}  {_state(run):<9}{run.done:>10} of {run.points:<10}"
            f"{run.rate:>9.3g}/s  {run.workers:>3}  {run.host}:{run.process}"
            for run in self.runs
        ]
        return ["", f"{'share':>9}  {'state':<9}{'done':>10}    {'points':<10}{'rate':>9}    {'workers'}", *rows]


def sweep_status(folder: str | Path) -> SweepStatus:
    """Look into a folder of results.

    Raises
    ------
    InputError
        If there are none.
    """
    store = Store.read(folder)
    done, failed = store.progress()
    errors: dict[str, int] = {}
    for part in store.parts():
        for text in store.errors(part).values():
            last = text.strip().splitlines()[-1]
            errors[last] = errors.get(last, 0) + 1
    runs = tuple(runs_in(store.folder))
    counts = store.plan.size, int(done.sum()), int(failed.sum()), len(store.damaged)
    return SweepStatus(store.folder, *counts, errors, runs)


def _state(run: Run) -> str:
    return "gone" if run.state == "running" and not run.is_alive else run.state
