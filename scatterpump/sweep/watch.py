"""How a run shows how far it is: a bar on a terminal, else one line a minute."""

from __future__ import annotations

import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager

from scatterpump.sweep.journal import Run

__all__ = ["duration", "shown"]

MINUTE = 60.0


@contextmanager
def shown() -> Iterator[Callable[[Run], None]]:
    """Yield what to call whenever a run is further; it writes to standard error."""
    if not sys.stderr.isatty():
        yield _Log()
        return
    from tqdm import tqdm

    with tqdm(unit="point", file=sys.stderr, smoothing=0.05, dynamic_ncols=True) as bar:

        def show(run: Run) -> None:
            if bar.total is None:
                bar.total, bar.initial, bar.n = run.points, run.done + run.failed, run.done + run.failed
                bar.set_description(f"share {run.share}/{run.shares}" if run.shares > 1 else "sweep")
            bar.set_postfix_str(f"{run.failed} failed", refresh=False)
            bar.update(run.done + run.failed - bar.n)

        yield show


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
