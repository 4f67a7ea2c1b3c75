"""One plan gives the same numbers wherever it is worked off."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Iterator
from concurrent.futures import BrokenExecutor, Executor, Future, ThreadPoolExecutor
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from sweep_toys import assert_whole, deadly_once, rows_of, toy_plan

from scatterpump.errors import SweepError
from scatterpump.sweep import driver
from scatterpump.sweep.gather import gather_sweep
from scatterpump.sweep.run import run_sweep

EXAMPLES = Path(__file__).parents[1] / "examples" / "cluster"
BIN = Path(sys.executable).parent

PLAN = """
sites = 12
onsite = [{amplitude = 1.5, period = 3}]
probe = {hopping = 2.0}
drain = {hopping = 2.0}
disorder = {onsite = 0.2}

[sweep]
keep = ["sampled", "reflection"]
phases = 24

[[sweep.axis]]
key = "fermi_level"
from = -1.5
to = -1.0
points = 20

[[sweep.axis]]
key = ["probe.contact", "drain.contact"]
name = "contact"
values = [1.0, 0.5]

[[sweep.axis]]
seeds = 5
"""

# The first solution of a process differs by rounding from later ones, by some 1e-14; a wrong point is off by 1e-3.
EQUAL = 1e-10


@pytest.fixture(scope="module")
def plan(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("plan") / "map.toml"
    path.write_text(PLAN)
    return path


@pytest.fixture(scope="module")
def serial(plan: Path, tmp_path_factory: pytest.TempPathFactory) -> Any:
    folder = tmp_path_factory.mktemp("serial")
    assert run_sweep(plan, folder, workers=1).done == 200
    return gather_sweep(folder)


def command(*arguments: object) -> subprocess.CompletedProcess[str]:
    environment = {**os.environ, "PATH": f"{BIN}{os.pathsep}{os.environ['PATH']}"}
    return subprocess.run([*map(str, arguments)], capture_output=True, text=True, env=environment)


def assert_same(serial: Any, folder: Path) -> None:
    other = gather_sweep(folder)
    assert (other.status == 1).all()
    assert set(other.variables) == set(serial.variables)
    np.testing.assert_array_equal(other.sampled_integer, serial.sampled_integer)
    for name in ("largest_step", "sampled_leak", "reflection_real", "reflection_imag", "sampled_leak_quantiles"):
        np.testing.assert_allclose(other[name], serial[name], rtol=0, atol=EQUAL)


def test_serial_results_are_what_they_should_be(serial: Any) -> None:
    # D. J. Thouless et al., Phys. Rev. Lett. 49, 405 (1982): +1 in the middle of the lowest gap (sign derived)
    assert dict(serial.status.sizes) == {"fermi_level": 20, "contact": 2, "disorder_seed": 5}
    assert (serial.sampled_integer.sel(contact=1.0, fermi_level=-1.21, method="nearest") == 1).all()
    assert len(np.unique(serial.sampled_leak)) == 200


def test_processes_give_the_same(plan: Path, serial: Any, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(driver, "SMALL", 0.0)
    watched: list[int] = []
    run_sweep(plan, tmp_path, workers=2, watch=lambda log: watched.append(log.workers))
    assert watched[-1] == 2
    assert_same(serial, tmp_path)


def test_three_ranks_of_mpi_give_the_same(plan: Path, serial: Any, tmp_path: Path) -> None:
    done = command(EXAMPLES / "mpi.sh", 3, plan, tmp_path)
    assert (done.returncode, done.stdout) == (0, "200 of 200 points done, 0 failed, 0 missing\n"), done.stderr
    assert_same(serial, tmp_path)


def test_two_workers_of_dask_give_the_same(plan: Path, serial: Any, tmp_path: Path) -> None:
    done = command(sys.executable, EXAMPLES / "dask_cluster.py", plan, tmp_path, "--jobs", 2, "--local")
    assert (done.returncode, done.stdout) == (0, "200 of 200 points done, 0 failed, 0 missing\n"), done.stderr
    assert_same(serial, tmp_path)


def test_job_script_of_dask_workers() -> None:
    """What dask would submit, without Slurm: one thread a worker, for a solver that is not made for threads."""
    program = f"import sys; sys.path.insert(0, {str(EXAMPLES)!r}); import dask_cluster; " + (
        "cluster = dask_cluster.start(False, 0, 'lo'); print(cluster.job_script()); cluster.close()"
    )
    script = command(sys.executable, "-c", program).stdout
    assert "--nthreads 1" in script
    assert "export SCOTCH_PTHREAD_NUMBER=1" in script


def test_one_rank_is_refused(plan: Path, tmp_path: Path) -> None:
    done = command(BIN / "scatterpump", "sweep", plan, "--into", tmp_path, "--executor", "mpi")
    assert done.returncode == 2
    assert "there is only one rank; allowed: mpiexec -n 3" in done.stderr
    assert len(done.stderr.splitlines()) == 1


@pytest.fixture
def cluster() -> Iterator[Any]:
    from distributed import LocalCluster

    # Port 0 is any free one; with None dask takes 8787, which another test or another user may hold.
    with LocalCluster(n_workers=2, threads_per_worker=1, host="127.0.0.1", dashboard_address="127.0.0.1:0") as started:
        yield started


def test_killed_worker_of_dask_costs_nothing(cluster: Any, tmp_path: Path) -> None:
    grave = tmp_path / "grave"
    with cluster.get_client() as client:
        report = run_sweep(
            toy_plan(deadly_once, 40, grave=str(grave)),
            tmp_path / "out",
            executor=client.get_executor(pure=False),
            workers=2,
        )
    assert grave.exists()
    assert (report.done, report.failed, report.missing) == (40, 0, 0)
    assert_whole(tmp_path / "out", 40)


class Failing(Executor):
    """Loses every batch that holds position 5, as an executor does whose worker died."""

    def __init__(self, error: type[Exception]) -> None:
        self.error = error

    def submit(self, function: Any, /, *arguments: Any, **named: Any) -> Future[Any]:
        future: Future[Any] = Future()
        _, start, stop, *_ = arguments
        if start <= 5 < stop:
            future.set_exception(self.error("gone"))
        else:
            future.set_result(function(*arguments))
        return future


def test_lost_batches_are_halved_until_the_guilty_point_is_found(tmp_path: Path) -> None:
    report = run_sweep(toy_plan(), tmp_path, executor=Failing(RuntimeError), workers=2)
    assert (report.done, report.failed, report.missing) == (11, 1, 0)
    points, values = rows_of(tmp_path)
    assert sorted(points) == list(range(12))
    assert np.isnan(values).sum() == 1


def test_broken_executor_of_somebody_elses_is_an_error(tmp_path: Path) -> None:
    with pytest.raises(SweepError, match="the executor broke.*run it again"):
        run_sweep(toy_plan(), tmp_path, executor=Failing(BrokenExecutor), workers=2)
    assert run_sweep(toy_plan(), tmp_path, workers=1).missing == 0
    assert_whole(tmp_path)


def test_any_executor_serves(tmp_path: Path) -> None:
    with ThreadPoolExecutor(2) as pool:
        run_sweep(toy_plan(), tmp_path, executor=pool)
    assert_whole(tmp_path)
