"""Checks on what hangs together: couplings, sites, leads, and the way from the probe to the drain."""

from __future__ import annotations

from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from scatterpump.audit.check import Outcome, alarm, caution, check, passed
from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import Place

__all__ = ["couplings_present", "drain_present", "leads_apart", "leads_attached", "sites_reached"]

Indices = NDArray[np.int64]


@check(
    "couplings present",
    unit="bonds",
    because="A bond whose hopping is 0 all along the cycle is no bond; it usually stands for a forgotten value.",
    caution="a bond of the system is 0 at every phase sampled",
    remedy="Give the hopping its value, or leave the bond out.",
)
def couplings_present(evidence: Evidence) -> Outcome | None:
    """Does every bond of the system carry a hopping somewhere on the cycle?"""
    bonds = evidence.geometry.bonds
    there = evidence.motion.at_bonds(evidence.motion.is_there.astype(float), bonds)
    absent = bonds[there == 0]
    if not len(absent):
        return passed(0, 0, "Every bond carries a hopping.")
    place = Place(site=evidence.geometry.at(int(absent[0, 0])))
    return caution(len(absent), 0, f"With a hopping of 0 throughout: {_count(len(absent), 'bond')}.", place)


@check(
    "sites reached",
    unit="sites",
    because="A site that no lead reaches takes no part in the pumping: its levels neither fill nor empty, and what "
    "was meant to happen there does not.",
    caution="a site is joined to no lead by hoppings that are not 0",
    remedy="Join the island to the device, or remove it.",
)
def sites_reached(evidence: Evidence) -> Outcome | None:
    """Is every site joined to some lead?"""
    motion = evidence.motion
    seats = [_seats(evidence, lead) for lead in range(len(evidence.geometry.interfaces))]
    reached = np.isin(motion.parts, np.unique(motion.parts[np.concatenate(seats)]))
    islands = np.setdiff1d(motion.site_of, motion.site_of[reached])
    if not islands.size:
        return passed(0, 0, "Every site is joined to a lead.", basis="sampled")
    place = Place(site=evidence.geometry.at(int(islands[0])))
    return caution(len(islands), 0, f"Joined to no lead: {_count(len(islands), 'site')}.", place)


@check(
    "leads attached",
    unit="leads",
    because="A lead that touches nothing the probe reaches can neither feed nor empty the pump.",
    caution="a lead other than probe and drain is not joined to the probe",
    alarm="the probe reaches nothing that moves, or the drain is not joined to the probe",
    remedy="Attach the lead where the device is, with a hopping that is not 0.",
)
def leads_attached(evidence: Evidence) -> Outcome | None:
    """Is every lead joined to the part of the device that the probe feeds?"""
    motion, pump = evidence.motion, evidence.pump
    fed = np.unique(motion.parts[_seats(evidence, pump.probe)])
    moving = np.unique(motion.parts[motion.driven.rows[motion.moves]])
    if moving.size and not np.isin(moving, fed).any():
        text = "The probe is not joined to anything that changes along the cycle, so r stands still."
        return alarm(1, 0, text, Place(lead=pump.probe))
    loose = [
        lead
        for lead in range(len(evidence.geometry.interfaces))
        if not np.isin(motion.parts[_seats(evidence, lead)], fed).any()
    ]
    if not loose:
        return passed(0, 0, "Every lead is joined to the part that the probe feeds.")
    if pump.drain in loose:
        text = "The drain is not joined to the probe, so nothing can leave by it and the true winding is 0."
        return alarm(len(loose), 0, text, Place(lead=pump.drain))
    text = f"Not joined to the probe: lead {', '.join(map(str, loose))}."
    return caution(len(loose), 0, text, Place(lead=loose[0]))


@check(
    "leads apart",
    unit="sites",
    because="Where two leads hold on to the same site, electrons pass from one to the other without entering the "
    "device; a lead attached twice is the usual cause.",
    caution="two leads other than the probe share sites",
    alarm="the probe shares sites with another lead",
    remedy="Remove the lead that is there twice, or put sites of the device between the two.",
)
def leads_apart(evidence: Evidence) -> Outcome | None:
    """Does every lead have sites of its own to hold on to?"""
    seats = [set(interface.tolist()) for interface in evidence.geometry.interfaces]
    shared = [(i, j, seats[i] & seats[j]) for i, j in combinations(range(len(seats)), 2) if seats[i] & seats[j]]
    if not shared:
        return passed(0, 0, "No two leads share a site.", basis="exact")
    shared.sort(key=lambda pair: evidence.pump.probe not in pair[:2])
    first, second, sites = shared[0]
    place = Place(site=evidence.geometry.at(min(sites)), lead=second)
    text = f"Leads {first} and {second} are attached to {_count(len(sites), 'same site')}"
    if evidence.pump.probe in (first, second):
        return alarm(len(sites), 0, text + ", so electrons pass the pump by.", place, basis="exact")
    return caution(len(sites), 0, text + " and count as one.", place, basis="exact")


@check(
    "drain present",
    unit="drains",
    because="What the near edge takes in has to leave at the far one: without a drain r is unitary whatever happens, "
    "and the narrow level of the far edge takes back exactly what the near edge took in, so the true winding is 0.",
    caution="not the drain but another lead takes the charge",
    alarm="there is no drain, it has no open mode, or a moving part that the probe feeds has no way to an open mode",
    remedy="Attach a drain at the far end, with open modes at the Fermi level for every state that the probe sends "
    "in; raise its hopping or shift its level until the Fermi level lies in its band.",
)
def drain_present(evidence: Evidence) -> Outcome | None:
    """Is there a drain that can take an edge level's charge, from every part that is pumped?"""
    pump, motion = evidence.pump, evidence.motion
    open_parts = {lead: motion.parts[_open_seats(evidence, lead)] for lead in range(len(evidence.geometry.interfaces))}
    fed = np.unique(open_parts.pop(pump.probe))
    if not open_parts:
        return alarm(0, 1, "The far end is a hard wall, which takes nothing, so the true winding is 0.", basis="exact")
    if not any(parts.size for parts in open_parts.values()):
        text = f"The drain has no open mode at the Fermi level {pump.fermi_level:g}, so it takes nothing."
        return alarm(0, 1, text, Place(lead=pump.drain), basis="exact")
    pumped = np.intersect1d(fed, motion.parts[motion.driven.rows[motion.moves]])
    every = np.unique(np.concatenate(list(open_parts.values())))
    stuck = np.setdiff1d(pumped, every)
    if stuck.size:
        site = int(motion.site_of[np.flatnonzero(motion.parts == stuck[0])[0]])
        text = f"{_count(len(stuck), 'part')} that the probe feeds and the cycle moves cannot be emptied by any lead."
        return alarm(len(stuck), 0, text, Place(site=evidence.geometry.at(site)))
    if pump.drain is None or not np.isin(open_parts[pump.drain], fed).any():
        others = [lead for lead, parts in open_parts.items() if np.isin(parts, fed).any()]
        text = f"The charge leaves by lead {', '.join(map(str, others))}, which is not named as the drain."
        remedy = "Name that lead as the drain, or attach the drain where the charge arrives."
        return caution(0, 1, text, Place(lead=pump.drain), remedy=remedy)
    return passed(1, 1, f"The drain, lead {pump.drain}, has open modes for all that is pumped.", basis="exact")


def _seats(evidence: Evidence, lead: int) -> Indices:
    """Orbitals that a lead is attached to."""
    offsets = evidence.motion.driven.offsets
    sites = evidence.geometry.interfaces[lead]
    found = [np.arange(offsets[site], offsets[site + 1]) for site in sites]
    return np.concatenate([np.zeros(0, dtype=np.int64), *found])


def _open_seats(evidence: Evidence, lead: int) -> Indices:
    """Orbitals that an open mode of a lead touches."""
    from scatterpump.solver.layers import lead_border

    system = evidence.system
    border = lead_border(
        system.leads[lead],
        system.lead_interfaces[lead],
        evidence.motion.driven.offsets,
        evidence.pump.fermi_level,
    )
    if border is None or border.channels == 0:
        return np.zeros(0, dtype=np.int64)
    reach = np.abs(border.hop @ border.out[:, : border.channels]).max(axis=1)
    return np.asarray(border.orbitals[reach > TOUCHES * reach.max()], dtype=np.int64)


TOUCHES = 1e-12  # of the largest amplitude: what rounding leaves of a mode that is not there


def _count(number: int, word: str) -> str:
    return f"{number} {word}" + ("" if number == 1 else "s")
