"""What a sweep costs beside its points: overhead, speed-up, resuming, merging.

    python benchmarks/sweep.py [--json FILE] [--points 400] [--stored 100000]

Each speed-up is the median ratio of paired repeats of the same points in one and in two processes, both of the local
pool, started and warm before the clock runs, in batches of about 0.3 s as a run hands them out.  Beside it stands what
pure arithmetic gained from the second process in between.  The overhead is what points that cost nothing need.
"""

from __future__ import annotations

import argparse
import json
import os
import tempfile
import time
from collections.abc import Callable
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path
from statistics import median
from typing import Any

import cloudpickle
import numpy as np

import scatterpump as sp
from scatterpump.sweep import driver
from scatterpump.sweep.executors import Here, LocalProcesses
from scatterpump.sweep.quantities import QUANTITIES, Column, Quantity
from scatterpump.sweep.store import Store
from scatterpump.sweep.worker import Batch, run_batch, run_points

REPEATS = 5
PHASES = {"layered": 32, "direct": 8}
SECONDS = 0.3  # of each batch that is timed
LEAST_BATCHES = 16  # an odd one out costs two processes little then
STORED = 20  # points in each stored batch
GOALS = {"speed-up": 1.8, "resume": 5.0, "gather": 30.0}

QUANTITIES["nothing"] = Quantity("nothing", (Column("nothing", "a number"),), lambda point: (1.0,))


def device(**_: Any) -> Any:
    return None


def map_plan(points: int, engine: str) -> sp.SweepPlan:
    """The map that is timed: r of a chain of 30 sites over Fermi level and disorder, at `PHASES`."""
    content = {
        "sites": 30,
        "onsite": [{"amplitude": 1.5, "period": 3}],
        "probe": {"hopping": 2.0},
        "drain": {"hopping": 2.0},
        "disorder": {"onsite": 0.2},
    }
    axes = [sp.Axis.even("fermi_level", -1.5, -1.0, points // 10), sp.Axis.seeds(10)]
    return sp.SweepPlan(content, axes, keep=("sampled",), phases=PHASES[engine], engine=engine)


def empty_plan(points: int) -> sp.SweepPlan:
    return sp.SweepPlan(device, [sp.Axis("x", range(points))], keep=("nothing",))


def overhead(points: int) -> float:
    """Seconds a point that costs nothing needs in a serial run, writing included."""
    with tempfile.TemporaryDirectory() as folder:
        begun = time.perf_counter()
        sp.run_sweep(empty_plan(points), folder, workers=1)
        return (time.perf_counter() - begun) / points


def overhead_in_processes(plan: sp.SweepPlan, points: int, size: int) -> float:
    """Seconds that a point of the map needs more in one process of a pool, handed out and written, than alone."""
    more = []
    here = Here()
    pool = LocalProcesses(1, cloudpickle.dumps(plan))
    run_points(plan, 0, 1)
    pool.submit(run_batch, plan.fingerprint, 0, 1).result()
    for _ in range(REPEATS):
        alone = seconds(lambda: run_points(plan, 0, points))
        with tempfile.TemporaryDirectory() as folder:
            store = Store.open(folder, plan)
            more.append(seconds(lambda store=store: work(pool, plan, points, size, store)) - alone)
    pool.close()
    here.close()
    return median(more) / points


def seconds(job: Callable[[], Any]) -> float:
    begun = time.perf_counter()
    job()
    return time.perf_counter() - begun


def work(pool: LocalProcesses, plan: sp.SweepPlan, points: int, size: int, store: Store | None = None) -> None:
    """Work off the plan in batches of `size` points, as a run does."""
    futures = [
        pool.submit(run_batch, plan.fingerprint, start, min(start + size, points)) for start in range(0, points, size)
    ]
    for future in futures:
        batch = future.result()
        if store is not None:
            store.write(batch)


def batch_size(plan: sp.SweepPlan, points: int) -> int:
    """How many of the points make a batch: `SECONDS` of them, but fewer where that leaves too few batches."""
    run_points(plan, 0, 2)
    each = seconds(lambda: run_points(plan, 0, 10)) / 10
    return max(1, min(round(SECONDS / each), points // LEAST_BATCHES))


def speed_up(plan: sp.SweepPlan, points: int, size: int) -> dict[str, Any]:
    """Time the same batches in one and in two processes, one after the other, and that several times."""
    blob = cloudpickle.dumps(plan)
    pools = {workers: LocalProcesses(workers, blob) for workers in (1, 2)}
    for workers, pool in pools.items():  # every process has worked once before the clock runs
        for future in [pool.submit(run_batch, plan.fingerprint, 0, 1) for _ in range(8 * workers)]:
            future.result()
    times: dict[int, list[float]] = {1: [], 2: []}
    machine = []
    for _ in range(REPEATS):
        for workers, pool in pools.items():
            times[workers].append(seconds(lambda pool=pool: work(pool, plan, points, size)))
        machine.append(busy_ratio())
    for pool in pools.values():
        pool.close()
    ratios = [one / two for one, two in zip(times[1], times[2], strict=True)]
    return {
        "batches": -(-points // size),
        "one_process_s": median(times[1]),
        "two_processes_s": median(times[2]),
        "ratio": median(ratios),
        "ratios": ratios,
        "of_machine": median(machine),
    }


def busy_ratio() -> float:
    """What two processes of pure arithmetic reach on this machine now: what no sweep can exceed."""
    with ProcessPoolExecutor(2) as pool:
        list(pool.map(spin, [1, 1]))
        begun = time.perf_counter()
        pool.submit(spin, 40).result()
        one = time.perf_counter() - begun
        begun = time.perf_counter()
        list(pool.map(spin, [20, 20]))
        return one / (time.perf_counter() - begun)


def spin(rounds: int) -> int:
    return sum(i * i for _ in range(rounds) for i in range(100_000))


def resume_and_gather(points: int, size: int) -> tuple[float, float, float]:
    """Seconds to write `points` in batches of `size`, to find that nothing is missing, and to merge them."""
    plan = empty_plan(points)
    with tempfile.TemporaryDirectory() as folder:
        store = Store.open(folder, plan)
        begun = time.perf_counter()
        for start in range(0, points, size):
            stop = min(start + size, points)
            store.write(Batch(start, stop, {"nothing": np.ones(stop - start)}, np.ones(stop - start), {}))
        written = time.perf_counter() - begun
        begun = time.perf_counter()
        report = sp.run_sweep(plan, folder, workers=1)
        resumed = time.perf_counter() - begun
        begun = time.perf_counter()
        data = sp.gather_sweep(folder)
        from scatterpump.sweep.gather import write_netcdf

        write_netcdf(data, Path(folder) / "map.nc")
        gathered = time.perf_counter() - begun
        assert report.new == 0 and int((data.status == 1).sum()) == points
    return written, resumed, gathered


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--json", type=Path)
    parser.add_argument("--points", type=int, default=400)
    parser.add_argument("--stored", type=int, default=100_000)
    options = parser.parse_args()
    driver.SMALL = np.inf  # no processes but those that are timed
    found: dict[str, Any] = {"load_before": os.getloadavg()[0], "processors": os.cpu_count()}
    print(f"load of the machine before: {found['load_before']:.2f} on {found['processors']} processors")

    found["empty_point_s"] = overhead(2000)
    print(f"a point that costs nothing, serial, written: {1000 * found['empty_point_s']:.3f} ms")
    for engine in ("layered", "direct"):
        plan = map_plan(options.points, engine)
        size = batch_size(plan, options.points)
        found[engine] = row = speed_up(plan, options.points, size)
        row["overhead_s"] = overhead_in_processes(plan, options.points // 4, size)
        alone, more = 1000 * row["one_process_s"] / options.points, 1000 * row["overhead_s"]
        print(
            f"{engine:<8} {alone:.1f} ms a point, {more:+.2f} ms in a process and written; {row['batches']} batches in "
            f"two processes {row['ratio']:.2f} times faster, {min(row['ratios']):.2f} to {max(row['ratios']):.2f} "
            f"(goal {GOALS['speed-up']}; pure arithmetic {row['of_machine']:.2f})",
            flush=True,
        )
    for size, points in ((STORED, options.stored), (1, options.stored // 10)):
        written, resumed, gathered = resume_and_gather(points, size)
        found[f"batches_of_{size}"] = {"write_s": written, "resume_s": resumed, "gather_s": gathered}
        print(
            f"{points} points in batches of {size}: written in {written:.1f} s, resumed in {resumed:.2f} s "
            f"(goal {GOALS['resume']:.0f}), merged in {gathered:.1f} s (goal {GOALS['gather']:.0f})",
            flush=True,
        )
    if options.json:
        options.json.write_text(json.dumps(found, indent=2) + "\n")


if __name__ == "__main__":
    main()
