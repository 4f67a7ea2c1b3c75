"""``scatterpump sweep PLAN --into DIR``: work off a plan, or the rest of it, or a share of it."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from scatterpump.cli.common import named
from scatterpump.errors import InputError, SweepError
from scatterpump.sweep.signals import RESUME, stop_on_signals

if TYPE_CHECKING:
    from scatterpump.sweep.plan import SweepPlan

__all__ = ["sweep"]

ALL_DONE, SOME_FAILED, CANNOT_GO_ON = 0, 1, 74  # the last is EX_IOERR of sysexits.h


@click.command()
@click.argument("plan", type=click.Path(path_type=Path))
@click.option("--into", type=click.Path(path_type=Path), help="Folder for the results; one begun before is continued.")
@click.option("--share", metavar="K/N", help="Do share K of N; without it, what the scheduler's array variables say.")
@click.option("--workers", type=click.IntRange(1), help="Local processes; without it, as many as are granted here.")
@click.option(
    "--executor",
    type=click.Choice(["auto", "mpi"]),
    default="auto",
    help="mpi: the ranks of mpiexec, all but the first as workers.",
)
@click.option(
    "--dask", metavar="ADDRESS", help="Work on a dask cluster: its scheduler's address, or its scheduler file."
)
@click.option("--retry-failed", is_flag=True, help="Do the points again that failed.")
@click.option(
    "--batch", type=float, default=0.5, show_default=True, help="Seconds of work in each file that is written."
)
@click.option("--dry-run", is_flag=True, help="Only try a few points, and say what the plan will cost.")
def sweep(
    plan: Path,
    into: Path | None,
    share: str | None,
    workers: int | None,
    executor: str,
    dask: str | None,
    retry_failed: bool,
    batch: float,
    dry_run: bool,
) -> None:
    """Work off PLAN, a TOML file with a table [sweep], into a folder.

    What the folder holds already is not done again: the same command continues a run that was stopped or killed.

    Exit code 0: all points are done; 1: some failed; 2: bad input; 74: the results cannot be written, or the workers
    die; 75: stopped by SIGTERM, SIGUSR1 or Ctrl-C after finishing the running batch: run it again.
    """
    with stop_on_signals() as request:
        from scatterpump.sweep.plan_file import load_plan
        from scatterpump.sweep.run import run_sweep
        from scatterpump.sweep.share import share_of
        from scatterpump.sweep.watch import shown

        with named(plan):
            loaded = load_plan(plan)
        if dry_run:
            _forecast(loaded, plan, into, workers)
            return
        if into is None:
            raise InputError("there is no folder for the results", allowed="--into FOLDER", where="--into")
        try:
            with _executor(executor, dask) as (pool, size), shown() as watch:
                report = run_sweep(
                    loaded,
                    into,
                    executor=pool,
                    workers=size or workers,
                    share=share_of(share),
                    retry_failed=retry_failed,
                    batch=batch,
                    watch=watch,
                    request=request,
                )
        except SweepError as error:
            click.echo(f"scatterpump: {error}", err=True)
            raise SystemExit(CANNOT_GO_ON) from error
    if report.damaged:
        click.echo(f"{report.damaged} damaged files were set aside and their points done again", err=True)
    click.echo(f"{report.done} of {report.points} points done, {report.failed} failed, {report.missing} missing")
    if report.missing:
        click.echo(f"stopped by {report.stopped_by or 'the end of the run'}; the same command does the rest", err=True)
        raise SystemExit(RESUME)
    raise SystemExit(SOME_FAILED if report.failed else ALL_DONE)


@contextmanager
def _executor(kind: str, dask: str | None) -> Iterator[tuple[Any, int | None]]:
    """Yield an executor and the number of its workers, or (None, None) to work on this machine."""
    if dask is not None:
        with _dask(dask) as found:
            yield found
    elif kind == "mpi":
        with _mpi() as found:
            yield found
    else:
        yield None, None


@contextmanager
def _dask(address: str) -> Iterator[tuple[Any, int]]:
    try:
        import distributed

        connect: Any = distributed.Client  # which has no annotations
    except ImportError as error:
        raise InputError("distributed is not installed", allowed="pip install 'scatterpump[cluster]'") from error
    client: Any
    try:
        client = connect(scheduler_file=address) if Path(address).is_file() else connect(address)
    except (OSError, ValueError) as error:
        raise InputError(
            f"there is no dask scheduler at {address!r}", allowed="an address such as tcp://host:8786", where="--dask"
        ) from error
    with client:
        client.wait_for_workers(1)
        yield client.get_executor(pure=False), sum(client.nthreads().values())


@contextmanager
def _mpi() -> Iterator[tuple[Any, int]]:
    import signal

    try:
        from mpi4py import MPI
        from mpi4py.futures import MPICommExecutor
    except ImportError as error:
        raise InputError("mpi4py is not installed", allowed="pip install 'scatterpump[mpi]'") from error
    ranks = MPI.COMM_WORLD.Get_size()
    if ranks < 2:
        raise InputError(
            "there is only one rank", allowed="mpiexec -n 3 scatterpump sweep ... --executor mpi", where="--executor"
        )
    if MPI.COMM_WORLD.Get_rank() > 0:
        signal.signal(signal.SIGUSR1, signal.SIG_IGN)  # rank 0 heeds it, and lets the others finish
    with MPICommExecutor(MPI.COMM_WORLD, root=0) as pool:
        if pool is not None:
            yield pool, ranks - 1
            return
    raise SystemExit(ALL_DONE)  # a worker whose work is done


def _forecast(plan: SweepPlan, path: Path, into: Path | None, workers: int | None) -> None:
    from scatterpump.sweep.forecast import forecast, job_lines
    from scatterpump.sweep.share import available_workers
    from scatterpump.sweep.watch import duration

    cost = forecast(plan)
    processors = workers or available_workers()
    shape = " x ".join(f"{len(axis)} {axis.name}" for axis in plan.axes)
    click.echo(f"points        {cost.points} ({shape})")
    failed = f", {cost.failed} of them failed" if cost.failed else ""
    alone, together = duration(cost.seconds), duration(cost.seconds / processors)
    sample = f"{duration(cost.point_seconds)} a point, the mean of {cost.sample}{failed}"
    click.echo(f"time          {alone} on one processor, {together} on {processors}: {sample}")
    click.echo(f"memory        {cost.memory / 2**20:.0f} MB a worker")
    click.echo(f"results       {cost.stored / 2**20:.2f} MB")
    click.echo("\njob script for Slurm, in jobs of about an hour (see also examples/cluster):\n\n#!/bin/bash")
    for line in job_lines(cost, str(path), str(into or "RESULTS")):
        click.echo(line)
