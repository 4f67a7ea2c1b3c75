"""Cycles: the values they set, where their corners are, and what reversing, repeating and shifting does."""

from __future__ import annotations

from math import cos, pi, sin
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from scatterpump.cycle import Cycle
from scatterpump.errors import InputError

TURN = 2 * pi
PHASES = st.floats(-20, 20)
SQUARE = {"left": [0.0, 1.0, 1.0, 0.0, 0.0], "right": [0.0, 0.0, 1.0, 1.0, 0.0]}
WAVE = {"level": list(np.cos(np.linspace(0, TURN, 41)))}
ELLIPSE = Cycle.ellipse(x=("delta", 0.1, 0.6), y=("stagger", -0.2, 0.5))


def same(first: dict[str, float], second: dict[str, float], tolerance: float = 1e-12) -> bool:
    return first == pytest.approx(second, abs=tolerance)


@given(PHASES)
@settings(derandomize=True, deadline=None)
def test_angle_is_the_phase_itself(phase: float) -> None:
    # derived: definition
    assert Cycle.angle().at(phase) == {"phi": phase}
    assert Cycle.angle("flux").names == ("flux",)


@given(PHASES)
@settings(derandomize=True, deadline=None)
def test_ellipse_goes_counter_clockwise_from_its_first_axis(phase: float) -> None:
    # derived: definition
    assert same(ELLIPSE.at(phase), {"delta": 0.1 + 0.6 * cos(phase), "stagger": -0.2 + 0.5 * sin(phase)})
    assert ELLIPSE.names == ("delta", "stagger")
    assert (ELLIPSE.corners, ELLIPSE.straight) == ((), False)


def test_ellipse_refuses_one_name_for_both_axes() -> None:
    with pytest.raises(InputError, match="'x'"):
        Cycle.ellipse(x=("x", 0.0, 1.0), y=("x", 0.0, 1.0))


@pytest.mark.parametrize("bad", [float("nan"), float("inf")])
def test_ellipse_refuses_what_is_not_finite(bad: float) -> None:
    with pytest.raises(InputError, match="not finite"):
        Cycle.ellipse(x=("x", 0.0, bad), y=("y", 0.0, 1.0))


@pytest.mark.parametrize("curve", ["linear", "spline"])
def test_trace_goes_through_its_points(curve: str) -> None:
    cycle = Cycle.through(SQUARE, curve=curve)
    # derived: four equal steps
    for number, point in enumerate(zip(SQUARE["left"], SQUARE["right"], strict=True)):
        assert same(cycle.at(TURN * number / 4), dict(zip(("left", "right"), point, strict=True)))


@given(st.integers(0, 3), st.floats(0, 1), st.integers(-3, 3))
@settings(derandomize=True, deadline=None)
def test_linear_trace_is_straight_between_its_points(side: int, share: float, laps: int) -> None:
    found = Cycle.through(SQUARE).at(TURN * ((side + share) / 4 + laps))
    # derived: definition
    expected = {name: values[side] + share * (values[side + 1] - values[side]) for name, values in SQUARE.items()}
    assert same(found, expected, 1e-11)


def test_linear_trace_says_where_its_corners_are() -> None:
    cycle = Cycle.through(SQUARE)
    # derived: definition
    assert cycle.corners == pytest.approx((0, pi / 2, pi, 3 * pi / 2))
    assert cycle.straight


def test_spline_has_no_corner_and_bends() -> None:
    cycle = Cycle.through(WAVE, curve="spline")
    # derived; the error of a cubic spline is at most 5/384 h^4 max|f''''|,
    # C. A. Hall, W. W. Meyer, J. Approx. Theory 16, 105 (1976) (citation from memory)
    assert (cycle.corners, cycle.straight) == ((), False)
    bound = 5 / 384 * (TURN / 40) ** 4
    assert max(abs(cycle.at(phase)["level"] - cos(phase)) for phase in np.linspace(-TURN, 2 * TURN, 500)) <= bound


def test_spline_is_smooth_where_it_closes() -> None:
    cycle, step = Cycle.through(SQUARE, curve="spline"), 1e-5
    before, at, after = (cycle.at(phase)["left"] for phase in (-step, 0.0, step))
    # derived: a corner would show a jump of the slope of order 1
    assert (after - at) / step == pytest.approx((at - before) / step, abs=1e-3)


def test_trace_from_a_file_is_the_trace_from_its_columns(tmp_path: Path) -> None:
    path = tmp_path / "trace.csv"
    path.write_text("# recorded\nleft, right\n0,0\n1,0\n\n1,1\n# a remark\n0,1\n0,0\n", encoding="utf-8-sig")
    # derived
    for phase in (0.0, 0.4, 2.0, 5.9):
        assert same(Cycle.through(path).at(phase), Cycle.through(SQUARE).at(phase))


@pytest.mark.parametrize(
    ("table", "message"),
    [
        ({"x": [0.0, 1.0, 2.0, 1.0]}, "open: 'x' starts at 0 and ends at 1"),
        ({"x": [0.0, 1.0, 0.0]}, "at least four rows"),
        ({"x": [0.0, 1.0, 2.0, 0.0], "y": [0.0, 1.0, 2.0, 3.0, 0.0]}, "equal length"),
        ({"x": [0.0, float("nan"), 1.0, 0.0]}, "row 2, column 'x' is not finite"),
        ({"x": [0.0, 1.0, float("inf"), 0.0]}, "row 3, column 'x' is not finite"),
        ({}, "named columns"),
    ],
)
def test_trace_that_is_no_cycle_is_refused(table: dict[str, list[float]], message: str) -> None:
    with pytest.raises(InputError, match=message):
        Cycle.through(table)


def test_unknown_curve_is_refused() -> None:
    with pytest.raises(InputError, match="curve is 'cubic'"):
        Cycle.through(SQUARE, curve="cubic")


CYCLES = st.sampled_from([ELLIPSE, Cycle.through(SQUARE), Cycle.through(WAVE), Cycle.through(WAVE, curve="spline")])


@given(CYCLES, PHASES)
@settings(derandomize=True, deadline=None)
def test_cycles_close(cycle: Cycle, phase: float) -> None:
    # derived: definition
    assert same(cycle.at(phase), cycle.at(phase + TURN), 1e-11)


@given(CYCLES, PHASES)
@settings(derandomize=True, deadline=None)
def test_reversed_runs_backwards_and_twice_is_nothing(cycle: Cycle, phase: float) -> None:
    # derived: definition
    assert cycle.reversed().at(phase) == cycle.at(-phase)
    assert cycle.reversed().reversed().at(phase) == cycle.at(phase)


@given(CYCLES, PHASES, st.integers(1, 5))
@settings(derandomize=True, deadline=None)
def test_repeated_runs_faster(cycle: Cycle, phase: float, times: int) -> None:
    # derived: definition
    assert cycle.repeated(times).at(phase) == cycle.at(times * phase)


@given(CYCLES, PHASES, st.floats(-7, 7))
@settings(derandomize=True, deadline=None)
def test_started_at_shifts_the_phase(cycle: Cycle, phase: float, start: float) -> None:
    # derived: definition
    assert cycle.started_at(start).at(phase) == cycle.at(phase + start)


CHANGES = st.sampled_from(
    [
        lambda cycle: cycle,
        lambda cycle: cycle.reversed(),
        lambda cycle: cycle.repeated(3),
        lambda cycle: cycle.started_at(0.3),
        lambda cycle: cycle.repeated(2).started_at(1.1).reversed(),
    ]
)


@given(CHANGES)
@settings(derandomize=True, deadline=None)
def test_corners_move_with_the_path(change) -> None:
    cycle, step = change(Cycle.through(SQUARE)), 1e-6

    def bend(phase: float) -> float:
        before, at, after = (np.array(list(cycle.at(phase + d).values())) for d in (-step, 0, step))
        return float(np.abs(after - 2 * at + before).max() / step)

    # derived: the slope of a parameter jumps at every corner and nowhere else
    assert all(0 <= corner < TURN for corner in cycle.corners)
    assert list(cycle.corners) == sorted(cycle.corners)
    assert cycle.straight
    assert all(bend(corner) > 0.1 for corner in cycle.corners)
    edges = [*cycle.corners, cycle.corners[0] + TURN]
    assert all(bend((a + b) / 2) < 1e-3 for a, b in zip(edges, edges[1:], strict=False))


@pytest.mark.parametrize("times", [0, -2])
def test_repeating_less_than_once_is_refused(times: int) -> None:
    with pytest.raises(InputError, match="at least 1"):
        ELLIPSE.repeated(times)


def test_repeating_by_a_fraction_is_refused() -> None:
    """Two and a half laps do not end where they began."""
    with pytest.raises(InputError, match="whole number"):
        ELLIPSE.repeated(2.5)
