"""Checks on the leads' modes: the probe must be open, still, and away from the edges of its bands."""

from __future__ import annotations

from dataclasses import replace
from math import inf
from typing import Any

import numpy as np

from scatterpump.audit.check import Outcome, alarm, check, graded, passed
from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import Place
from scatterpump.errors import ClosedProbeError, InputError, SolverError
from scatterpump.pump import Pump
from scatterpump.solver.leads import DrivenLead, driven_leads

__all__ = ["leads_still", "modes_move", "probe_open"]

COUNTED_AT = 8
SLOW = 0.02  # of 2|V|: an energy of 4e-4 hoppings from the edge of a cosine band, where a contact is 50 times weaker
STANDING = 1e-6  # of 2|V|: 1e-12 hoppings from the edge, where velocities are lost in rounding


@check(
    "leads still",
    unit="leads",
    because="The phases of lead modes are arbitrary; det r is comparable between phases on one set of modes only.",
    alarm="a lead changes along the cycle",
    remedy="Move the modulated part of the lead into the scattering region.",
)
def leads_still(evidence: Evidence) -> Outcome | None:
    """Do all leads stay as they are along the cycle, with the same modes?"""
    try:
        driven = driven_leads(evidence.pump)
    except SolverError as error:
        text = str(error)
        return alarm(inf, 0, f"{text[0].upper()}{text[1:]}.", remedy="Mend the value functions of that lead.")
    if not driven:
        return passed(0, 0, "No lead takes a parameter of the cycle.", basis="exact")
    moving = [lead for lead in driven if not lead.is_still]
    if not moving:
        return passed(0, 0, _still(driven))
    lead = moving[0]
    text = lead.problem[0].upper() + lead.problem[1:] + ", so its modes change along the cycle"
    counts = _mode_counts(evidence.pump, lead.number)
    if len(counts) > 1:
        text += f" (between {min(counts)} and {max(counts)} of them are open)"
    return alarm(len(moving), 0, text + " and det r is not comparable.", Place(phase=lead.phase, lead=lead.number))


def _still(leads: tuple[DrivenLead, ...]) -> str:
    numbers, names = [str(lead.number) for lead in leads], sorted({name for lead in leads for name in lead.names})
    one = len(leads) == 1
    text = f"Lead{'' if one else 's'} {', '.join(numbers)} take{'s' if one else ''} {', '.join(names)}"
    looked = min(lead.phases for lead in leads)
    return f"{text}, but {'its' if one else 'their'} elements are the same at all {looked} phases sampled."


def _mode_counts(pump: Pump, lead: int) -> set[int]:
    """Numbers of open modes met along the cycle, as far as they can be computed."""
    found = set()
    for phase in 2 * np.pi * np.arange(COUNTED_AT) / COUNTED_AT:
        try:
            modes = pump.finalized.leads[lead].modes(pump.fermi_level, params=pump.parameters(float(phase)))[0]
        except Exception:  # only a remark in a message that is an alarm anyway
            return set()
        found.add(len(modes.momenta) // 2)
    return found


@check(
    "modes move",
    unit="1",
    because="A mode close to the edge of its band hardly moves: the contact becomes weak and sharply dependent on "
    "energy, and at the edge itself there is no mode to normalise.",
    caution=f"an open mode is slower than {SLOW:g} of the largest velocity that its lead allows",
    alarm=f"a mode is slower than {STANDING:g} of it, or cannot be computed at all",
    remedy="Shift the lead's level or its hopping, so that the Fermi level is well inside its band.",
)
def modes_move(evidence: Evidence) -> Outcome | None:
    """Is the Fermi level away from the edges of every lead's bands?"""
    level = evidence.pump.fermi_level
    try:
        system = evidence.system
    except ClosedProbeError:
        return None
    except InputError:
        return alarm(
            0, STANDING, f"At the Fermi level {level:g} a lead has a mode that stands still, at the edge of its band."
        )
    shares = [(_speed(evidence, system, lead), lead) for lead in range(len(system.leads))]
    value, lead = min(shares, default=(1.0, 0))
    text = f"The slowest open mode at the Fermi level {level:g} has {value:.2g} of the largest velocity its lead allows"
    found = graded(-value, (-SLOW, -STANDING), text + ".", text + ": the edge of its band is near.", Place(lead=lead))
    return replace(found, value=value, limit=-found.limit, basis="exact")


def _speed(evidence: Evidence, system: Any, lead: int) -> float:
    """Slowest open mode of a lead against the bound 2|V| on all of its velocities; 1 if it has none."""
    cells = evidence.pump.finalized.leads[lead]
    if not hasattr(cells, "inter_cell_hopping"):
        return 1.0
    velocities = np.abs(system.leads[lead].modes(evidence.pump.fermi_level)[0].velocities)
    bound = 2 * float(np.linalg.norm(cells.inter_cell_hopping(params=evidence.pump.parameters(0.0)), ord=2))
    return float(velocities.min()) / bound if velocities.size and bound > 0 else 1.0


@check(
    "probe open",
    unit="modes",
    because="Without an open mode r is empty, and the determinant of nothing is 1 for any device.",
    alarm="the probe has no open mode at the Fermi level",
    remedy="Raise the probe's hopping or shift its level until the Fermi level lies in its band.",
)
def probe_open(evidence: Evidence) -> Outcome | None:
    """Has the probe an open mode at the Fermi level?"""
    pump = evidence.pump
    try:
        modes = len(evidence.system.leads[pump.probe].modes(pump.fermi_level)[0].momenta) // 2
    except ClosedProbeError:
        text = f"The probe has no open mode at the Fermi level {pump.fermi_level:g}, so there is no r to wind."
        return alarm(0, 1, text, Place(lead=pump.probe), basis="exact")
    except InputError:
        return None
    return passed(modes, 1, f"The probe has {modes} open mode(s) at the Fermi level.", basis="exact")
