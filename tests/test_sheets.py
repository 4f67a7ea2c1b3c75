"""Ribbons and flux-threaded cylinders: modes, Hall integers from reflection, and the gauge that does not close."""

from __future__ import annotations

from dataclasses import replace
from math import cos, pi
from typing import Any

import numpy as np
import pytest
from berry import carried

from scatterpump.builder.cylinder import FluxCylinder
from scatterpump.builder.description import Disorder, SheetLead, Wave
from scatterpump.builder.ribbon import ModulatedRibbon
from scatterpump.bulk.chern import chern_number
from scatterpump.bulk.gap import bulk_gap
from scatterpump.cycle import Cycle
from scatterpump.errors import InputError
from scatterpump.pump import Pump
from scatterpump.solver.direct import scattering_matrices
from scatterpump.solver.modes import with_modes
from scatterpump.solver.reflect import reflect
from scatterpump.verdict import judge
from scatterpump.winding.certificate import certify

WIRES = SheetLead(hopping=1.5, across=0.0)
TUBE = SheetLead(hopping=1.5)


def modes(pump: Pump) -> int:
    return len(with_modes(pump).leads[0].modes(pump.fermi_level)[0].momenta) // 2


# --- modes of wide leads ---


@pytest.mark.parametrize(
    ("width", "energy", "count"), [(10, -3.5, 2), (10, -2.0, 5), (10, 0.1, 9), (10, 3.0, 3), (5, -3.1, 1), (5, -1.1, 3)]
)
def test_ribbon_lead_has_the_modes_of_a_strip(width: int, energy: float, count: int) -> None:
    """S. Datta, Electronic Transport in Mesoscopic Systems, CUP 1995 (from memory): |E - 2t cos(pi m/(W+1))| < 2t."""
    levels = [2 * cos(pi * m / (width + 1)) for m in range(1, width + 1)]
    assert sum(abs(energy - level) < 2 for level in levels) == count
    assert modes(ModulatedRibbon(sites=1, width=width, fermi_level=energy).pump()) == count


@pytest.mark.parametrize(("around", "energy"), [(5, -3.0), (6, -2.5), (7, 0.3), (8, 1.1)])
def test_cylinder_lead_has_the_modes_of_a_tube(around: int, energy: float) -> None:
    """S. Datta, as above, with hopping -t: |E + 2t cos(2 pi m/W)| < 2t on a tube."""
    levels = [-2 * cos(2 * pi * m / around) for m in range(around)]
    tube = FluxCylinder(sites=1, around=around, fermi_level=energy)
    assert modes(tube.pump()) == sum(abs(energy - level) < 2 for level in levels)


def test_separate_wires_have_a_mode_each() -> None:
    # derived
    assert modes(FluxCylinder(sites=1, around=4, probe=WIRES, drain=WIRES, fermi_level=0.3).pump()) == 4


# --- Hall integers from reflection ---

# Gaps of the square lattice in a field, Fermi levels in windows free of states at every threaded flux (derived), and
# Hall numbers t: D. J. Thouless, M. Kohmoto, M. P. Nightingale, M. den Nijs, Phys. Rev. Lett. 49, 405 (1982); flux
# insertion as in R. B. Laughlin, Phys. Rev. B 23, 5632 (1981) (from memory).
HALL = [(1 / 3, -1.366, 1), (1 / 3, 1.366, -1), (1 / 4, -1.8, 1), (2 / 5, -0.95, 1)]


def cylinder(flux: float, energy: float, **changes: Any) -> FluxCylinder:
    usual: dict[str, Any] = {"sites": 12, "around": 3, "flux": flux, "fermi_level": energy, "probe": WIRES}
    return FluxCylinder(**{**usual, "drain": WIRES, **changes})


@pytest.mark.parametrize(("flux", "energy", "hall"), HALL)
def test_threaded_flux_pumps_the_hall_number(flux: float, energy: float, hall: int) -> None:
    pump = cylinder(flux, energy).pump()
    assert certify(pump).number == hall
    assert chern_number(pump) == hall


def test_above_all_bands_nothing_is_pumped() -> None:
    # derived
    assert certify(cylinder(1 / 3, 2.9, sites=3).pump()).number == 0


@pytest.mark.parametrize("changes", [{"probe": TUBE, "drain": TUBE}, {"disorder": Disorder(onsite=0.3, seed=1)}])
def test_hall_number_does_not_depend_on_leads_or_weak_disorder(changes: dict[str, Any]) -> None:
    """The gap is 1.27 wide, and what is smaller in norm than half of it cannot close it (Weyl's inequality)."""
    assert certify(cylinder(1 / 3, -1.366, **changes).pump()).number == 1


def test_flux_spread_over_all_bonds_does_not_close_between_tubes() -> None:
    """Between leads with bonds across, one turn of a spread flux is not the same device: det r does not come back."""
    tube = cylinder(1 / 3, -1.366, sites=6, gauge="spread", probe=TUBE, drain=TUBE)
    alarms = {alarm.check for alarm in judge(tube.pump()).audit.alarms}
    assert "cycle closes" in alarms
    start, end = reflect(tube.pump(), [0.0, 2 * pi], engine="direct").determinant
    assert abs(end - start) > 0.3  # derived: measured 0.4 to 1.1 on such cylinders


def test_flux_on_the_seam_closes() -> None:
    pump = cylinder(1 / 3, -1.366, probe=TUBE, drain=TUBE).pump()
    start, end = reflect(pump, [0.0, 2 * pi], engine="direct").determinant
    assert abs(end - start) < 1e-9


def test_seam_and_spread_are_one_device_between_separate_wires() -> None:
    """A gauge transformation that separate wires do not notice: |S| is the same at every flux (derived)."""
    seam, spread = (cylinder(1 / 3, -1.366, sites=6, gauge=gauge).pump() for gauge in ("seam", "spread"))
    for phi in (0.4, 2.9):
        one, other = (np.abs(scattering_matrices(pump, np.array([phi]))[0]) for pump in (seam, spread))
        np.testing.assert_allclose(one, other, atol=1e-10)


# --- ribbons ---


def ribbon(**changes: Any) -> ModulatedRibbon:
    wires = SheetLead(hopping=2.0, across=0.0)
    usual: dict[str, Any] = {"sites": 18, "width": 2, "across": 0.2, "onsite": [Wave(1.5, 3)], "fermi_level": -1.2}
    return ModulatedRibbon(**{**usual, "probe": wires, "drain": wires, **changes})


@pytest.mark.parametrize(
    ("width", "across", "energy", "number"),
    [(1, 0.2, -1.2, 1), (2, 0.2, -1.2, 2), (2, 0.9, -2.2, 1), (3, 0.2, -1.2, 3)],
)
def test_modes_of_a_ribbon_add_up(width: int, across: float, energy: float, number: int) -> None:
    """Mode m is the chain at E - e_m; it carries t = +1 where that lies in its window (-1.75, -0.671) and 0 below -2.4.

    Windows: roots of the cubic E^3 - 3(1 + V^2/4) E = V^3/4 cos 3 phi + 2 cos K (derived); t: Thouless et al., above.
    """
    levels = [2 * across * cos(pi * m / (width + 1)) for m in range(1, width + 1)]
    inside = sum(-1.75 < energy - level < -0.671 for level in levels)
    assert inside == number
    assert certify(ribbon(width=width, across=across, fermi_level=energy).pump()).number == number


def test_confinement_raises_the_rows_beside_the_middle() -> None:
    """At 8 per site squared the two outer rows leave the window for good, and one of three modes is left (derived)."""
    assert certify(ribbon(width=3, confinement=8.0).pump()).number == 1


def test_field_through_a_ribbon_is_what_one_way_round_a_plaquette_gains() -> None:
    system = ribbon(flux=0.15, sites=3, onsite=[]).pump().finalized
    at = {site.tag: i for i, site in enumerate(system.sites)}
    matrix = system.hamiltonian_submatrix(params={"phi": 0.0})
    loop = [(0, 0), (1, 0), (1, 1), (0, 1), (0, 0)]
    gained = np.prod([-matrix[at[b], at[a]] for a, b in zip(loop[:-1], loop[1:], strict=True)])
    # R. Peierls, Z. Phys. 80, 763 (1933) (from memory): 2 pi times the flux in quanta, counter-clockwise
    assert np.angle(gained) == pytest.approx(2 * pi * 0.15)


def test_ribbon_in_a_field_carries_what_its_bands_do() -> None:
    """The field mixes the rows; an independent route over its Bloch Hamiltonian, written anew, gives the number."""
    flux, across = 0.1, 0.4

    def bloch(k: float, phi: float) -> Any:
        h = np.zeros((6, 6), dtype=complex)
        for x in range(3):
            for y in range(2):
                h[2 * x + y, 2 * x + y] = 1.5 * cos(2 * pi * x / 3 - phi) / 2
                hop = -np.exp(-2j * pi * flux * (y - 0.5)) * (np.exp(-1j * k) if x == 2 else 1)
                h[2 * ((x + 1) % 3) + y, 2 * x + y] += hop
            h[2 * x + 1, 2 * x] -= across
        return h + h.conj().T

    pump = ribbon(flux=flux, across=across).pump()
    winding, gap = certify(pump), bulk_gap(pump)
    assert gap.is_open
    assert winding.number == round(carried(bloch, gap.filled)) == 2
    assert chern_number(replace(pump, bulk=None)) == 2


@pytest.mark.parametrize(
    ("make", "match"),
    [
        (lambda: ribbon(width=0), "width is 0"),
        (lambda: ribbon(sites=0), "sites is 0"),
        (lambda: ribbon(flux=float("nan")), "flux is nan"),
        (lambda: ribbon(confinement=float("inf")), "confinement is inf"),
        (lambda: ribbon(onsite=[Wave("depth", 3)]), "'depth'"),
        (lambda: cylinder(0.1, 0.0, around=2), "around is 2"),
        (lambda: cylinder(0.1, 0.0, gauge="landau"), "gauge is 'landau'"),
        (lambda: cylinder(0.1, 0.0, cycle=Cycle.angle("flux")), "does not set phi"),
        (lambda: SheetLead(across=float("nan")), "across is nan"),
    ],
)
def test_what_is_out_of_range_is_refused(make: Any, match: str) -> None:
    with pytest.raises(InputError, match=match):
        make()


def test_chern_number_of_many_bands_needs_no_finer_grid() -> None:
    """Eight rows hardly tied to each other carry eight times what one does (derived)."""
    pump = ribbon(width=8, across=0.05).pump()
    assert chern_number(pump) == 8
