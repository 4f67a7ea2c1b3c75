"""How far a run is: a bar on a terminal, a line a minute in a log."""

from __future__ import annotations

import io
import sys
from typing import Any

import pytest

from scatterpump.sweep import watch
from scatterpump.sweep.journal import Run
from scatterpump.sweep.watch import duration, shown

# All here is derived.


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def further(run: Run, points: int) -> Run:
    run.done, run.new = run.done + points, run.new + points
    run.updated = run.started + run.new
    return run


@pytest.fixture
def clock(monkeypatch: pytest.MonkeyPatch) -> list[float]:
    now = [1000.0]
    monkeypatch.setattr(watch.time, "monotonic", lambda: now[0])
    return now


def test_terminal_shows_points_rate_and_failures(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sys, "stderr", Terminal())
    run = Run(3, 16, 50, done=10)
    with shown() as show:
        show(run)
        run.failed = 2
        show(further(run, 38))
    last = sys.stderr.getvalue().rstrip().rpartition("\r")[2]  # type: ignore[attr-defined]
    assert "share 3/16: 100%" in last and "50/50" in last and "points/s" in last and "2 failed" in last


def test_log_gets_a_line_a_minute(capsys: pytest.CaptureFixture[str], clock: list[float]) -> None:
    run = Run(1, 1, 100)
    with shown() as show:
        for _ in range(9):
            show(further(run, 10))
            clock[0] += 20.0
        run.state = "finished"
        show(further(run, 10))
    lines = capsys.readouterr().err.splitlines()
    assert len(lines) == 4
    assert "share 1/1, running: 10 of 100 points done, 0 failed, 1 a second, 90 s left" in lines[0]
    assert "finished: 100 of 100 points done" in lines[-1]


@pytest.mark.parametrize(
    ("seconds", "words"),
    [(0.0123, "12.3 ms"), (5.0, "5 s"), (200.0, "3.33 min"), (7200.0, "2 h"), (260_000.0, "3.01 days")],
)
def test_duration_is_told_as_a_person_would(seconds: Any, words: str) -> None:
    assert duration(seconds) == words
