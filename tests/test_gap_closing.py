"""Pumps that must not be trusted: too short, or driven through the point where the gap closes."""

from __future__ import annotations

from functools import cache
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner
from devices import loop, rice_mele
from numpy.typing import NDArray
from scipy.signal import resample

from scatterpump.bulk.chern import chern_number
from scatterpump.cli import main
from scatterpump.errors import ClosedGapError
from scatterpump.pump import Pump
from scatterpump.solver.reflect import reflect
from scatterpump.solver.trace import ReflectionTrace
from scatterpump.verdict import Verdict, judge
from scatterpump.winding.certificate import certify

SAMPLES, FINE = 64, 256  # r(phi) is analytic, so 64 samples hold it to rounding

# Cells, charge that enters from the probe in one cycle, smallest |r|, mean transmission with its last printed digit.
# All derived: P. W. Brouwer, Phys. Rev. B 58, R10135 (1998), by trapezoid rule over 256 phases.
FINITE_PUMPS = (
    (1, 0.178885438200, 0.0, 0.541, 1e-3),
    (2, 0.720396181686, 0.800, 0.206, 1e-3),
    (3, 0.935143824186, 0.944231, 5.3e-2, 1e-3),
    (4, 0.983868696965, 0.979716, 1.4e-2, 1e-3),
    (6, 0.998618486666, 0.997277, 1.3e-3, 1e-4),
    (8, 0.999851869254, 0.999630, 1.4e-4, 1e-5),
    (10, 0.999982651348, 0.999949, 1.7e-5, 1e-6),
    (12, 0.999997880771, 0.999993, 2.0e-6, 1e-7),
    (15, 0.999999905520, 1.000000, 9.0e-8, 1e-9),
)


def short_pump(cells: int) -> Pump:
    return rice_mele(loop(), cells=cells)


@cache
def trace_of(cells: int) -> ReflectionTrace:
    return reflect(short_pump(cells), 2 * np.pi * np.arange(SAMPLES) / SAMPLES)


def charge_from_probe(trace: ReflectionTrace) -> float:
    """Return Brouwer's integral of Im(S* dS) / 2 pi over the probe's row of S.

    H is real, so S is symmetric up to constant phases of the modes and the row may be read from the column.
    """
    column = np.concatenate([trace.reflection[:, 0], trace.transmission[:, 0]], axis=1)
    return float(np.mean((column.conj() * derivative(column)).sum(axis=1).imag))


def derivative(samples: NDArray[np.complex128]) -> NDArray[np.complex128]:
    """Return d/dphi of periodic samples along the first axis, by their Fourier series."""
    orders = np.fft.fftfreq(len(samples), 1 / len(samples))
    return np.fft.ifft(1j * orders[:, None] * np.fft.fft(samples, axis=0), axis=0)


@pytest.mark.parametrize(("cells", "charge", "smallest", "mean", "digit"), FINITE_PUMPS)
def test_finite_pump(cells: int, charge: float, smallest: float, mean: float, digit: float) -> None:
    trace = trace_of(cells)
    # derived, see above; to the printed digits
    assert charge_from_probe(trace) == pytest.approx(charge, abs=1e-11)
    assert np.abs(resample(trace.reflection[:, 0, 0], FINE)).min() == pytest.approx(smallest, abs=5e-7)
    assert trace.leakage.mean() == pytest.approx(mean, abs=digit / 2)


@pytest.mark.parametrize(("cells", "share"), [(3, 0.25), (4, 0.25), (6, 0.25), (8, 0.05), (10, 0.05), (12, 0.05)])
def test_charge_misses_the_integer_by_the_mean_leak(cells: int, share: float) -> None:
    trace = trace_of(cells)
    # derived
    assert 1 - charge_from_probe(trace) == pytest.approx(trace.leakage.mean(), rel=share)


@pytest.mark.parametrize("cells", [2, 3, 4, 6, 8])
def test_integer_appears_long_before_the_charge_is_quantised(cells: int) -> None:
    winding = certify(short_pump(cells))
    # derived: |r| stays above 0 from two cells on
    assert winding.number == 1
    assert winding.smallest_reflection <= trace_of(cells).smallest.min() + 1e-12


def test_one_cell_lets_everything_through_at_half_a_cycle() -> None:
    trace = reflect(short_pump(1), [np.pi])
    # derived: r(pi) = 0
    assert trace.smallest[0] < 1e-14
    assert trace.leakage[0] == pytest.approx(1, abs=1e-14)


def alarms(verdict: Verdict) -> set[str]:
    return {finding.check for finding in verdict.audit.alarms}


def test_one_cell_has_no_winding() -> None:
    verdict = judge(short_pump(1))
    # derived: r vanishes at phi = pi
    assert not verdict.trustworthy
    assert {"leakage", "reflection invertible"} <= alarms(verdict)


@cache
def shifted(centre: float, cells: int, energy: float = 0.0) -> Verdict:
    """Judge the loop delta = centre + 0.5 cos phi, stagger = 0.5 sin phi: the gap closes on it if centre is 0.5."""
    return judge(rice_mele(loop(delta=(centre, 0.5)), cells=cells, energy=energy))


@pytest.mark.parametrize(("cells", "energy"), [(10, 0.0), (20, 1e-9), (40, 0.0), (80, 1e-9)])
def test_closing_gap_is_an_alarm_at_every_length(cells: int, energy: float) -> None:
    """The smallest |r| is 0.6 however long the device: its size alone tells nothing."""
    verdict = shifted(0.5, cells, energy)
    # derived
    assert not verdict.trustworthy
    assert {"leakage", "Fermi level in gap", "leak falls with length"} <= alarms(verdict)
    smallest = reflect(rice_mele(loop(delta=(0.5, 0.5)), cells=cells, energy=energy), [np.pi]).smallest[0]
    assert smallest == pytest.approx(0.6, abs=1e-6)


def test_closing_gap_has_no_chern_number() -> None:
    # derived
    with pytest.raises(ClosedGapError, match="Fermi level"):
        chern_number(rice_mele(loop(delta=(0.5, 0.5)), energy=1e-9))


def test_gap_too_thin_for_the_length_is_an_alarm() -> None:
    """Half a gap of 0.02 and 20 cells: the winding reads 0, but the filled band carries 1."""
    verdict = shifted(0.49, 20)
    # derived
    assert not verdict.trustworthy
    assert verdict.winding is not None
    assert (verdict.winding.number, verdict.chern) == (0, 1)
    assert {"leakage", "integer agrees with bulk"} <= alarms(verdict)


@pytest.mark.parametrize(("centre", "cells", "integer"), [(0.3, 20, 1), (0.4, 20, 1), (0.45, 60, 1), (0.6, 20, 0)])
def test_open_gap_and_enough_length_are_trusted(centre: float, cells: int, integer: int) -> None:
    verdict = shifted(centre, cells)
    # derived: the loop goes round the origin if centre is below 0.5
    assert verdict.trustworthy, verdict.summary()
    assert verdict.winding is not None
    assert verdict.winding.number == verdict.chern == integer


@pytest.mark.parametrize(
    ("centre", "cells", "smallest", "digit"),
    [
        (0.40, 20, 0.9968, 1e-4),
        (0.45, 20, 0.851, 1e-3),
        (0.45, 60, 0.99995, 1e-5),
        (0.49, 20, 0.294, 1e-3),
        (0.49, 60, 0.460, 1e-3),
        (0.51, 20, 0.794, 1e-3),
        (0.51, 60, 0.955, 1e-3),
    ],
)
def test_smallest_reflection_of_a_thin_gap(centre: float, cells: int, smallest: float, digit: float) -> None:
    trace = reflect(rice_mele(loop(delta=(centre, 0.5)), cells=cells), [np.pi])
    # derived, to the printed digits; the gap is thinnest at half a cycle
    assert trace.smallest[0] == pytest.approx(smallest, abs=digit / 2)


DEVICE = """
sites = {sites}
fermi_level = {energy}
onsite = [{{amplitude = "stagger", period = 2, harmonic = 0}}]
bonds = [{{amplitude = "delta", period = 2, lag = -1.5707963267948966, harmonic = 0}}]
cycle = {{kind = "ellipse", x = ["delta", {centre}, 0.5], y = ["stagger", 0.0, 0.5]}}
probe = {{hopping = 2.0}}
drain = {{hopping = 2.0}}
"""


@pytest.mark.parametrize(
    ("centre", "sites", "energy", "code"), [(0.5, 80, 1e-9, 1), (0.49, 40, 0.0, 1), (0.4, 40, 0.0, 0)]
)
def test_exit_code_tells_a_closing_gap(tmp_path: Path, centre: float, sites: int, energy: float, code: int) -> None:
    device = tmp_path / "loop.toml"
    device.write_text(DEVICE.format(centre=centre, sites=sites, energy=energy))
    result = CliRunner().invoke(main, ["verdict", str(device)])
    # derived
    assert result.exit_code == code, result.output
    refused = any(words in result.stdout for words in ("not to be trusted", "not proven (", "undefined"))
    assert refused == (code == 1)
