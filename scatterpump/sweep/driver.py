"""Working off a plan: what is missing is handed out in batches, and every batch that comes back is written at once.

A worker that dies costs its batches, not the run.  Whose fault it was is found out by doing the lost batches again one
at a time: one that dies alone is halved, and a point that dies alone twice is kept as failed.
"""

from __future__ import annotations

import time
from collections import deque
from collections.abc import Callable
from concurrent.futures import FIRST_COMPLETED, BrokenExecutor, CancelledError, Executor, Future, wait
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from scatterpump.errors import SweepError
from scatterpump.sweep.columns import empty
from scatterpump.sweep.executors import Crew, Given, Here, LocalProcesses
from scatterpump.sweep.journal import Run, runs_in
from scatterpump.sweep.order import share_bounds
from scatterpump.sweep.pace import Pace
from scatterpump.sweep.quantities import DTYPES, columns_of
from scatterpump.sweep.queue import Queue
from scatterpump.sweep.share import available_workers
from scatterpump.sweep.signals import Request
from scatterpump.sweep.store import Store
from scatterpump.sweep.worker import Batch, run_batch

__all__ = ["Driver", "SweepReport", "Watcher"]

Watcher = Callable[[Run], None]

TICK = 0.5  # seconds between looks at signals
LOOK_AROUND = 10.0  # seconds between looks at what other runs have done, and words about this one
SMALL = 5.0  # seconds of work left that are not worth starting processes for
WORKER_DEATHS = 2  # a point whose worker dies so often while nothing else runs is to blame
HOPELESS = 4  # workers that may die before anything has come back


@dataclass(frozen=True)
class SweepReport:
    """What a run left behind.

    Attributes
    ----------
    folder : Path
    points : int
        Points of the share.
    done, failed : int
        How many are done and how many failed, now.
    new : int
        How many this run did, failures included.
    damaged : int
        Damaged files met, set aside, and done again.
    stopped_by : str
        Name of the signal that ended the run early, or empty.
    """

    folder: Path
    points: int
    done: int
    failed: int
    new: int
    damaged: int
    stopped_by: str

    @property
    def missing(self) -> int:
        """Points of the share that are still to do."""
        return self.points - self.done - self.failed


@dataclass
class _Task:
    """A batch handed out: its positions, how often it died alone, and whether the plan goes along."""

    start: int
    stop: int
    deaths: int = 0
    with_plan: bool = False


class Driver:
    """One run: what it has handed out, what came back, and what it makes of workers that die."""

    def __init__(
        self,
        store: Store,
        executor: Executor | None,
        workers: int | None,
        share: tuple[int, int],
        retry_failed: bool,
        batch: float,
        watch: Watcher | None,
        request: Request,
    ) -> None:
        import cloudpickle

        self.store, self.watch, self.request, self.retry = store, watch, request, retry_failed
        self.key, self.blob = store.plan.fingerprint, cloudpickle.dumps(store.plan)
        self.bounds = share_bounds(*share, store.plan.size)
        done, failed = store.progress(*self.bounds)
        self.damaged = store.set_damaged_aside()
        self.log = Run(*share, self.bounds[1] - self.bounds[0], int(done.sum()), int(failed.sum()))
        waiting = ~done if retry_failed else ~(done | failed)
        self.queue = Queue(waiting, self.bounds[0], backwards=self._has_company())
        self.pace, self.in_flight, self.suspects = Pace(batch), dict[Future[Any], _Task](), deque[_Task]()
        self.wanted = workers or available_workers()
        self.may_widen = executor is None and self.wanted > 1
        self.crew: Crew = Here() if executor is None else Given(executor, workers)
        self.returned = self.died = 0
        self.looked = time.monotonic()

    def run(self) -> SweepReport:
        self._write_log()
        try:
            while self._hand_out():
                finished, _ = wait(self.in_flight, TICK, return_when=FIRST_COMPLETED)
                for future in finished:
                    if future in self.in_flight:
                        self._take_in(future, self.in_flight.pop(future))
                if time.monotonic() - self.looked > LOOK_AROUND:
                    self._look_around()
        except BaseException:
            self.log.state = "failed"
            raise
        finally:
            self.crew.close()
        return self._report()

    def _hand_out(self) -> bool:
        """Submit what there is room for; tell whether anything is still out."""
        if self.request.signal:
            for future in self.in_flight:
                future.cancel()
            return bool(self.in_flight)
        if self.suspects:  # alone, so that a death tells whose fault it is
            if not self.in_flight:
                self._submit(self.suspects.popleft())
            return True
        self._widen()
        while len(self.queue) and len(self.in_flight) < self.crew.depth and not self.suspects:
            self._submit(_Task(*self.queue.take(self.pace.batch(len(self.queue), self.crew.workers))))
        return bool(self.in_flight or self.suspects)

    def _widen(self) -> None:
        """Start processes once the work left is known to be worth it."""
        if self.may_widen and self.pace.seconds is not None and self.pace.seconds * len(self.queue) > SMALL:
            self.crew.close()
            self.crew = LocalProcesses(min(self.wanted, len(self.queue)), self.blob)
            self.log.workers = self.crew.workers
            self.may_widen = False

    def _submit(self, task: _Task) -> None:
        arguments = (self.key, task.start, task.stop, *((self.blob,) if task.with_plan else ()))
        try:
            self.in_flight[self.crew.submit(run_batch, *arguments)] = task
        except BrokenExecutor as error:
            self._lost([task], error)

    def _take_in(self, future: Future[Any], task: _Task) -> None:
        try:
            batch = future.result()
        except BrokenExecutor as error:
            self._lost([task], error)
        except CancelledError as error:
            if not self.request.signal:
                self._blame(task, error)
        except Exception as error:  # whatever an executor says of a worker that died, or could not read the plan
            self._blame(task, error)
        else:
            if batch is None:
                self._submit(_Task(task.start, task.stop, task.deaths, with_plan=True))
            else:
                self._keep(batch)

    def _keep(self, batch: Batch) -> None:
        self.store.write(batch)
        points, failed = batch.stop - batch.start, len(batch.errors)
        self.returned += 1
        self.pace.saw(points, float(batch.seconds.sum()))
        self.log.new += points
        self.log.done += points - failed
        self.log.failed += 0 if self.retry else failed
        self._tell()

    def _lost(self, tasks: list[_Task], error: BaseException) -> None:
        """Take back all that was out when the workers broke down, and replace them, unless the run is to end anyway."""
        wait(self.in_flight, TICK)
        for future in list(self.in_flight):
            if not (future.done() and not future.cancelled() and future.exception() is None):
                tasks.append(self.in_flight.pop(future))
        if self.request.signal:
            return
        if not self.crew.renew():
            raise SweepError(
                f"the executor broke ({_named(error)}); {self.log.new} points were finished and are safe; run it again"
            ) from error
        if len(tasks) == 1:
            self._blame(tasks[0], error)
        else:
            self._count_death(error)
            self.suspects.extend(tasks)

    def _blame(self, task: _Task, error: BaseException) -> None:
        """Do a batch again that died alone: in halves, or, if it is one point that did so before, not at all."""
        middle = (task.start + task.stop) // 2
        if middle > task.start:
            self.suspects.extend((_Task(task.start, middle), _Task(middle, task.stop)))
        elif task.deaths + 1 < WORKER_DEATHS:
            self.suspects.append(_Task(task.start, task.stop, task.deaths + 1))
        else:
            self._keep_failure(task, error)
        self._count_death(error)

    def _keep_failure(self, task: _Task, error: BaseException) -> None:
        kept = {
            column.name: empty((1, *(0 for _ in column.dims)), DTYPES[column.kind])
            for column in columns_of(self.store.plan.keep)
        }
        told = f"SweepError: the worker died or could not answer ({_named(error)}): out of memory, or a crash"
        self.store.write(Batch(task.start, task.stop, kept, np.zeros(1), {task.start: told}))
        self.log.new += 1
        self.log.failed += 0 if self.retry else 1
        self._tell()

    def _count_death(self, error: BaseException) -> None:
        self.died += 1
        if self.died >= HOPELESS and not self.returned:
            raise SweepError(
                f"the workers die before they finish anything ({_named(error)}); in a script of your own, start the "
                'sweep under: if __name__ == "__main__":'
            ) from error

    def _look_around(self) -> None:
        self.looked = time.monotonic()
        done, failed = self.store.progress(*self.bounds)
        self.queue.drop(done if self.retry else done | failed)
        self.log.done, self.log.failed = int(done.sum()), int(failed.sum())
        self._write_log()

    def _has_company(self) -> bool:
        """Tell whether another run works on these points: then one of them begins at the far end."""
        mine = (self.log.host, self.log.process)
        return any(
            run.is_alive
            and (run.host, run.process) != mine
            and (run.share - 1) * self.log.shares < self.log.share * run.shares
            and (self.log.share - 1) * run.shares < run.share * self.log.shares
            for run in runs_in(self.store.folder)
        )

    def _tell(self) -> None:
        self.log.updated = time.time()
        if self.watch is not None:
            self.watch(self.log)

    def _write_log(self) -> None:
        self.log.write(self.store.folder)
        self._tell()

    def _report(self) -> SweepReport:
        done, failed = self.store.progress(*self.bounds)
        self.log.done, self.log.failed = int(done.sum()), int(failed.sum())
        self.log.state = "finished" if self.log.done + self.log.failed == self.log.points else "stopped"
        self._write_log()
        return SweepReport(
            self.store.folder,
            self.log.points,
            self.log.done,
            self.log.failed,
            self.log.new,
            self.damaged,
            self.request.signal,
        )


def _named(error: BaseException) -> str:
    return f"{type(error).__name__}: {error}".strip().rstrip(":").splitlines()[0][:200]
