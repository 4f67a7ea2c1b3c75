"""The entrance to a sweep: a plan, a folder, and whatever there is to work on."""

from __future__ import annotations

from concurrent.futures import Executor
from math import inf
from pathlib import Path

from scatterpump.errors import InputError
from scatterpump.sweep.driver import Driver, SweepReport, Watcher
from scatterpump.sweep.pace import WANTED
from scatterpump.sweep.plan import SweepPlan
from scatterpump.sweep.plan_file import load_plan
from scatterpump.sweep.signals import Request, stop_on_signals
from scatterpump.sweep.store import Store

__all__ = ["SweepReport", "run_sweep"]


def run_sweep(
    plan: SweepPlan | str | Path,
    into: str | Path,
    *,
    executor: Executor | None = None,
    workers: int | None = None,
    share: tuple[int, int] = (1, 1),
    retry_failed: bool = False,
    batch: float = WANTED,
    watch: Watcher | None = None,
    request: Request | None = None,
) -> SweepReport:
    """Do what is missing of a plan, and keep it in a folder.

    Parameters
    ----------
    plan : SweepPlan or path
        A plan, or a plan file.
    into : path
        The folder; one that was begun with the same plan is continued.
    executor : concurrent.futures.Executor, optional
        Where to work.  By default here, and in processes of this machine if that would take more than some seconds;
        a script that starts those needs ``if __name__ == "__main__":``.
    workers : int, optional
        Number of local processes (by default what the scheduler grants, or the machine has), or of the executor's
        workers if it does not tell.
    share : (number, count)
        Which share of the points to do, counted from 1.
    retry_failed : bool
        Do the points again that failed.
    batch : float
        Seconds of work that are handed out, and written to one file, at a time.  A signal waits as long; a sweep of
        millions of points is better off with 5 than with 400 000 files.
    watch : callable, optional
        Called with the `Run` whenever it is further.
    request : Request, optional
        Of `stop_on_signals`, if signals are listened to already; by default they are while this runs.

    Raises
    ------
    InputError
        If the plan cannot be used, or the folder belongs to another one.
    SweepError
        If results cannot be written, or workers die before they finish anything.  What is finished is safe.
    """
    if not 1 <= share[0] <= share[1]:
        raise InputError(f"share is {share!r}", allowed="(number, count) with number from 1 to count")
    if workers is not None and (isinstance(workers, bool) or not isinstance(workers, int) or workers < 1):
        raise InputError(f"workers is {workers!r}", allowed="a whole number of at least 1")
    if not 0 < batch < inf:
        raise InputError(f"batch is {batch!r}", allowed="a positive number of seconds")
    plan = plan if isinstance(plan, SweepPlan) else load_plan(plan)
    store = Store.open(into, plan)
    if request is not None:
        return Driver(store, executor, workers, share, retry_failed, batch, watch, request).run()
    with stop_on_signals() as heard:
        return Driver(store, executor, workers, share, retry_failed, batch, watch, heard).run()
