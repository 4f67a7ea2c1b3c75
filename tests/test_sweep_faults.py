"""What a sweep survives: killed workers, a killed run, a full disk, damaged files, two runs at once."""

from __future__ import annotations

import errno
import multiprocessing
import os
import signal
import time
import warnings
from concurrent.futures import BrokenExecutor, Executor, Future
from contextlib import suppress
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from sweep_toys import (
    assert_whole,
    deadly,
    deadly_once,
    picky,
    rows_of,
    run_and_die,
    run_on_small_disk,
    run_slowly,
    toy_plan,
)

from scatterpump.errors import InputError, SweepError
from scatterpump.sweep import driver, files
from scatterpump.sweep.journal import runs_in
from scatterpump.sweep.run import run_sweep
from scatterpump.sweep.status import sweep_status
from scatterpump.sweep.store import Store

# All here is derived: a sweep does every point of its plan once, whatever happens to it.

LATEST_STEP = 200


def forked(function: Any, *arguments: Any) -> int:
    """Start `function` in a copy of this process, which costs nothing, and return its number."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)  # newer Pythons warn of threads, of which none is needed
        child = os.fork()
    if child == 0:
        code = 1
        with suppress(BaseException):
            function(*arguments)
            code = 0
        os._exit(code)
    return child


def exit_code(child: int) -> int:
    return os.waitstatus_to_exitcode(os.waitpid(child, 0)[1])


def test_run_killed_at_every_write_step_is_resumed(tmp_path: Path) -> None:
    for step in range(LATEST_STEP):
        folder = tmp_path / str(step)
        code = exit_code(forked(run_and_die, folder, step))
        if code == 0:
            break
        assert code == -signal.SIGKILL
        left = rows_of(folder)[0] if (folder / "plan.json").exists() else []
        report = run_sweep(toy_plan(), folder, workers=1)
        assert report.new == 12 - len(left)
        assert report.missing == report.damaged == 0
        assert_whole(folder)
        assert list(folder.rglob(".*.tmp")) == []
    assert 30 < step < LATEST_STEP - 1  # it was killed at each of six steps of five files and more


@pytest.fixture
def wide(monkeypatch: pytest.MonkeyPatch) -> None:
    """Start processes for however little work."""
    monkeypatch.setattr(driver, "SMALL", 0.0)


@pytest.mark.usefixtures("wide")
def test_killed_worker_costs_nothing(tmp_path: Path) -> None:
    grave = tmp_path / "grave"
    report = run_sweep(toy_plan(deadly_once, 40, grave=str(grave)), tmp_path / "out", workers=2)
    assert grave.exists() and int(grave.read_text()) != os.getpid()
    assert (report.done, report.failed, report.missing) == (40, 0, 0)
    assert_whole(tmp_path / "out", 40)


@pytest.mark.usefixtures("wide")
def test_point_that_always_kills_its_worker_is_kept_as_failed(tmp_path: Path) -> None:
    report = run_sweep(toy_plan(deadly, 24, spared=os.getpid()), tmp_path, workers=2)
    assert (report.done, report.failed, report.missing) == (23, 1, 0)
    points, values = rows_of(tmp_path)
    assert sorted(points) == list(range(24))
    assert [p for p, v in zip(points, values, strict=True) if np.isnan(v)] == [7]
    assert "the worker died" in next(iter(sweep_status(tmp_path).errors))


def test_failed_point_is_kept_with_its_error_and_can_be_retried(tmp_path: Path) -> None:
    allowed = tmp_path / "allowed"
    plan = toy_plan(picky, allowed=str(allowed))
    for new in (12, 0):
        report = run_sweep(plan, tmp_path / "out", workers=1)
        assert (report.new, report.done, report.failed) == (new, 11, 1)
    assert sweep_status(tmp_path / "out").errors == {"to my taste": 1}
    allowed.touch()
    report = run_sweep(plan, tmp_path / "out", workers=1, retry_failed=True)
    assert (report.new, report.done, report.failed) == (1, 12, 0)


def test_two_runs_into_one_folder_are_safe(tmp_path: Path) -> None:
    both = [forked(run_slowly, tmp_path, 80) for _ in range(2)]
    assert list(map(exit_code, both)) == [0, 0]
    status = sweep_status(tmp_path)
    assert (status.done, status.failed, status.missing, status.damaged) == (80, 0, 0, 0)
    points, values = rows_of(tmp_path)
    assert set(points) == set(range(80))
    assert values.tolist() == [float(p * p) for p in points]
    assert len(runs_in(tmp_path)) == 2


def test_second_run_begins_at_the_far_end(tmp_path: Path) -> None:
    first = forked(run_slowly, tmp_path, 200)
    while not (tmp_path / "runs").exists() or not runs_in(tmp_path):
        time.sleep(0.01)
    second = forked(run_slowly, tmp_path, 200)
    assert (exit_code(first), exit_code(second)) == (0, 0)
    begun = min(Store.read(tmp_path).parts(100), key=lambda part: (tmp_path / "parts" / part.name).stat().st_mtime)
    assert begun.stop == 200
    assert set(rows_of(tmp_path)[0]) == set(range(200))


@pytest.mark.parametrize("at", ["opened", "half written", "flushed"])
def test_full_disk_ends_the_run_and_loses_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, at: str) -> None:
    run_sweep(toy_plan(), tmp_path, workers=1, share=(1, 3))
    before = rows_of(tmp_path)[0]

    def full(step: str) -> None:
        if step == at:
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(files, "on_step", full)
    with pytest.raises(SweepError, match="No space left on device.*run the same command again"):
        run_sweep(toy_plan(), tmp_path, workers=1)
    monkeypatch.undo()
    assert rows_of(tmp_path)[0] == before
    assert list(tmp_path.rglob(".*.tmp")) == []
    assert run_sweep(toy_plan(), tmp_path, workers=1).new == 12 - len(before)
    assert_whole(tmp_path)


def test_disk_that_takes_no_whole_part_is_an_error(tmp_path: Path) -> None:
    assert exit_code(forked(run_on_small_disk, tmp_path)) == 0
    assert list((tmp_path / "parts").iterdir()) == []
    assert run_sweep(toy_plan(), tmp_path, workers=1).done == 12


def test_damaged_parts_are_set_aside_and_done_again(tmp_path: Path) -> None:
    run_sweep(toy_plan(), tmp_path, workers=1)
    cut, flipped, *whole = Store.read(tmp_path).parts()
    path = tmp_path / "parts" / cut.name
    path.write_bytes(path.read_bytes()[:-100])
    path = tmp_path / "parts" / flipped.name
    content = bytearray(path.read_bytes())
    content[len(content) // 2] ^= 1
    path.write_bytes(content)
    lost = sum(part.stop - part.start for part in (cut, flipped))
    seen = sweep_status(tmp_path)
    assert (seen.damaged, seen.missing) == (2, lost)
    report = run_sweep(toy_plan(), tmp_path, workers=1)
    assert (report.damaged, report.new) == (2, lost)
    assert whole
    assert len(list((tmp_path / "parts").glob("*.damaged"))) == 2
    assert_whole(tmp_path)


def test_changed_plan_is_refused_with_the_difference_named(tmp_path: Path) -> None:
    run_sweep(toy_plan(), tmp_path, workers=1)
    with pytest.raises(InputError, match=r"another plan \(axes.0.values.12.0: 'nothing' there, 12 here"):
        run_sweep(toy_plan(count=13), tmp_path, workers=1)
    with pytest.raises(InputError, match=r"function.name: 'square' there, 'picky' here"):
        run_sweep(toy_plan(picky), tmp_path, workers=1)
    assert_whole(tmp_path)


def test_part_of_another_plan_does_not_count(tmp_path: Path) -> None:
    run_sweep(toy_plan(), tmp_path / "a", workers=1)
    run_sweep(toy_plan(count=13), tmp_path / "b", workers=1)
    part = Store.read(tmp_path / "b").parts()[0]
    (tmp_path / "a" / "parts" / part.name).write_bytes((tmp_path / "b" / "parts" / part.name).read_bytes())
    assert sweep_status(tmp_path / "a").damaged == 1


def test_nothing_is_unpickled_from_a_store(tmp_path: Path) -> None:
    """A part with the right digest, which anybody can compute, holds a pickle: it is refused, not run."""
    from scatterpump.sweep.store import Part, _digest

    class Trap:
        def __reduce__(self) -> Any:
            return Path.touch, (tmp_path / "sprung",)

    run_sweep(toy_plan(), tmp_path / "out", workers=1)
    forged = tmp_path / "forged.npz"
    np.savez(forged, about=np.array([Trap()], dtype=object))
    store = Store.read(tmp_path / "out")
    part = Part(0, 12, 1, _digest(forged.read_bytes(), store.fingerprint))
    (tmp_path / "out" / "parts" / part.name).write_bytes(forged.read_bytes())
    with pytest.raises(InputError, match="not written by a sweep"):
        sweep_status(tmp_path / "out")
    assert not (tmp_path / "sprung").exists()


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGUSR1, signal.SIGINT])
def test_signal_finishes_the_batch_and_ends_the_run(tmp_path: Path, number: int) -> None:
    sent: list[int] = []

    def interrupt(log: Any) -> None:
        if log.new and not sent:
            sent.append(number)
            os.kill(os.getpid(), number)

    before = signal.getsignal(number)
    report = run_sweep(toy_plan(), tmp_path, workers=1, watch=interrupt)
    assert report.stopped_by == signal.Signals(number).name
    assert 0 < report.done < 12
    assert signal.getsignal(number) is before
    assert run_sweep(toy_plan(), tmp_path, workers=1).new == report.missing
    assert_whole(tmp_path)


class Dying(Executor):
    """Answers one batch; with the next one all of the job is signalled, and the workers die of it."""

    answered = False

    def submit(self, function: Any, /, *arguments: Any, **named: Any) -> Future[Any]:
        future: Future[Any] = Future()
        if self.answered:
            os.kill(os.getpid(), signal.SIGTERM)
            future.set_exception(BrokenExecutor("gone"))
        else:
            future.set_result(function(*arguments, **named))
        self.answered = True
        return future


def test_workers_that_die_of_the_signal_are_not_replaced(tmp_path: Path) -> None:
    report = run_sweep(toy_plan(), tmp_path, executor=Dying(), workers=1)
    assert report.stopped_by == "SIGTERM"
    assert 0 < report.done < 12 and report.failed == 0
    assert run_sweep(toy_plan(), tmp_path, workers=1).new == report.missing
    assert_whole(tmp_path)


@pytest.mark.usefixtures("wide")
def test_signal_lets_workers_finish(tmp_path: Path) -> None:
    """All of a job is signalled, workers too: what they are at is finished and written."""
    process = multiprocessing.get_context("forkserver").Process(target=run_wide, args=(str(tmp_path),))
    process.start()
    while not (tmp_path / "parts").exists() or len(list((tmp_path / "parts").glob("[0-9]*"))) < 4:
        time.sleep(0.01)
    for child in children(process.pid):
        os.kill(child, signal.SIGTERM)
    os.kill(process.pid, signal.SIGTERM)
    process.join()
    assert process.exitcode == 75
    (log,) = runs_in(tmp_path)
    assert log.state == "stopped"
    assert log.done == len(rows_of(tmp_path)[0]) < 1000
    assert log.failed == 0


def run_wide(folder: str) -> None:
    from sweep_toys import slow

    driver.SMALL = 0.0
    report = run_sweep(toy_plan(slow, 1000), folder, workers=2)
    raise SystemExit(75 if report.missing else 0)


def children(parent: int) -> list[int]:
    """Return the processes below `parent`, whose server forks the workers."""
    found = []
    for path in Path("/proc").glob("[0-9]*/stat"):
        try:
            fields = path.read_text().rpartition(")")[2].split()
        except OSError:
            continue
        if int(fields[1]) == parent:
            found += [int(path.parent.name), *children(int(path.parent.name))]
    return [pid for pid in found if pid != parent]
