"""Where batches are worked off: here, in processes of this machine, or wherever a given executor takes them.

Anything with the interface of `concurrent.futures.Executor` serves: ``distributed.Client.get_executor(pure=False)``,
``mpi4py.futures.MPIPoolExecutor``, a pool of one's own.  There is no scheduler here.
"""

from __future__ import annotations

import multiprocessing
import os
from concurrent.futures import Executor, Future, ProcessPoolExecutor
from typing import Any, Protocol

from scatterpump.sweep.worker import ONE_THREAD, prepare_worker

__all__ = ["Crew", "Given", "Here", "LocalProcesses"]


class Crew(Protocol):
    """What a run needs of its workers.

    Attributes
    ----------
    workers : int
    depth : int
        Number of batches to have handed out at a time.
    """

    workers: int
    depth: int

    def submit(self, function: Any, /, *arguments: Any) -> Future[Any]: ...

    def renew(self) -> bool:
        """Replace workers of which one died; False if that is not possible here."""

    def close(self) -> None: ...


class Here:
    """This very process, one batch after the other."""

    workers = depth = 1

    def __init__(self) -> None:
        from threadpoolctl import threadpool_limits

        self._before = {name: os.environ.get(name) for name in ONE_THREAD}
        os.environ.update(ONE_THREAD)
        self._limits = threadpool_limits(1)

    def submit(self, function: Any, /, *arguments: Any) -> Future[Any]:
        future: Future[Any] = Future()
        future.set_running_or_notify_cancel()
        try:
            future.set_result(function(*arguments))
        except Exception as error:
            future.set_exception(error)
        return future

    def renew(self) -> bool:
        return False

    def close(self) -> None:
        self._limits.restore_original_limits()
        for name, value in self._before.items():
            if value is None:
                os.environ.pop(name, None)
            else:
                os.environ[name] = value


class LocalProcesses:
    """Processes of this machine, which are replaced when one of them dies.

    They are forked from a small server that has imported what they need, not from this process with its threads.
    """

    def __init__(self, workers: int, plan: bytes) -> None:
        self.workers, self.depth, self._plan = workers, 2 * workers, plan
        methods = multiprocessing.get_all_start_methods()
        self._context = multiprocessing.get_context("forkserver" if "forkserver" in methods else "spawn")
        if "forkserver" in methods:
            self._context.set_forkserver_preload(["scatterpump.sweep.server", "kwant"])
        self._start()

    def submit(self, function: Any, /, *arguments: Any) -> Future[Any]:
        return self._pool.submit(function, *arguments)

    def renew(self) -> bool:
        self._end(wait=False)
        for child in multiprocessing.active_children():
            if child.pid in self._pids:
                child.kill()  # they ignore the gentler signals
        self._start()
        return True

    def close(self) -> None:
        self._end(wait=True)

    def _start(self) -> None:
        before = {child.pid for child in multiprocessing.active_children()}
        self._pool = ProcessPoolExecutor(self.workers, self._context, prepare_worker, (self._plan,))
        self._pool.submit(os.getpid)  # starts the processes
        self._pids = {child.pid for child in multiprocessing.active_children()} - before

    def _end(self, *, wait: bool) -> None:
        self._pool.shutdown(wait=wait, cancel_futures=True)


class Given:
    """An executor handed in, which is neither prepared nor closed here."""

    def __init__(self, executor: Executor, workers: int | None) -> None:
        known = getattr(executor, "num_workers", None) or getattr(executor, "_max_workers", None)
        self.workers = workers or (known if isinstance(known, int) else UNKNOWN)
        self.depth, self._executor = 2 * self.workers, executor

    def submit(self, function: Any, /, *arguments: Any) -> Future[Any]:
        return self._executor.submit(function, *arguments)

    def renew(self) -> bool:
        return False

    def close(self) -> None:
        pass


UNKNOWN = 8  # workers an executor is thought to have that does not tell
