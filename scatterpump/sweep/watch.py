"""How a run shows how far it is: a bar on a terminal, else one line a minute."""

from __future__ import annotations

import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import Any

from scatterpump.sweep.journal import Run

__all__ = ["duration", "shown"]

MINUTE = 60.0


@contextmanager
def shown() -> Iterator[Callable[[Run], None]]:
    """Yield what to call whenever a run is further; it writes to standard error."""
    if not sys.stderr.isatty():
        yield _Log()
        return
    bar = _Bar()
    try:
        yield bar
    finally:
        bar.close()


class _Bar:
    """Points, rate, time left and failures on one line, from the first word of a run on."""

    def __init__(self) -> None:
        self._bar: Any = None

    def __call__(self, run: Run) -> None:
        known = run.done + run.failed
        if self._bar is None:
            from tqdm import tqdm

            label = f"share {run.share}/{run.shares}" if run.shares > 1 else "sweep"
            self._bar = tqdm(desc=label, total=run.points, initial=known, unit=" points", file=sys.stderr)
        self._bar.set_postfix_str(f"{run.failed} failed", refresh=False)
        self._bar.update(known - self._bar.n)

    def close(self) -> None:
        if self._bar is not None:
            self._bar.close()


class _Log:
    """One line at the start and at the end, and one a minute between."""

    def __init__(self) -> None:
        self._next = 0.0

    def __call__(self, run: Run) -> None:
        if time.monotonic() < self._next and run.state == "running":
            return
        self._next = time.monotonic() + MINUTE
        left = f", {duration(run.left)} left" if run.left is not None and run.state == "running" else ""
        rate = f", {run.rate:.3g} a second" if run.new else ""
        print(
            f"{time.strftime('%Y-%m-%d %H:%M:%S')}  share {run.share}/{run.shares}, {run.state}: "
            f"{run.done} of {run.points} points done, {run.failed} failed{rate}{left}",
            file=sys.stderr,
            flush=True,
        )


def duration(seconds: float) -> str:
    """Return a time as a person says it."""
    for unit, length in (("days", 86_400.0), ("h", 3600.0), ("min", 60.0)):
        if seconds >= 2 * length:
            return f"{seconds / length:.3g} {unit}"
    return f"{seconds:.3g} s" if seconds >= 1 else f"{1000 * seconds:.3g} ms"
