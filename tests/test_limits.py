"""How warm, how fast, and which current: handbook values, and limits held against the charges they are limits of."""

from __future__ import annotations

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest
from devices import loop, rice_mele
from scipy import constants
from scipy.integrate import solve_ivp

from scatterpump.errors import InputError
from scatterpump.operation.charge import Charge, charge
from scatterpump.operation.current import current, delivered, in_amperes
from scatterpump.operation.driven import driven_charge
from scatterpump.operation.heat import temperature_limit
from scatterpump.operation.slow import slow_charge
from scatterpump.operation.speed import adiabatic_frequency, landau_zener, speed_limit, sweep_rate
from scatterpump.operation.thermal import Levels, average, edges, weight
from scatterpump.operation.units import energy_of, hertz, kelvin

ONE = Charge(1.0, (1.0, -1.0), 1, 0.0, 0.0, 0.0, 0.0, 1e-12, 0.0, 0.0, 0, 1, "invented")


# Probability to change the adiabatic level, exp(-2 pi a^2/v), of H = [[vt/2, a], [a, -vt/2]]: L. D. Landau, Phys. Z.
# Sowjetunion 2, 46 (1932); C. Zener, Proc. R. Soc. Lond. A 137, 696 (1932) (citations from memory)
@pytest.mark.parametrize(
    ("a", "v", "expected"),
    [(0.25, 1, 0.675232), (0.5, 1, 0.207880), (0.5, 2, 0.455938), (1, 4, 0.207880), (0.3, 3, 0.828204)],
)
def test_wrong_way_through_an_avoided_crossing(a: float, v: float, expected: float) -> None:
    assert landau_zener(2 * a, v) == pytest.approx(expected, rel=5e-6)


def test_wrong_way_agrees_with_the_schroedinger_equation() -> None:
    a, v, end = 0.5, 1.0, 50.0

    def change(time: float, psi: np.ndarray) -> np.ndarray:
        return -1j * np.array([[v * time / 2, a], [a, -v * time / 2]]) @ psi

    def lower(time: float) -> np.ndarray:
        return np.linalg.eigh(np.array([[v * time / 2, a], [a, -v * time / 2]]))[1][:, 0]

    last = solve_ivp(change, (-end, end), lower(-end).astype(complex), method="DOP853", rtol=1e-9, atol=1e-9).y[:, -1]
    # Landau and Zener as above, numerically
    assert 1 - abs(lower(end) @ last) ** 2 == pytest.approx(landau_zener(2 * a, v), abs=1e-5)


def test_adiabatic_estimate_is_where_the_gap_lets_the_allowed_share_pass() -> None:
    pump = rice_mele(loop(), cells=4)
    frequency = adiabatic_frequency(pump, 1e-3)
    assert frequency is not None
    # gap 1 of the loop of radius 0.5 (derived); rate: |d/dphi| of a row of H is at most 0.5 |cos| + |sin| (derived)
    assert sweep_rate(pump) == pytest.approx(2 * np.hypot(0.5, 1.0), rel=5e-3)
    assert landau_zener(1.0, sweep_rate(pump) * frequency) == pytest.approx(1e-3, rel=0.1)
    without_cell = replace(rice_mele(loop(), cells=1), bulk=None)  # nothing repeats in a single cell
    assert adiabatic_frequency(without_cell) is None


def test_at_the_speed_limit_the_charge_is_off_by_what_was_allowed() -> None:
    pump = rice_mele(loop(), cells=8)
    slow, limit = slow_charge(pump), speed_limit(pump, 1e-3)
    assert limit.value is not None
    shifts = [driven_charge(pump, slow.found.leads, share * limit.value).shift[0] for share in (0.8, 1.0, 1.3)]
    below, here, above = (abs(slow.found.leak + shift) for shift in shifts)
    # derived: the definition
    assert here == pytest.approx(1e-3, rel=0.2)
    assert below < 1e-3 < above
    assert limit.value == pytest.approx(limit.estimate, rel=0.5)  # Landau-Zener: right in scale


def test_at_the_temperature_limit_the_charge_is_off_by_what_was_allowed() -> None:
    pump = rice_mele(loop(), cells=4)
    limit = temperature_limit(pump, 0.05)
    assert limit.value is not None
    # derived: the definition
    assert charge(pump, temperature=limit.value).deviation == pytest.approx(-0.05, rel=0.03)


@pytest.mark.parametrize("limit", [speed_limit, temperature_limit])
def test_a_leaky_pump_has_no_limit(limit: object) -> None:
    found = limit(rice_mele(loop(), cells=4), 1e-3)  # type: ignore[operator]  # one of two functions
    # derived: 1.6e-2 leak
    assert found.value == 0
    assert found.leakage == pytest.approx(0.983868696965 - 1, abs=1e-10)
    assert "leak" in found.reason
    with pytest.raises(InputError, match="error is 0.7"):
        limit(rice_mele(loop(), cells=4), 0.7)  # type: ignore[operator]  # one of two functions


@pytest.mark.parametrize(("temperature", "frequency"), [(0.1, 0.0), (0.1, 0.3), (0.02, 0.5), (0.0, 0.4)])
def test_step_in_the_charge_is_averaged_like_a_fermi_function(temperature: float, frequency: float) -> None:
    """q = 1 below an edge at 0.25 and 0 above it: the average is the weight's integral up to there."""
    levels = Levels(lambda energy: np.array([float(energy < 0.25)]), np.array([1.0]))
    found = average(
        levels,
        lambda energies: weight(energies, temperature, frequency)[None],
        edges(temperature, frequency),
        absolute=np.array([1e-6]),
        relative=0.0,
        budget=20_000,
    )
    # integrals of the Fermi function in closed form (common practice)
    if temperature == 0:
        missing = (frequency - 0.25) / frequency
    elif frequency == 0:
        missing = 1 / (1 + np.exp(0.25 / temperature))
    else:
        near, far = (np.log1p(np.exp(-(0.25 - shift) / temperature)) for shift in (frequency, 0.0))
        missing = temperature * (near - far) / frequency
    assert found.shift[0, 0] == pytest.approx(-missing, abs=2e-6)


# e = 1.602176634e-19 C: BIPM, The International System of Units, 9th ed. (2019) (citation from memory)
@pytest.mark.parametrize(
    ("number", "frequency", "ampere", "text"),
    [(1, 1e9, 160.2176634e-12, "160.2176634 pA"), (-2, 50e6, -16.02176634e-12, "-16.02176634 pA")],
)
def test_current_is_charge_times_frequency(number: int, frequency: float, ampere: float, text: str) -> None:
    found = delivered(replace(ONE, probe=float(number), number=number), frequency)
    assert found.ampere == pytest.approx(ampere, rel=1e-15)
    assert (str(found), found.ppm) == (text, 0)


def test_a_nanoampere_takes_its_frequency() -> None:
    # BIPM as above
    assert in_amperes(delivered(ONE, 6.241509074460763e9).ampere) == "1 nA"


def test_current_names_what_dominates() -> None:
    found = current(rice_mele(loop(), cells=8), 1e6)
    assert found.ppm == pytest.approx(-1e6 * (1 - 0.999851869254), abs=1e-5)  # tabulated charge of 8 cells (derived)
    assert (found.dominating, found.speed_included) == ("leakage", False)
    warm = replace(ONE, probe=1 - 3e-6, leakage=-1e-6, thermal=-2e-6)
    assert delivered(warm, 1e9).dominating == "temperature"
    assert delivered(replace(warm, speed=-3e-6), 1e9).dominating == "speed"
    with pytest.raises(InputError, match="frequency is 0"):
        current(rice_mele(loop(), cells=2), 0)


def test_units_go_through_plancks_and_boltzmanns_constants() -> None:
    pump = SimpleNamespace(units=SimpleNamespace(energy=1e-3 * constants.e))
    # 1 meV is 11.6045 K and 241.799 GHz: CODATA 2018 (citation from memory)
    assert kelvin(pump, 1.0) == pytest.approx(11.60452, rel=1e-6)  # type: ignore[arg-type]  # all it asks for is units
    assert hertz(pump, 1.0) == pytest.approx(241.79892e9, rel=1e-6)  # type: ignore[arg-type]  # as above
    assert energy_of(pump, 241.79892e9) == pytest.approx(1.0, rel=1e-6)  # type: ignore[arg-type]  # as above
    assert kelvin(rice_mele(loop(), cells=2), 1.0) is None
