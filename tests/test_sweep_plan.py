"""Plans: what they say, how they are written down, and how a mistake in one is told."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from sweep_toys import assert_whole, rows_of, toy_plan

from scatterpump.errors import InputError
from scatterpump.sweep.axis import Axis
from scatterpump.sweep.columns import MISSING, joined, stacked
from scatterpump.sweep.order import points_at, positions_of, runs, share_bounds
from scatterpump.sweep.pace import WANTED, Pace
from scatterpump.sweep.plan import SweepPlan
from scatterpump.sweep.plan_file import load_plan
from scatterpump.sweep.queue import Queue
from scatterpump.sweep.run import run_sweep
from scatterpump.sweep.share import available_workers, share_of

EXAMPLES = Path(__file__).parents[1] / "examples"

DEVICE = """
sites = 12
onsite = [{amplitude = 1.5, period = 3}]
probe = {hopping = 2.0}
drain = {hopping = 2.0}
"""
AXIS = '[[sweep.axis]]\nkey = "fermi_level"\nvalues = [-1.2, 1.2]\n'


def written(folder: Path, text: str) -> Path:
    path = folder / "plan.toml"
    path.write_text(text)
    return path


# --- axes; all derived


def test_every_combination_is_a_point_and_the_last_axis_runs_fastest() -> None:
    plan = SweepPlan({}, [Axis("a", [1, 2]), Axis(["b", "c.d"], [[3, 4], [5, 6], 7])])
    assert plan.shape == (2, 3)
    assert [plan.changes(i) for i in (0, 1, 5)] == [
        {"a": 1, "b": 3, "c.d": 4},
        {"a": 1, "b": 5, "c.d": 6},
        {"a": 2, "b": 7, "c.d": 7},
    ]


def test_ranges_are_even() -> None:
    assert Axis.even("a", 0, 1, 5).values == ((0.0,), (0.25,), (0.5,), (0.75,), (1.0,))
    assert Axis.even(["a", "b"], [0, 2], [1, 4], 3).values == ((0.0, 2.0), (0.5, 3.0), (1.0, 4.0))
    np.testing.assert_allclose(Axis.even("a", 1e-3, 10, 5, spacing="log").values, [[1e-3], [1e-2], [0.1], [1], [10]])


def test_seeds_are_the_same_everywhere() -> None:
    axis = Axis.seeds(4, first=3)
    assert (axis.keys, axis.values, axis.is_seed) == (("disorder.seed",), ((3,), (4,), (5,), (6,)), True)


@pytest.mark.parametrize(
    "make",
    [
        lambda: Axis("a", []),
        lambda: Axis("a", "text"),
        lambda: Axis([], [1]),
        lambda: Axis(["a", "a"], [1]),
        lambda: Axis(["a", "b"], [[1, 2, 3]]),
        lambda: Axis("a", [1], name="two words"),
        lambda: Axis.even("a", 0, float("inf"), 3),
        lambda: Axis.even("a", 0, 1, 0),
        lambda: Axis.even("a", 0, 1, 3, spacing="log"),
        lambda: Axis.even("a", [0, 1], [1], 3),
        lambda: Axis.seeds(0),
        lambda: Axis.seeds(3, first=-1),
    ],
)
def test_what_is_no_axis_is_refused(make: Any) -> None:
    with pytest.raises(InputError, match="allowed"):
        make()


# --- order, shares, batches; all derived


@pytest.mark.parametrize("count", [1, 2, 3, 12, 200, 1681, 100_000])
def test_order_holds_every_point_once(count: int) -> None:
    positions = np.arange(count)
    points = points_at(positions, count)
    assert np.array_equal(np.sort(points), positions)
    assert np.array_equal(positions_of(points, count), positions)


def test_every_share_is_spread_over_the_map() -> None:
    count = 40 * 41
    for share in range(1, 11):
        points = points_at(np.arange(*share_bounds(share, 10, count)), count)
        per_row = np.bincount(points // 41, minlength=40)
        assert per_row.min() >= 3 and per_row.max() <= 6  # 4.1 on average


def test_shares_cover_all_positions_once() -> None:
    bounds = [share_bounds(share, 7, 100) for share in range(1, 8)]
    assert bounds[0][0] == 0 and bounds[-1][1] == 100
    assert all(a[1] == b[0] for a, b in zip(bounds, bounds[1:], strict=False))


def test_runs_are_the_stretches() -> None:
    assert runs(np.array([1, 1, 0, 0, 1, 0, 1], bool)) == [(0, 2), (4, 5), (6, 7)]
    assert runs(np.zeros(3, bool)) == []


@pytest.mark.parametrize("backwards", [False, True])
def test_queue_hands_out_what_waits_once(backwards: bool) -> None:
    waiting = np.random.default_rng(2).random(50) < 0.6
    queue = Queue(waiting, 100, backwards=backwards)
    done = np.zeros(50, bool)
    done[20:30] = True
    taken = [queue.take(4)]
    assert queue.drop(done) == int((waiting & done).sum())
    while len(queue):
        taken.append(queue.take(4))
    positions = [p for start, stop in taken for p in range(start, stop)]
    assert sorted(positions) == (100 + np.flatnonzero(waiting & ~done)).tolist()
    assert all(1 <= stop - start <= 4 for start, stop in taken)
    assert (taken[0][0] > 140) is backwards


def test_batches_take_half_a_second_and_shrink_towards_the_end() -> None:
    pace = Pace()
    assert pace.batch(1000, 2) == 1
    pace.saw(1, 3.0)  # the first one imports everything
    for _ in range(6):
        size = pace.batch(10_000, 2)
        pace.saw(size, size * 0.01)
    assert pace.batch(10_000, 2) == WANTED / 0.01
    assert pace.batch(20, 2) == 5


def test_ragged_values_are_filled_up() -> None:
    assert stacked([[1.0], None, [2.0, 3.0]], np.float64, 1).tolist()[0][0] == 1.0
    assert np.isnan(stacked([[1.0], None, [2.0, 3.0]], np.float64, 1)).tolist() == [[0, 1], [1, 1], [0, 0]]
    assert stacked([True, None], np.int32, 0).tolist() == [1, MISSING]
    whole = joined(np.full((3, 0), np.nan), np.array([2]), np.array([[5.0, 6.0]]))
    whole = joined(whole, np.array([0]), np.array([[4.0]]))
    assert np.array_equal(whole, [[4, np.nan], [np.nan, np.nan], [5, 6]], equal_nan=True)


def test_any_number_of_shares_does_every_point_once(tmp_path: Path) -> None:
    new = [run_sweep(toy_plan(), tmp_path, workers=1, share=share).new for share in ((2, 3), (2, 3), (1, 2), (1, 1))]
    assert new == [4, 0, 4, 4]
    assert_whole(tmp_path)
    assert len(rows_of(tmp_path)[0]) == 12


@pytest.mark.parametrize(
    ("text", "environment", "share"),
    [
        ("3/16", {}, (3, 16)),
        (None, {}, (1, 1)),
        (None, {"SLURM_ARRAY_TASK_ID": "4", "SLURM_ARRAY_TASK_MIN": "0", "SLURM_ARRAY_TASK_COUNT": "8"}, (5, 8)),
        (
            None,
            {
                "SLURM_ARRAY_TASK_ID": "7",
                "SLURM_ARRAY_TASK_MIN": "1",
                "SLURM_ARRAY_TASK_COUNT": "4",
                "SLURM_ARRAY_TASK_STEP": "2",
            },
            (4, 4),
        ),
        (None, {"SGE_TASK_ID": "2", "SGE_TASK_FIRST": "1", "SGE_TASK_LAST": "5", "SGE_TASK_STEPSIZE": "1"}, (2, 5)),
        (None, {"SGE_TASK_ID": "undefined"}, (1, 1)),
        ("1/2", {"SLURM_ARRAY_TASK_ID": "4"}, (1, 2)),
    ],
)
def test_share_comes_from_the_option_or_the_array(text: Any, environment: Any, share: Any) -> None:
    # Slurm, sbatch(1): output environment variables; Grid Engine, qsub(1) (citations from memory)
    assert share_of(text, environment) == share


@pytest.mark.parametrize("text", ["0/3", "4/3", "3", "a/b", "-1/3", "1/0"])
def test_what_is_no_share_is_refused(text: str) -> None:
    with pytest.raises(InputError, match="3/16"):
        share_of(text, {})


def test_workers_are_what_the_scheduler_grants() -> None:
    # Slurm, sbatch(1): SLURM_CPUS_PER_TASK is what --cpus-per-task asked for (citation from memory)
    assert available_workers({"SLURM_CPUS_PER_TASK": "5"}) == 5
    assert available_workers({}) >= 1


# --- plan files; derived


def test_plan_file_is_a_device_file_with_a_table(tmp_path: Path) -> None:
    plan = load_plan(written(tmp_path, DEVICE + "[sweep]\n" + AXIS))
    assert plan.size == 2
    assert plan.keep == ("integer", "proven", "leak")
    assert isinstance(plan.device, dict) and plan.device["sites"] == 12 and "sweep" not in plan.device


def test_plan_takes_the_files_of_its_device_along(tmp_path: Path) -> None:
    text = f'[sweep]\ndevice = "{EXAMPLES}/two_gates.toml"\n[[sweep.axis]]\nkey = "sites"\nvalues = [9, 12]\n'
    plan = load_plan(written(tmp_path, text))
    assert plan.files == {"two_gates.csv": (EXAMPLES / "two_gates.csv").read_text()}
    (tmp_path / "elsewhere.json").write_text(plan.to_json())
    again = load_plan(tmp_path / "elsewhere.json")
    assert again.fingerprint == plan.fingerprint
    assert again.changes(1) == {"sites": 12}


def test_fingerprint_is_the_same_in_every_process_and_changes_with_the_plan() -> None:
    program = (
        "from scatterpump.sweep.plan import SweepPlan; from scatterpump.sweep.axis import Axis;"
        "print(SweepPlan({'sites': 3, 'name': 'x'}, [Axis('level', [0.1, 0.2])]).fingerprint)"
    )
    other = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True).stdout.strip()
    plan = SweepPlan({"sites": 3, "name": "x"}, [Axis("level", [0.1, 0.2])])
    assert plan.fingerprint == other
    assert SweepPlan({"sites": 4, "name": "x"}, [Axis("level", [0.1, 0.2])]).fingerprint != other
    assert SweepPlan({"sites": 3, "name": "x"}, [Axis("level", [0.1, 0.3])]).fingerprint != other


def test_example_plan_can_be_read() -> None:
    assert load_plan(EXAMPLES / "cluster" / "map.toml").shape == (41, 41, 20)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (DEVICE, "sweep: this table is missing"),
        (DEVICE + "[sweep]\n", "there is no axis"),
        (DEVICE + "[sweep]\nkep = []\n" + AXIS, "sweep.kep: this key is unknown; allowed: axis, keep"),
        (DEVICE + '[sweep]\nkeep = ["integr"]\n' + AXIS, "no quantity 'integr'; allowed: integer, proven"),
        (DEVICE + "[sweep]\nkeep = 3\n" + AXIS, "3 is no list"),
        (DEVICE + "[sweep]\nphases = 2\n" + AXIS, "phases is 2"),
        (DEVICE + '[sweep]\nengine = "fast"\n' + AXIS, "engine is 'fast'"),
        (DEVICE + "[sweep]\n" + AXIS + AXIS, "two axes are named 'fermi_level'"),
        (DEVICE + "[sweep]\n" + AXIS.replace("values", "value"), "sweep.axis.0.value: this key is unknown"),
        (DEVICE + "[sweep]\n" + AXIS.replace("fermi_level", "fermi_levl"), "fermi_levl: this key is unknown"),
        (DEVICE + "[sweep]\n" + AXIS.replace("fermi_level", "onsite.3.amplitude"), "there is no '3'"),
        (DEVICE + "[sweep]\n" + AXIS.replace("fermi_level", "sites"), "-1.2 is no whole number"),
        (
            DEVICE + "[sweep]\n" + AXIS.replace("values = [-1.2, 1.2]", "from = 1"),
            "sweep.axis.0.to: this key is missing",
        ),
        (DEVICE + "[sweep]\n" + AXIS.replace("[-1.2, 1.2]", "[]"), "has no list of values"),
        (DEVICE + "[sweep]\n" + AXIS + 'name = "leak"\n', "named 'leak' like a result"),
        (DEVICE + '[sweep]\nkeep = ["lost"]\n' + AXIS, "a table [sweep.lost]"),
        (DEVICE + '[sweep]\nlost = {key = "sites"}\n' + AXIS, "sweep.lost.from: this key is missing"),
        (DEVICE + '[sweep]\ndevice = "other.toml"\n' + AXIS, "'sites' means nothing here"),
        ('[sweep]\ndevice = "other.toml"\n' + AXIS, "No such file or directory"),
        ("[sweep", "not valid TOML"),
    ],
)
def test_a_mistake_in_a_plan_is_told_in_one_line(tmp_path: Path, text: str, words: str) -> None:
    with pytest.raises(InputError) as told:
        load_plan(written(tmp_path, text))
    assert words in str(told.value)
    assert str(tmp_path) in str(told.value)


@pytest.mark.parametrize("text", ["", "[]", "{}", '{"scatterpump_plan": 1}', "[" * 100_000])
def test_json_that_is_no_plan_is_refused(tmp_path: Path, text: str) -> None:
    (tmp_path / "plan.json").write_text(text)
    with pytest.raises(InputError, match="plan"):
        load_plan(tmp_path / "plan.json")


def test_plan_of_a_function_needs_the_function(tmp_path: Path) -> None:
    run_sweep(toy_plan(), tmp_path, workers=1)
    assert json.loads((tmp_path / "plan.json").read_text())["function"]["name"] == "square"
    with pytest.raises(InputError, match="made by the Python function 'square'"):
        load_plan(tmp_path / "plan.json")
