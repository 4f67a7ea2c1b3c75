"""The charge a pump carries in a cycle, and by how much and why it misses the integer.

The cold and slow charge is Brouwer's (`frozen`), temperature averages it over energy (`thermal`), and a finite
frequency replaces it by Floquet scattering (`floquet`).  What each of them takes off the integer is told separately.

Single-particle theory: no interaction, no charging energy, no decoherence, no phonons; all leads share one Fermi
function.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import isfinite

import numpy as np

from scatterpump.errors import InputError
from scatterpump.operation.driven import ABSOLUTE, RELATIVE, DrivenCharge, driven_charge
from scatterpump.operation.slow import SlowCharge, SlowCharges, slow_charge
from scatterpump.operation.thermal import Levels, average, edges, weight
from scatterpump.pump import Pump
from scatterpump.winding.result import Winding

__all__ = ["Charge", "charge"]


@dataclass(frozen=True)
class Charge:
    """What a pump carries in one cycle, in units of e.

    Attributes
    ----------
    probe : float
        Charge that enters from the probe; +1 is one particle from probe to drain.
    leads : tuple of float
        Charge that enters from each lead, in the order of their numbers.
    number : int or None
        The proven winding; None where there is no proof.
    leakage : float or None
        What the cold, slow charge misses of the number because electrons leak through the device; taken from the
        transmission alone and so known however small it is.  None without a number.
    quadrature : float or None
        Cold, slow charge less number and leakage: what the numerical integral misses.
    thermal, speed : float
        What temperature adds to the cold, slow charge, and what frequency adds to that.
    error : float
        Estimated numerical error of `probe`.
    temperature, frequency : float
        k_B T and hbar omega, as energies in the pump's unit.
    sidebands : int
        Rungs on either side of the Fermi level in Floquet scattering; 0 for a slow cycle.
    evaluations : int
        Scattering problems solved, a ladder of sidebands counting as one.
    method : str
        How it was obtained.
    """

    probe: float
    leads: tuple[float, ...]
    number: int | None
    leakage: float | None
    quadrature: float | None
    thermal: float
    speed: float
    error: float
    temperature: float
    frequency: float
    sidebands: int
    evaluations: int
    method: str

    @property
    def deviation(self) -> float | None:
        """`probe` less `number`, the sum of leakage, quadrature, thermal and speed; None without a number."""
        return None if self.number is None else self.probe - self.number

    @property
    def conservation(self) -> float:
        """Sum of `leads`: 0 but for numerical errors."""
        return float(sum(self.leads))


def charge(pump: Pump, *, temperature: float = 0.0, frequency: float = 0.0, winding: Winding | None = None) -> Charge:
    """Return the charge that `pump` carries in one cycle.

    Parameters
    ----------
    pump : Pump
    temperature, frequency : float
        k_B T of all leads and hbar omega of the drive, as energies in the pump's unit; not negative.
    winding : Winding, optional
        The pump's winding, if it is known already.

    Raises
    ------
    ClosedProbeError
        If the probe has no open mode at the Fermi level.
    InputError
        If temperature or frequency is negative or not finite, or a lead depends on the cycle.
    SolverError
        If the Hamiltonian or its solution fails at some phase.

    Examples
    --------
    >>> from scatterpump.builder.chain import ModulatedChain
    >>> from scatterpump.builder.description import Lead, Wave
    >>> wire = Lead(hopping=2.0)
    >>> found = charge(ModulatedChain(sites=30, fermi_level=-1.2, onsite=[Wave(1.5, 3)], probe=wire, drain=wire).pump())
    >>> found.number, found.leakage < 0
    (1, True)
    """
    for name, value in (("temperature", temperature), ("frequency", frequency)):
        if not (isfinite(value) and value >= 0):
            raise InputError(f"{name} is {value}", allowed="an energy that is not negative")
    from threadpoolctl import threadpool_limits

    with threadpool_limits(1):  # many small problems: threads would only get in each other's way
        slow = slow_charge(pump, winding)
        warm = _warm(pump, slow, temperature) if temperature > 0 else _unchanged(slow)
        driven = driven_charge(pump, slow.found.leads, frequency, temperature) if frequency > 0 else warm
    return _assembled(pump, slow, warm, driven, (temperature, frequency))


def _unchanged(slow: SlowCharge) -> DrivenCharge:
    return DrivenCharge(np.zeros_like(slow.found.leads), 0.0, 0, 0)


def _warm(pump: Pump, slow: SlowCharge, temperature: float) -> DrivenCharge:
    """The thermal average of the slow charge."""
    charges = SlowCharges(pump, slow)
    found = average(
        Levels(charges.at, slow.found.leads),
        lambda energies: weight(energies, temperature, 0.0)[None],
        edges(temperature, 0.0),
        absolute=np.full(len(slow.found.leads), ABSOLUTE),
        relative=RELATIVE,
    )
    return DrivenCharge(found.shift[0], float(found.errors.max()), 0, charges.evaluations)


def _assembled(
    pump: Pump, slow: SlowCharge, warm: DrivenCharge, driven: DrivenCharge, at: tuple[float, float]
) -> Charge:
    leads = slow.found.leads + driven.shift
    thermal, shift = float(warm.shift[pump.probe]), float(driven.shift[pump.probe])
    work = slow.found.evaluations + warm.evaluations + (0 if driven is warm else driven.evaluations)
    return Charge(
        float(leads[pump.probe]),
        tuple(leads.tolist()),
        slow.number,
        None if slow.number is None else slow.found.leak,
        slow.residual,
        thermal,
        shift - thermal,
        slow.error + driven.error,
        *at,
        driven.sidebands,
        work,
        _method(*at),
    )


def _method(temperature: float, frequency: float) -> str:
    if frequency > 0:
        return "Floquet scattering" + (", averaged over energy" if temperature > 0 else "")
    return "Brouwer's formula" + (", averaged over energy" if temperature > 0 else "")
