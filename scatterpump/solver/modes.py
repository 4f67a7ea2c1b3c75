"""The leads' modes at the Fermi level, computed once and shared by all phi.

The phases of modes are arbitrary; only on one and the same set of modes is det r comparable between phases.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from scatterpump.errors import ClosedProbeError, InputError, told
from scatterpump.pump import Pump
from scatterpump.solver.leads import driven_leads

__all__ = ["with_modes"]


def with_modes(pump: Pump) -> Any:
    """Return the finalized system with every lead's modes precalculated at the Fermi level.

    Raises
    ------
    ClosedProbeError
        If the probe has no open mode there.
    InputError
        If a lead changes along the cycle, or a parameter of the system has no value.
    SolverError
        If the elements of a lead that takes parameters of the cycle cannot be had at some phase.
    """
    return pump.once("modes", lambda: _with_modes(pump))


def _with_modes(pump: Pump) -> Any:
    _require_parameters(pump)
    for lead in driven_leads(pump):
        if not lead.is_still:
            raise InputError(
                lead.problem,
                allowed="leads that stay the same all along the cycle; move the modulated part into the scattering "
                "region",
            )
    try:
        system = _precalculated(pump)
    except Exception as cause:  # kwant meets modes without velocity at a band edge, or a user's value function fails
        raise InputError(
            f"the modes of the leads cannot be computed at the Fermi level {pump.fermi_level:g} ({told(cause)})",
            allowed="an energy away from every lead's band edges, in a unit in which the hoppings are not tiny",
        ) from cause
    propagating, _ = system.leads[pump.probe].modes(pump.fermi_level)
    if len(propagating.momenta) == 0:
        raise ClosedProbeError(pump.fermi_level, pump.probe)
    return system


def _precalculated(pump: Pump) -> Any:
    """The system with its leads' modes; leads with the same matrices share one calculation."""
    parameters = pump.parameters(0.0)
    first = _first_alike(pump.finalized.leads, parameters)
    system = pump.finalized.precalculate(pump.fermi_level, params=parameters, leads=sorted(set(first)), what="modes")
    system.leads = [system.leads[i] for i in first]
    return system


def _first_alike(leads: Sequence[Any], parameters: dict[str, Any]) -> list[int]:
    """For every lead the first one with the same cell and hopping; a lead with declared symmetries is its own."""
    known: dict[Any, int] = {}
    found = []
    for i, lead in enumerate(leads):
        key: Any = i
        if hasattr(lead, "inter_cell_hopping"):  # else it is given by its modes alone
            matrices = lead.cell_hamiltonian(params=parameters), lead.inter_cell_hopping(params=parameters)
            symmetry = lead.discrete_symmetry((), params=parameters)
            declared = symmetry.projectors, symmetry.time_reversal, symmetry.particle_hole, symmetry.chiral
            if all(each is None for each in declared):
                key = tuple((each.shape, each.tobytes()) for each in matrices)
        found.append(known.setdefault(key, i))
    return found


def _require_parameters(pump: Pump) -> None:
    needed = frozenset[str]().union(*(part.parameters for part in (pump.finalized, *pump.finalized.leads)))
    missing = sorted(needed - set(pump.parameters(0.0)))
    if missing:
        raise InputError(
            f"nothing sets the parameter(s) {', '.join(missing)} of the system",
            allowed="values for all of them, from the cycle or from the pump's constants",
        )
