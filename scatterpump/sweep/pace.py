"""How many points go into a batch: as many as take half a second (or as long as is wanted), fewer towards the end.

A batch has to be long enough that handing it out costs nothing (a few milliseconds with most executors), and short
enough that a signal or a dead worker costs little.
"""

from __future__ import annotations

from collections import deque
from statistics import median_low

__all__ = ["WANTED", "Pace"]

WANTED = 0.5  # seconds a batch takes, unless told otherwise
RECENT = 5  # batches to judge by; their median does not mind the first, which imports everything
MOST = 5_000
GROWTH = 8  # a batch is at most so many times longer than the longest that was timed


class Pace:
    """What the latest batches say about the time a point takes."""

    def __init__(self, wanted: float = WANTED) -> None:
        self._wanted = wanted
        self._recent: deque[float] = deque(maxlen=RECENT)
        self._longest = 0

    @property
    def seconds(self) -> float | None:
        """Seconds a point, once two batches have told."""
        return median_low(self._recent) if len(self._recent) > 1 else None

    def saw(self, points: int, seconds: float) -> None:
        """Learn from a batch of so many points."""
        self._recent.append(seconds / points)
        self._longest = max(self._longest, points)

    def batch(self, left: int, workers: int) -> int:
        """Return how many points to hand out next, if so many are left for so many workers."""
        if self.seconds is None:
            return 1
        fitting = int(self._wanted / max(self.seconds, self._wanted / MOST))
        fair = -(-left // (2 * workers))
        return max(1, min(fitting, fair, GROWTH * self._longest))
