"""Checks on the arithmetic, at three phases."""

from __future__ import annotations

from math import inf

import numpy as np

from scatterpump.audit.check import Outcome, check, graded
from scatterpump.audit.evidence import PROBED, Evidence
from scatterpump.audit.finding import Place
from scatterpump.audit.glance import glance
from scatterpump.solver.reflect import reflect

__all__ = ["engines_agree", "scattering_unitary", "well_conditioned"]

UNITARITY = (1e-9, 1e-6)
AGREEMENT = (1e-8, 1e-5)
CONDITION = (1e-8, 1e-4)
MEND = "Check that H is Hermitian, use energies of comparable size, and move the Fermi level away from a band edge."


@check(
    "well conditioned",
    unit="1",
    because="Energies of very different sizes in one device leave few digits for the small ones, and r inherits the "
    "error.",
    caution=f"rounding may change r by more than {CONDITION[0]:g}, at three phases",
    alarm=f"it may change r by more than {CONDITION[1]:g}",
    remedy="Replace huge barriers by missing sites, and use energies of comparable size.",
)
def well_conditioned(evidence: Evidence) -> Outcome | None:
    """How far may rounding of H have moved r?"""
    seen = [glance(evidence.device, phase) for phase in PROBED]
    errors = [inf if found is None else found.error for found in seen]
    value = max(errors)
    text = f"Rounding of H changes r by at most {value:.1e} at the phases probed"
    return graded(
        value, CONDITION, text + ".", text + ", which is no longer small.", Place(phase=PROBED[int(np.argmax(errors))])
    )


@check(
    "engines agree",
    unit="1",
    because="Elimination layer by layer and kwant's own sparse solver share no step; where they differ one of them "
    "has lost digits.",
    caution=f"their r differ by more than {AGREEMENT[0]:g}, at three phases",
    alarm=f"they differ by more than {AGREEMENT[1]:g}",
    remedy=MEND,
)
def engines_agree(evidence: Evidence) -> Outcome | None:
    """Do both solvers find the same r?"""
    pump, system = evidence.pump, evidence.system
    counts = [len(lead.modes(pump.fermi_level)[0].momenta) // 2 for lead in system.leads]
    own = slice(sum(counts[: pump.probe]), sum(counts[: pump.probe + 1]))
    fast = reflect(pump, PROBED, engine="layered", transmission=False).reflection
    errors = np.linalg.norm(fast - evidence.scattering[:, own, own], ord=2, axis=(1, 2))
    value, place = float(errors.max()), Place(phase=PROBED[int(errors.argmax())])
    return graded(value, AGREEMENT, "Both solvers find the same r.", f"The two solvers differ by {value:.1e}.", place)


@check(
    "S unitary",
    unit="1",
    because="The whole scattering matrix conserves the current that the leads carry.",
    caution=f"|S^+ S - 1| exceeds {UNITARITY[0]:g}, at three phases",
    alarm=f"it exceeds {UNITARITY[1]:g}, or S cannot be computed",
    remedy=MEND,
)
def scattering_unitary(evidence: Evidence) -> Outcome | None:
    """Does the computed scattering matrix conserve current?"""
    matrices = evidence.scattering
    lost = matrices.conj().swapaxes(1, 2) @ matrices - np.eye(matrices.shape[1])
    errors = np.linalg.norm(lost, ord=2, axis=(1, 2))
    value, place = float(errors.max()), Place(phase=PROBED[int(errors.argmax())])
    return graded(
        value,
        UNITARITY,
        "The computed scattering matrix conserves current.",
        f"The computed scattering matrix loses or gains {value:.1e} of the current.",
        place,
    )
