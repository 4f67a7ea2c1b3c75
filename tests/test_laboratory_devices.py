"""Devices in the units of a laboratory: their potentials, their grids, their units, and the integers they must have."""

from __future__ import annotations

from dataclasses import replace
from math import cos, pi, sinh, sqrt
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

import scatterpump as sp
from scatterpump.builder.gates import comb_potential, strip_potential
from scatterpump.device_file import load_device
from scatterpump.solver.hamiltonian import DrivenHamiltonian
from scatterpump.solver.modes import with_modes

HALF_HBAR_SQUARED = 38.09982  # hbar^2 / (2 m_e) in meV nm^2, handbook value from CODATA's constants

COMB = sp.Comb(pitch=40, width=30, phases=4, amplitude=10)
CONVEYOR = sp.GatedChannel(mass=0.19, length=800, step=10, fermi_level=-1.05, lead_level=-4, depth=30, comb=COMB)


# ---- potentials ------------------------------------------------------------------------------------------------------


def test_strip_potential_is_harmonic_below_the_surface():
    """Electrostatics without charges: the potential solves Laplace's equation in (x, depth)."""
    x, depth, h = np.linspace(-60, 60, 13), 20.0, 1e-2

    def at(dx, dz):
        return strip_potential(x + dx, 30.0, depth + dz)

    laplacian = (at(h, 0) + at(-h, 0) + at(0, h) + at(0, -h) - 4 * at(0, 0)) / h**2
    assert_allclose(laplacian, 0, atol=1e-8)  # derived: truncation 1e-9, rounding 1e-12 / h^2


def test_strip_potential_takes_its_values_on_the_surface():
    # the boundary condition itself: 1 on the strip, 0 beside it, the mean at its edge
    assert_allclose(strip_potential(np.array([-16.0, -15.0, 0.0, 14.9, 20.0]), 30.0, 0.0), [0, 0.5, 1, 1, 0])


@pytest.mark.parametrize("depth", [0.0, 5.0, 30.0, 400.0])
def test_comb_is_the_sum_of_its_strips(depth):
    x, period, width = np.linspace(-250, 250, 41) + 0.123, 160.0, 30.0
    places = period * np.arange(-20_000, 20_001)
    summed = np.array([strip_potential(at - places, width, depth).sum() for at in x])
    # derived: beyond M strips on each side remains 2 width depth / (pi period^2 M)
    assert_allclose(comb_potential(x, width, depth, period), summed, atol=2e-5)


def test_gates_attract_when_their_turn_comes():
    """With growing phi the lowest place of the potential moves away from the probe, by one period in a cycle."""
    where, potential = CONVEYOR.potential(np.linspace(0, 2 * pi, 33))
    inner = (where > 200) & (where < 600)
    lowest = where[inner][potential[:, inner].argmin(axis=1)]
    moves = (np.diff(lowest) + 80) % 160 - 80
    assert (moves >= 0).all()
    assert moves.sum() == 160  # the comb's period


def test_traces_are_voltages():
    """The same comb driven by named voltages is the same Hamiltonian."""
    names = ("v0", "v1", "v2", "v3")
    cycle = sp.Cycle(lambda phi: {name: 10 * cos(phi - pi / 2 * j) for j, name in enumerate(names)})
    traced = replace(CONVEYOR, comb=replace(COMB, amplitude=0, traces=names), cycle=cycle)
    one, other = (DrivenHamiltonian(device.pump()) for device in (CONVEYOR, traced))
    for phase in (0.0, 0.4, 3.3):
        assert_allclose(one.at(phase), other.at(phase), atol=1e-12)  # derived


# ---- the grid --------------------------------------------------------------------------------------------------------


def barrier(step):
    """Electrons of GaAs's mass at 20 meV before a barrier of 30 meV and 10 nm."""
    gate = sp.Gate(position=20, width=10, voltage=-30)
    return sp.GatedChannel(mass=0.067, length=40, step=step, fermi_level=20, gates=[gate]).pump()


def test_dispersion_converges_as_the_square_of_the_step():
    """Wave number at 20 meV against k = sqrt(2mE)/hbar."""
    exact = sqrt(0.067 * 20 / HALF_HBAR_SQUARED)
    momenta = [np.abs(with_modes(barrier(a)).leads[0].modes(20.0)[0].momenta).max() / a for a in (2.0, 1.0, 0.5)]
    errors = np.array(momenta) - exact
    assert_allclose(errors / exact, exact**2 / 24 * np.array([4, 1, 0.25]), rtol=0.03)  # (ka)^2/24, series expansion
    assert_allclose(errors[:-1] / errors[1:], 4, rtol=0.03)


def test_square_barrier_converges_as_the_square_of_the_step():
    """T = 1/(1 + V^2 sinh^2(kappa w) / (4 E (V - E))), any textbook of quantum mechanics."""
    height, energy, width = 30.0, 20.0, 10.0
    kappa = sqrt(0.067 * (height - energy) / HALF_HBAR_SQUARED)
    exact = 1 / (1 + height**2 * sinh(kappa * width) ** 2 / (4 * energy * (height - energy)))
    found = [float(sp.reflect(barrier(step), [0.0]).leakage[0]) for step in (1.0, 0.5, 0.25)]
    errors = np.array(found) - exact
    assert abs(errors[-1]) < 2e-4 * exact
    assert_allclose(errors[:-1] / errors[1:], 4, rtol=0.05)


def test_hopping_is_the_handbooks():
    assert_allclose(CONVEYOR.hopping, HALF_HBAR_SQUARED / (0.19 * 10**2), rtol=1e-6)


# ---- integers --------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("level", "number"), [(-1.05, 1), (-0.05, 2)])
def test_conveyor_carries_the_levels_that_each_well_holds(level, number):
    """A sliding potential that traps n filled levels carries n: D. J. Thouless, Phys. Rev. B 27, 6083 (1983)."""
    pump = replace(CONVEYOR, fermi_level=level, length=480).pump()
    winding = sp.certify(pump)
    assert winding.certified
    assert winding.number == sp.chern_number(pump) == number


def test_sliding_wave_carries_one_and_backwards_one_back():
    wave = sp.SlidingWave(amplitude="2.5 meV", wavelength="0.16 um")
    channel = replace(CONVEYOR, comb=None, waves=[wave], length=480)
    pump = channel.pump()
    assert sp.certify(pump).number == 1
    assert sp.certify(pump.on(pump.cycle.reversed())).number == -1


# Bands 1 and 2 of plane-wave calculations with other code, by the lattice method of T. Fukui, Y. Hatsugai, H. Suzuki,
# J. Phys. Soc. Jpn. 74, 1674 (2005); the first excited band turns round where the short lattice dominates, as M. Lohse
# et al., Nature Phys. 12, 350 (2016) saw.  Fermi levels: derived, in the gaps.
SUPERLATTICES = [
    (10, 20, 9.8, 1),
    (10, 20, 12.6, 2),
    (10, 5, 5.145, 1),
    (10, 5, 8.0, 0),
    (6, 3, 3.5, 1),
    (6, 3, 5.5, 0),
    (0.5, 10, 3.2, 1),
]


@pytest.mark.parametrize(("short", "long", "level", "number"), SUPERLATTICES)
def test_superlattice_of_light(short, long, level, number):
    cells = 16 if level == 5.145 else 8
    lattice = sp.OpticalLattice(cells=cells, short_depth=short, long_depth=long, fermi_level=level)
    winding = sp.certify(lattice.pump())
    assert winding.certified
    assert winding.number == number


# ---- units -----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "unit", "value"),
    [
        ("3.2 meV", "meV", 3.2),
        ("80nm", "nm", 80.0),
        ("0.08 um", "nm", 80.0),
        ("-1e-3 eV", "meV", -1.0),
        ("12 mV", "mV", 12.0),
        ("0.19 m_e", "electron_mass", 0.19),
        ("1.602176634e-22 J", "meV", 1.0),  # exact: BIPM, The International System of Units, 9th ed. (2019)
    ],
)
def test_text_with_a_unit(text, unit, value):
    assert_allclose(sp.quantity(text, unit), value, rtol=1e-13)


@pytest.mark.parametrize("text", ["3.2 nm", "80", "nm", "3 apples", "9**9**9 meV", "nan meV", "1 degC", ""])
def test_text_without_the_right_unit_is_refused(text):
    with pytest.raises(sp.InputError, match="allowed: a number in meV, or text with a unit"):
        sp.quantity(text, "meV", "fermi_level")


def test_recoil_of_rubidium():
    """The recoil of 87Rb in a lattice of light of 767 nm is h * 3.9 kHz: h/(8 m d^2), CODATA's constants."""
    lattice = sp.OpticalLattice(
        cells=2, short_depth=10, long_depth=20, fermi_level=9.8, spacing="383.5 nm", mass="86.909 u"
    )
    units = lattice.pump().units
    assert units is not None
    assert_allclose(units.energy / 6.62607015e-34, 3902.3, rtol=1e-3)


FILE = """
kind = "channel"
mass = "0.19 electron_mass"
length = "0.8 um"
step = "10 nm"
fermi_level = "-1.05 meV"
lead_level = -4
depth = "30 nm"
comb = {pitch = "40 nm", width = "30 nm", phases = 4, amplitude = "0.01 V"}
"""


def test_file_with_units_is_the_same_device(tmp_path: Path):
    path = tmp_path / "conveyor.toml"
    path.write_text(FILE)
    device = load_device(path)
    assert replace(device, cycle=CONVEYOR.cycle) == CONVEYOR
    assert load_device(path, ["fermi_level=-50 ueV"]).fermi_level == pytest.approx(-0.05)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ("length=80 meV", ("length", "cannot be counted in nm")),
        ("comb.pitch=true", ("comb.pitch", "is no quantity")),
        ("step=7", ("step", "a whole part of the length, such as")),
        ("lead_level=3", ("lead_level", "below the Fermi level")),
        ("comb.phases=2", ("phases", "no direction")),
        ("comb.width=50", ("width", "up to the pitch")),
        ("depth=-1", ("depth", "at least 0")),
        ("comb.traces=['a']", ("traces", "one name a phase")),
        ("gates=[{position = 3, width = 2, trace = 'left'}]", ("'left'", "cycle does not set")),
        ("fermi_level=90", ("step", "so fine that the wires still have a wave")),
    ],
)
def test_mistakes_in_a_channel_are_told_by_name(tmp_path: Path, change: str, words: tuple[str, ...]):
    path = tmp_path / "conveyor.toml"
    path.write_text(FILE)
    with pytest.raises(sp.InputError) as caught:
        load_device(path, [change])
    assert all(word in str(caught.value) for word in words), str(caught.value)


def test_channel_of_another_step_has_no_interior_but_a_verdict_all_the_same():
    """Half a period of 160 nm is no whole number of steps of 100 nm / 9."""
    channel = replace(CONVEYOR, step=800 / 71)
    assert channel.cell is None
    assert channel.pump().bulk is None
    assert sp.certify(channel.pump()).number == 1


def test_verdict_tells_energies_in_their_unit():
    verdict = sp.judge(replace(CONVEYOR, length=400).pump())
    text = verdict.summary()
    assert "Fermi level -1.05 meV " in text
    for row in ("bulk gap", "Fermi window"):
        assert " meV" in next(line for line in text.splitlines() if line.startswith(row))
    # 1 meV in joules by the SI of 2019, exact; the step is 10 nm
    assert verdict.to_dict()["units"] == pytest.approx({"energy": 1.602176634e-22, "length": 1e-8}, rel=1e-12)
