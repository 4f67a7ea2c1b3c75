"""Checks on the leads: the probe must be open and still, and a drain must be there."""

from __future__ import annotations

from scatterpump.audit.finding import Finding
from scatterpump.errors import ClosedProbeError
from scatterpump.pump import Pump
from scatterpump.solver.modes import varying_leads, with_modes

__all__ = ["drain_present", "leads_still", "probe_open"]


def leads_still(pump: Pump) -> Finding:
    """No lead may depend on the cycle: det r is comparable between phases on one set of modes only."""
    varying = varying_leads(pump)
    if not varying:
        return Finding("leads still", "pass", 0, 0, "leads", "No lead depends on the cycle.")
    lead, names = varying[0]
    return Finding(
        "leads still",
        "alarm",
        len(varying),
        0,
        "leads",
        f"Lead {lead} depends on {', '.join(names)}, so its modes change along the cycle and det r is not comparable.",
        "Move the modulated part of the lead into the scattering region.",
        f"lead {lead}",
    )


def probe_open(pump: Pump) -> Finding:
    """The probe needs an open mode, else r is empty and its determinant is 1 for any device."""
    try:
        system = with_modes(pump)
    except ClosedProbeError:
        return Finding(
            "probe open",
            "alarm",
            0,
            1,
            "modes",
            f"The probe has no open mode at the Fermi level {pump.fermi_level:g}, so there is no r to wind.",
            "Raise the probe's hopping or shift its level until the Fermi level lies in its band.",
            f"lead {pump.probe}",
        )
    modes = len(system.leads[pump.probe].modes(pump.fermi_level)[0].momenta) // 2
    return Finding("probe open", "pass", modes, 1, "modes", f"The probe has {modes} open mode(s) at the Fermi level.")


def drain_present(pump: Pump) -> Finding:
    """Without a drain the far edge level unwinds what the near one wound, and the true total is 0."""
    if pump.drain is not None:
        modes = len(with_modes(pump).leads[pump.drain].modes(pump.fermi_level)[0].momenta) // 2
        if modes:
            return Finding(
                "drain present", "pass", modes, 1, "modes", f"The drain has {modes} open mode(s) at the Fermi level."
            )
        return Finding(
            "drain present",
            "alarm",
            0,
            1,
            "modes",
            f"The drain has no open mode at the Fermi level {pump.fermi_level:g}, so it takes nothing "
            "and the true winding is 0.",
            "Raise the drain's hopping or shift its level until the Fermi level lies in its band.",
            f"lead {pump.drain}",
        )
    return Finding(
        "drain present",
        "alarm",
        0,
        1,
        "drains",
        "The far end is a hard wall: r is unitary whatever happens, and the narrow level of the far edge takes back "
        "exactly what the near edge took in, so the true winding is 0.",
        "Attach a drain at the far end.",
    )
