"""Points that cost nothing, fail, sleep or kill their worker: what a sweep does around them is what its tests look at.

Importing this puts the quantity "toy" on the list; workers import it when they learn a plan made by these functions.
"""

from __future__ import annotations

import os
import signal
import time
from pathlib import Path
from typing import Any

import numpy as np

from scatterpump.errors import SweepError
from scatterpump.sweep import driver, files
from scatterpump.sweep.axis import Axis
from scatterpump.sweep.plan import SweepPlan
from scatterpump.sweep.quantities import QUANTITIES, Column, Quantity
from scatterpump.sweep.run import run_sweep
from scatterpump.sweep.store import Store

QUANTITIES["toy"] = Quantity("toy", (Column("toy", "the square of x"),), lambda point: (point.pump,))


def square(x: int) -> Any:
    return float(x * x)


def slow(x: int) -> Any:
    time.sleep(0.02)
    return float(x * x)


def picky(x: int, allowed: str) -> Any:
    """Refuse 3 until the file `allowed` is there."""
    if x == 3 and not Path(allowed).exists():
        raise ValueError("three is not\nto my taste")
    return float(x * x)


def deadly_once(x: int, grave: str) -> Any:
    """Kill the worker at 7, the first time."""
    time.sleep(0.02)
    if x == 7 and not Path(grave).exists():
        Path(grave).write_text(str(os.getpid()))
        os.kill(os.getpid(), signal.SIGKILL)
    return float(x * x)


def deadly(x: int, spared: int) -> Any:
    """Kill the worker at 7, always (but not the tests themselves)."""
    time.sleep(0.01)
    if x == 7 and os.getpid() != spared:
        os.kill(os.getpid(), signal.SIGKILL)
    return float(x * x)


def toy_plan(function: Any = square, count: int = 12, **more: Any) -> SweepPlan:
    axes = [Axis("x", range(count)), *(Axis(key, [value]) for key, value in more.items())]
    return SweepPlan(function, axes, keep=("toy",))


def rows_of(folder: Path) -> tuple[list[int], np.ndarray[Any, Any]]:
    """Return the points of all parts, as often as they are there, and their values."""
    store = Store.read(folder)
    loaded = [store.load(part)[0] for part in store.parts()]
    points = [int(p) for found in loaded for p in found["point"]]
    return points, np.array([v for found in loaded for v in found["toy"]])


def assert_whole(folder: Path, count: int = 12) -> None:
    """Every point once, none lost, none double, and each with its value."""
    points, values = rows_of(folder)
    assert sorted(points) == list(range(count))
    assert values.tolist() == [float(p * p) for p in points]


def run_and_die(folder: Path, step: int) -> None:
    """Run the toy plan, and be killed at write step number `step`; exit code 0 if there are fewer."""
    taken = iter(range(10**6))

    def kill(_: str) -> None:
        if next(taken) == step:
            os.kill(os.getpid(), signal.SIGKILL)

    files.on_step = kill
    run_sweep(toy_plan(), folder, workers=1)


def run_slowly(folder: Path, count: int) -> None:
    """Run with an eye on other runs."""
    driver.LOOK_AROUND = 0.2
    run_sweep(toy_plan(slow, count), folder, workers=1)


def run_on_small_disk(folder: Path) -> None:
    """Run where no file may be as large as a part."""
    import resource

    import pytest

    signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
    resource.setrlimit(resource.RLIMIT_FSIZE, (1500, 1500))
    with pytest.raises(SweepError, match="File too large"):
        run_sweep(toy_plan(), folder, workers=1)
