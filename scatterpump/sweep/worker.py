"""What happens in a worker: it is prepared once, learns a plan once, and works off batches of points.

A point that fails is an answer like any other: its error is kept, and the batch goes on.
"""

from __future__ import annotations

import os
import signal
import threading
import time
import traceback
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import PumpError
from scatterpump.sweep.columns import stacked
from scatterpump.sweep.order import points_at
from scatterpump.sweep.plan import SweepPlan
from scatterpump.sweep.point import Point, PumpMaker, described
from scatterpump.sweep.quantities import DTYPES, columns_of, quantities_named

__all__ = ["ONE_THREAD", "Batch", "ignore_requests", "maker_of", "prepare_worker", "run_batch", "run_points"]

# Scotch 7, which orders matrices for MUMPS, pins the thread that calls it to the first processor while it runs threads
# of its own: two processes then share one processor.
ONE_THREAD = {"SCOTCH_PTHREAD_NUMBER": "1", "OMP_NUM_THREADS": "1", "OPENBLAS_NUM_THREADS": "1", "MKL_NUM_THREADS": "1"}
LONGEST_ERROR = 2000

_known: dict[str, SweepPlan] = {}
_folders: dict[str, TemporaryDirectory[str]] = {}


@dataclass(frozen=True, eq=False)
class Batch:
    """The answers of the points at the positions [start, stop) of a plan's order.

    Attributes
    ----------
    start, stop : int
    columns : dict of (n, ...) array
        What was kept, a row a point, missing values where a point failed.
    seconds : (n,) float array
        What each point took.
    errors : dict
        Text of the error for each position that failed.
    """

    start: int
    stop: int
    columns: dict[str, NDArray[Any]]
    seconds: NDArray[np.float64]
    errors: dict[int, str]


def ignore_requests() -> None:
    """Ignore the signals that ask a run to come to an end, which lets its workers finish."""
    for number in (signal.SIGINT, signal.SIGTERM, getattr(signal, "SIGUSR1", signal.SIGINT)):
        signal.signal(number, signal.SIG_IGN)


def prepare_worker(plan: bytes | None = None) -> None:
    """Give this process one thread, make it outlive neither its parent nor a signal meant for it, teach it `plan`."""
    import multiprocessing

    ignore_requests()
    parent = multiprocessing.parent_process()
    if parent is not None:
        threading.Thread(target=_end_with, args=(parent,), daemon=True).start()
    _single_threaded()
    if plan is not None:
        _learn(plan)


def run_batch(key: str, start: int, stop: int, plan: bytes | None = None) -> Batch | None:
    """Work off the positions [start, stop) of the plan with fingerprint `key`.

    Returns None, for "send me the plan", if it is not known here and not handed over as `plan`.
    """
    if key not in _known:
        if plan is None:
            return None
        _single_threaded()
        _learn(plan)
    return run_points(_known[key], start, stop)


def run_points(plan: SweepPlan, start: int, stop: int) -> Batch:
    """Work off the positions [start, stop) of `plan` here and now."""
    make, quantities, columns = maker_of(plan), quantities_named(plan.keep), columns_of(plan.keep)
    rows: list[list[Any]] = []
    seconds, errors = np.zeros(stop - start), {}
    for row, number in enumerate(points_at(np.arange(start, stop, dtype=np.int64), plan.size).tolist()):
        begun = time.perf_counter()
        try:
            point = _point(plan, make, number)
            rows.append([value for quantity in quantities for value in quantity.of(point)])
        except Exception as error:  # whatever a device of somebody's own raises belongs to its point
            rows.append([None] * len(columns))
            errors[start + row] = _told(error)
        seconds[row] = time.perf_counter() - begun
    kept = {
        column.name: stacked([row[i] for row in rows], DTYPES[column.kind], len(column.dims))
        for i, column in enumerate(columns)
    }
    return Batch(start, stop, kept, seconds, errors)


def maker_of(plan: SweepPlan) -> PumpMaker:
    """Return what makes the pumps of `plan`, with the files it needs laid out in a folder of this process."""
    if callable(plan.device):
        function: Callable[..., Any] = plan.device
        return lambda changes: function(**changes)
    return described(dict(plan.device), Path(_folder(plan)) if plan.files else Path())


def _point(plan: SweepPlan, make: PumpMaker, number: int) -> Point:
    leak = not {"leak", "smallest_reflection"}.isdisjoint(plan.keep)
    return Point(
        make,
        plan.changes(number),
        phases=plan.phases,
        engine=plan.engine,
        whole="trustworthy" in plan.keep,
        leak=leak,
        bisection=plan.bisection,
    )


def _folder(plan: SweepPlan) -> str:
    if plan.fingerprint not in _folders:
        folder = _folders[plan.fingerprint] = TemporaryDirectory(prefix="scatterpump-")
        for name, text in plan.files.items():
            Path(folder.name, name).write_text(text, encoding="utf-8")
    return _folders[plan.fingerprint].name


def _end_with(parent: Any) -> None:
    parent.join()
    os._exit(1)


def _learn(blob: bytes) -> None:
    import cloudpickle

    plan = cloudpickle.loads(blob)
    _known[plan.fingerprint] = plan


def _single_threaded() -> None:
    from threadpoolctl import threadpool_limits

    os.environ.update(ONE_THREAD)
    threadpool_limits(1)


def _told(error: Exception) -> str:
    """One line for what this package refuses, and the end of the trace for anything else."""
    if isinstance(error, PumpError):
        return f"{type(error).__name__}: {error}"
    return "".join(traceback.format_exception(error)).strip()[-LONGEST_ERROR:]
