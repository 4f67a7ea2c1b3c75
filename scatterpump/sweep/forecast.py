"""What a plan will cost, from a timed sample of its points: the order of points makes any beginning a fair sample."""

from __future__ import annotations

import sys
import time
from dataclasses import dataclass
from math import ceil
from statistics import mean

from scatterpump.sweep.executors import Here
from scatterpump.sweep.plan import SweepPlan
from scatterpump.sweep.worker import run_points

__all__ = ["Forecast", "forecast", "job_lines"]

SAMPLE_SECONDS = 5.0
SAMPLE_POINTS = 50
MEMORY_RESERVE = 1.5
TIME_RESERVE = 1.5
GOOD_SHARE = (
    3600.0  # seconds of work a job should have: enough to be worth starting, little enough to be scheduled soon
)


@dataclass(frozen=True)
class Forecast:
    """The estimated cost of a plan.

    Attributes
    ----------
    points, sample : int
        Points of the plan, and how many of them were tried.
    failed : int
        How many of those failed.
    point_seconds : float
        Time for a point on one processor, the mean of the sample.
    slowest_seconds : float
        The longest that was met.
    memory : int
        Bytes a worker needs.
    stored : int
        Bytes of all results.
    """

    points: int
    sample: int
    failed: int
    point_seconds: float
    slowest_seconds: float
    memory: int
    stored: int

    @property
    def seconds(self) -> float:
        """Time for all points on one processor."""
        return self.points * self.point_seconds


def forecast(plan: SweepPlan) -> Forecast:
    """Try the first points of `plan` for some seconds; the very first, which loads everything, is not timed."""
    here = Here()
    try:
        failed = len(run_points(plan, 0, 1).errors)
        seconds, size, begun = [], 0, time.monotonic()
        for position in range(1, min(plan.size, SAMPLE_POINTS + 1)) or (0,):
            batch = run_points(plan, position % plan.size, position % plan.size + 1)
            seconds.append(float(batch.seconds[0]))
            failed += len(batch.errors)
            size = max(size, sum(array.nbytes for array in batch.columns.values()))
            if time.monotonic() - begun > SAMPLE_SECONDS:
                break
    finally:
        here.close()
    return Forecast(
        plan.size, len(seconds), failed, mean(seconds), max(seconds), _memory(), _stored(plan.size, size, mean(seconds))
    )


def job_lines(cost: Forecast, plan: str, into: str, processors: int = 1) -> list[str]:
    """Return the lines of a Slurm job array that does the plan in jobs of about an hour."""
    shares = max(1, ceil(cost.seconds / (processors * GOOD_SHARE)))
    share = cost.seconds / shares / processors
    minutes = ceil((TIME_RESERVE * share + 2 * cost.slowest_seconds) / 60) + 2
    return [
        f"#SBATCH --array=1-{shares}",
        f"#SBATCH --cpus-per-task={processors}",
        f"#SBATCH --mem-per-cpu={ceil(MEMORY_RESERVE * cost.memory / 2**20)}M",
        f"#SBATCH --time={minutes // 60:02d}:{minutes % 60:02d}:00",
        f"#SBATCH --signal=B:USR1@{max(60, ceil(3 * cost.slowest_seconds))}",
        f"exec scatterpump sweep {plan} --into {into}",
    ]


def _memory() -> int:
    """Most memory that this process held so far, in bytes."""
    try:
        import resource
    except ImportError:  # Windows does not have it
        return 500 * 2**20
    most = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return int(most if sys.platform == "darwin" else 1024 * most)


def _stored(points: int, bytes_a_point: int, seconds_a_point: float) -> int:
    """Bytes of all parts: their arrays, and two kilobytes around each batch."""
    batches = max(1.0, points * min(1.0, max(seconds_a_point, 0.00025) / 0.5))
    return int(points * (bytes_a_point + 16) + batches * 2_000)
