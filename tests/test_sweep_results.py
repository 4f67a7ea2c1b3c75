"""What comes out of a sweep: one labelled data set, ensembles summed up, and the words of the commands."""

from __future__ import annotations

import errno
import json
import os
import signal
import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray
from console import call
from sweep_toys import picky, square, toy_plan

from scatterpump.device_file import load_device, read_device
from scatterpump.errors import InputError, SweepError
from scatterpump.sweep import files
from scatterpump.sweep.axis import Axis
from scatterpump.sweep.ensemble import QUANTILES, quantiles, quantised, quantised_fraction
from scatterpump.sweep.gather import gather_sweep, write_netcdf
from scatterpump.sweep.lost import lost_integer
from scatterpump.sweep.plan import SweepPlan
from scatterpump.sweep.plan_file import load_plan
from scatterpump.sweep.point import Bisection, Point
from scatterpump.sweep.quantities import QUANTITIES, Column, Quantity
from scatterpump.sweep.run import run_sweep
from scatterpump.sweep.store import Store
from scatterpump.winding.certificate import certify

QUANTITIES["toy_row"] = Quantity(
    "toy_row",
    (
        Column("row", "x numbers", "m", dims=("place",)),
        Column("phasor", "x as a phase", kind="complex"),
        Column("whole", "x, if it is even", kind="integer"),
    ),
    lambda point: ([1.0] * int(point.pump), np.exp(1j * point.pump), int(point.pump) if point.pump % 2 == 0 else None),
)

DIMER = """
name = "dimer"
sites = 16
onsite = [{amplitude = "stagger", period = 2, harmonic = 0}]
bonds = [{amplitude = "delta", period = 2, lag = -1.5707963267948966, harmonic = 0}]
cycle = {kind = "ellipse", x = ["delta", 0.0, 0.5], y = ["stagger", 0.0, 0.5]}
probe = {hopping = 2.0}
drain = {hopping = 2.0}
"""


def linear(x: int) -> Any:
    return float(x)


# --- one data set; derived unless said otherwise


@pytest.fixture
def rows(tmp_path: Path) -> Path:
    plan = SweepPlan(linear, [Axis("x", [3, 1, 2, 0], name="count", unit="apples")], keep=("toy_row",))
    run_sweep(plan, tmp_path / "rows", workers=1)
    return tmp_path / "rows"


def test_netcdf_has_named_axes_units_and_split_complex_numbers(rows: Path, tmp_path: Path) -> None:
    write_netcdf(gather_sweep(rows), tmp_path / "map.nc")
    with xarray.open_dataset(tmp_path / "map.nc", engine="h5netcdf") as found:
        assert dict(found.sizes) == {"count": 4, "place": 3}
        assert found["count"].values.tolist() == [3, 1, 2, 0]
        assert (found["count"].units, found["row"].units, found["row"].long_name) == ("apples", "m", "x numbers")
        assert np.nansum(found["row"], axis=1).tolist() == [3, 1, 2, 0]
        np.testing.assert_allclose(found.phasor_real + 1j * found.phasor_imag, np.exp(1j * np.array([3, 1, 2, 0])))
        np.testing.assert_array_equal(found["whole"], [np.nan, np.nan, 2, 0])
        assert found["status"].dtype == np.int8
        assert found.attrs["plan_sha256"] == Store.read(rows).fingerprint
        assert set(json.loads(found.attrs["versions"])[0]) >= {"scatterpump", "kwant", "numpy", "scipy", "python"}


def test_missing_and_failed_points_are_told_apart(tmp_path: Path) -> None:
    plan = toy_plan(picky, allowed=str(tmp_path / "never"))
    run_sweep(plan, tmp_path / "out", workers=1)
    half = SweepPlan(square, plan.axes[:1], keep=("toy",))
    run_sweep(half, tmp_path / "half", workers=1, share=(1, 2))
    failed, partly = gather_sweep(tmp_path / "out"), gather_sweep(tmp_path / "half")
    assert failed.status.values.ravel().tolist() == [1, 1, 1, -1] + [1] * 8
    assert json.loads(failed.attrs["errors"]) == {"to my taste": 1}
    assert int((partly.status == 1).sum()) == int((partly.status == 0).sum()) == 6
    assert np.array_equal(np.isnan(partly.toy), partly.status == 0)


def test_text_and_tables_can_be_axes(tmp_path: Path) -> None:
    plan = SweepPlan(
        lambda kind, shape: float(len(kind) + len(shape)),
        [Axis("kind", ["a", "bb"]), Axis("shape", [[1, 2], [3]])],
        keep=("toy",),
    )
    run_sweep(plan, tmp_path / "out", workers=1)
    found = gather_sweep(tmp_path / "out")
    assert found["kind"].values.tolist() == ["a", "bb"]
    assert json.loads(found["shape"].attrs["values"]) == [[1, 2], [3]]
    assert found.toy.values.tolist() == [[3, 2], [4, 3]]
    write_netcdf(found, tmp_path / "map.nc")


def test_netcdf_that_cannot_be_written_leaves_nothing(rows: Path, tmp_path: Path) -> None:
    with pytest.raises(SweepError, match="cannot be written"):
        write_netcdf(gather_sweep(rows), tmp_path / "nowhere" / "map.nc")
    assert not (tmp_path / "nowhere").exists()


# --- ensembles


@pytest.mark.parametrize(
    ("hits", "samples", "lower", "upper"),
    [(81, 263, 0.2553, 0.3662), (15, 148, 0.0624, 0.1605), (0, 20, 0.0000, 0.1611), (1, 29, 0.0061, 0.1718)],
)
def test_fraction_has_its_wilson_interval(hits: int, samples: int, lower: float, upper: float) -> None:
    # R. G. Newcombe, Statistics in Medicine 17, 857 (1998), table I, method 3 (citation from memory)
    found = quantised_fraction(np.arange(samples + 9) < hits, np.arange(samples + 9) < samples, [0])
    assert (int(found.samples), float(found.value)) == (samples, hits / samples)
    np.testing.assert_allclose((found.lower, found.upper), (lower, upper), atol=6e-5)


def test_quantiles_are_those_of_numpy_without_what_does_not_count() -> None:
    # numpy.quantile, method "inverted_cdf"
    random = np.random.default_rng(5)
    values, counts = random.normal(size=(3, 4, 20)), random.random((3, 4, 20)) < 0.7
    found = quantiles(values, counts, [0, 2])
    for i in range(4):
        kept = values[:, i][counts[:, i]]
        np.testing.assert_array_equal(found[i], np.quantile(kept, QUANTILES, method="inverted_cdf"))
    assert np.isnan(quantiles(values, np.zeros_like(counts), [0, 2])).all()
    # derived: an infinite value does no harm to the others
    assert quantiles(np.array([1.0, np.inf, 2.0]), np.ones(3, bool), [0]).tolist() == [1, 1, 2, np.inf, np.inf]


def test_quantised_means_proven_and_expected() -> None:
    # derived
    columns = {"proven": np.array([1, 1, 0]), "integer": np.array([1, 2, 1])}
    np.testing.assert_array_equal(quantised(columns), [True, True, False])
    np.testing.assert_array_equal(quantised(columns, 1), [True, False, False])
    assert quantised({"leak": np.zeros(3)}) is None


def test_ensemble_of_a_map(tmp_path: Path) -> None:
    """Weak disorder keeps the integer in every sample; the same samples come out of any share."""
    plan_file = tmp_path / "plan.toml"
    plan_file.write_text(
        DIMER + '[sweep]\nkeep = ["integer", "proven", "leak", "gap", "crossings"]\nexpected = 1\n'
        '[[sweep.axis]]\nkey = "disorder.onsite"\nname = "strength"\nvalues = [0.3]\n[[sweep.axis]]\nseeds = 3\n'
    )
    for share in ((2, 2), (1, 2)):
        run_sweep(plan_file, tmp_path / "out", workers=1, share=share)
    found = gather_sweep(tmp_path / "out")
    # M. J. Rice, E. J. Mele, Phys. Rev. Lett. 49, 1455 (1982) (citation from memory): one turn around the gapless point
    assert found.quantised_fraction.values.tolist() == [1.0]
    assert found.samples.values.tolist() == [3]
    # Wilson: n / (n + z^2) at n of n
    np.testing.assert_allclose(found.quantised_fraction_lower, 3 / (3 + 1.959964**2), rtol=1e-6)
    # derived: the clean bulk has gap 2 * 0.5 in the energy difference of its two bands
    assert (found.gap_lower <= 1.0 + 1e-9).all() and (found.gap_upper >= 1.0 - 1e-9).all()
    assert (found.crossing_direction.sum("crossing") == found.integer).all()
    # derived: disorder is a function of seed and site
    (tmp_path / "device.toml").write_text(DIMER)
    alone = certify(load_device(tmp_path / "device.toml", ["disorder.onsite=0.3", "disorder.seed=2"]).pump())
    np.testing.assert_allclose(found.leak.sel(disorder_seed=2), alone.leak.bound, rtol=0, atol=1e-10)


def test_where_the_integer_is_lost(tmp_path: Path) -> None:
    """A loop moved off the gapless point by its radius no longer goes round it."""
    plan_file = tmp_path / "plan.toml"
    plan_file.write_text(
        DIMER + '[sweep]\nkeep = ["lost"]\nlost = {key = "cycle.x.1", from = 0.0, to = 1.0, accuracy = 0.13}\n'
        '[[sweep.axis]]\nkey = "sites"\nvalues = [40]\n'
    )
    run_sweep(plan_file, tmp_path / "out", workers=1)
    found = gather_sweep(tmp_path / "out").squeeze()
    # M. J. Rice, E. J. Mele (as above); derived: at 0.5 the loop meets the gapless point
    assert 0.25 <= float(found.kept_at) < float(found.lost_at) <= 0.625
    assert float(found.lost_at - found.kept_at) <= 0.13
    assert float(found.kept_at) <= 0.5


def test_integer_that_is_never_lost() -> None:
    def device(changes: dict[str, Any]) -> Any:
        content = tomllib.loads(DIMER)
        content["cycle"]["x"][1] = changes["offset"]
        return read_device(content).pump()

    # derived: the loop goes round the gapless point up to an offset of 0.5
    assert lost_integer(Point(device, {}, bisection=Bisection("offset", 0.0, 0.1, 0.01))) == (0.1, np.inf)


@pytest.mark.parametrize("numbers", [(1.0, 0.0, 0.1), (0.0, 1.0, 0.0), (0.0, float("nan"), 0.1)])
def test_search_for_the_lost_integer_needs_a_range(numbers: Any) -> None:
    with pytest.raises(InputError):
        Bisection("disorder.onsite", *numbers)


# --- the commands


@pytest.fixture(scope="module")
def small(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("small") / "plan.toml"
    path.write_text(
        DIMER
        + '[sweep]\nkeep = ["sampled"]\nphases = 24\n[[sweep.axis]]\nkey = "sites"\nvalues = [8, 10, 12, 14, 16, 18]\n'
    )
    return path


def test_commands_from_plan_to_map_and_back(small: Path, tmp_path: Path) -> None:
    # derived
    tried = call("sweep", small, "--dry-run", "--workers", "2")
    assert tried.exit_code == 0
    assert "points        6 (6 sites)" in tried.stdout
    assert all(word in tried.stdout for word in ("time ", "memory ", "results ", "#SBATCH --array=1-1", "USR1@"))
    done = call("sweep", small, "--into", tmp_path / "out", "--workers", "1")
    assert (done.exit_code, done.stdout) == (0, "6 of 6 points done, 0 failed, 0 missing\n")
    assert "share 1/1, finished: 6 of 6 points done, 0 failed" in done.stderr
    seen = call("status", tmp_path / "out")
    assert seen.exit_code == 0
    assert "done                 6   100.0%" in seen.stdout
    assert "finished" in seen.stdout
    merged = call("gather", tmp_path / "out", "-o", tmp_path / "map.nc")
    assert merged.exit_code == 0
    with xarray.open_dataset(tmp_path / "map.nc") as found:
        # M. J. Rice, E. J. Mele, as above
        assert found.sampled_integer.values.tolist() == [1] * 6
        (tmp_path / "again.json").write_text(found.attrs["plan"])
        assert load_plan(tmp_path / "again.json").fingerprint == found.attrs["plan_sha256"]


def test_signal_ends_the_command_with_the_code_that_means_resume(
    small: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    write = Store.write

    def write_and_signal(store: Store, batch: Any) -> Any:
        os.kill(os.getpid(), signal.SIGUSR1)
        return write(store, batch)

    monkeypatch.setattr(Store, "write", write_and_signal)
    stopped = call("sweep", small, "--into", tmp_path, "--workers", "1")
    monkeypatch.undo()
    # sysexits.h: EX_TEMPFAIL is 75
    assert stopped.exit_code == 75
    assert stopped.stdout == "1 of 6 points done, 0 failed, 5 missing\n"
    assert "stopped by SIGUSR1; the same command does the rest" in stopped.stderr
    assert call("status", tmp_path).exit_code == 1
    assert call("gather", tmp_path, "-o", tmp_path / "map.nc").exit_code == 1
    assert call("sweep", small, "--into", tmp_path, "--workers", "1").exit_code == 0


def test_full_disk_is_told_in_one_line(small: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def full(step: str) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(files, "on_step", full)
    ended = call("sweep", small, "--into", tmp_path, "--workers", "1")
    # sysexits.h: EX_IOERR is 74
    assert ended.exit_code == 74
    assert len(ended.stderr.splitlines()) == 1
    assert "No space left on device" in ended.stderr


@pytest.mark.parametrize(
    "arguments",
    [
        ("status", "nowhere"),
        ("gather", "nowhere", "-o", "map.nc"),
        ("sweep", "nowhere.toml", "--into", "out"),
        ("sweep", "PLAN"),
        ("sweep", "PLAN", "--into", "PLAN"),
        ("sweep", "PLAN", "--into", "out", "--share", "3/2"),
        ("sweep", "PLAN", "--into", "out", "--dask", "nonsense://x"),
    ],
)
def test_bad_input_is_told_in_one_line(
    small: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, arguments: tuple[str, ...]
) -> None:
    monkeypatch.chdir(tmp_path)
    told = call(*(small if word == "PLAN" else word for word in arguments))
    assert told.exit_code == 2
    assert len(told.stderr.splitlines()) == 1
    assert told.stderr.startswith("scatterpump: ")
