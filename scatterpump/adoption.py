"""Which kwant systems can be pumps, and what is the matter with the others.

Any system with leads will do that kwant finalizes from a Builder, whatever its lattice, orbitals and shape.  What is
refused here would fail later, in words of another layer, or mean nothing: an infinite system, one without leads, a lead
without modes, systems whose values are not to be had site by site, and value functions whose parameters have no names.
"""

from __future__ import annotations

from typing import Any

from scatterpump.errors import InputError, told

__all__ = ["finalized", "finalized_cell"]

ADOPTED = "a finite kwant.Builder, or what its finalized() returns, with at least one lead attached"
PER_SITE = ("sites", "onsites", "hoppings", "graph")


def finalized(system: Any) -> Any:
    """Return `system` finalized, after making sure that it can be a pump.

    Raises
    ------
    InputError
        If it cannot: it says why.
    """
    if not hasattr(system, "leads") and not _is_infinite(system):
        raise InputError(f"the system is {_kind(system)}, which is no kwant system", allowed=ADOPTED)
    if _is_infinite(system):
        raise InputError(
            "the system repeats without end, and a pump has two ends",
            allowed=ADOPTED + "; a Builder with a symmetry is a lead, or the pump's bulk",
        )
    found = _finalize(system)
    if not all(hasattr(found, name) for name in PER_SITE):
        raise InputError(
            f"the system is {_kind(system)}, whose values cannot be asked for site by site",
            allowed=ADOPTED,
        )
    if not found.leads:
        raise InputError("the system has no leads, so nothing can be sent in", allowed=ADOPTED)
    for number, lead in enumerate(found.leads):
        if not hasattr(lead, "modes"):
            raise InputError(
                f"lead {number} is given by its self-energy alone, without modes to send electrons in",
                allowed="leads made of a Builder with a translational symmetry, or a kwant.builder.ModesLead",
            )
    for where, part in (("the system", found), *((f"lead {n}", lead) for n, lead in enumerate(found.leads))):
        _require_names(part, where)
    return found


def finalized_cell(cell: Any) -> Any:
    """Return a pump's bulk cell finalized, after making sure that it repeats.

    Raises
    ------
    InputError
        If it does not, or cannot be finalized.
    """
    if not _is_infinite(cell):
        raise InputError(
            f"the bulk is {_kind(cell)}, which does not repeat",
            allowed="a kwant.Builder with one translational symmetry, pointing away from the probe",
        )
    found = _finalize(cell)
    _require_names(found, "the bulk")
    return found


def _require_names(part: Any, where: str) -> None:
    """Refuse value functions whose parameters kwant cannot tell by name: it says why in place of the names."""
    for value, names in (*getattr(part, "onsites", ()), *getattr(part, "hoppings", ())):
        if isinstance(names, Exception):
            reason, _, place = str(names).partition(":\n")
            function = getattr(value, "__name__", "a value function")
            line = place.partition("line ")[2].partition(",")[0]
            raise InputError(
                f"{function}{f' (line {line})' * bool(line)}, a value function of {where}, cannot be used: {reason}",
                allowed="functions of the site or sites and of parameters by name, such as f(site, phi); a number that "
                "stays fixed comes from the function's surroundings, or from the pump's constants",
            ) from names


def _is_infinite(system: Any) -> bool:
    directions = getattr(getattr(system, "symmetry", None), "num_directions", 0)
    return hasattr(system, "cell_size") or (hasattr(system, "finalized") and directions > 0)


def _finalize(system: Any) -> Any:
    if not hasattr(system, "finalized"):
        return system
    try:
        return system.finalized()
    except Exception as cause:  # kwant raises ValueError, TypeError and KeyError; families and tags are the user's
        raise InputError(
            f"kwant cannot finalize the system: {told(cause)}",
            allowed="a Builder of which kwant's finalized() makes a system",
        ) from cause


def _kind(value: Any) -> str:
    return f"of type {type(value).__qualname__}"
