"""Checks on the arithmetic: the computed S must be unitary, apart from what r does."""

from __future__ import annotations

import numpy as np

from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import Finding, graded
from scatterpump.solver.direct import scattering_matrix

__all__ = ["scattering_unitary"]

GOOD_UNITARITY, BAD_UNITARITY = 1e-9, 1e-6
PROBED = (0.3, 2.4, 4.5)


def scattering_unitary(evidence: Evidence) -> Finding:
    """|S^+ S - 1| of the whole scattering matrix at three phases: no current may be lost in rounding."""
    errors = []
    for phase in PROBED:
        matrix = scattering_matrix(evidence.pump, phase)
        errors.append(float(np.linalg.norm(matrix.conj().T @ matrix - np.eye(len(matrix)), ord=2)))
    value, where = max(errors), f"phi = {PROBED[int(np.argmax(errors))]:g}"
    status = graded(value, GOOD_UNITARITY, BAD_UNITARITY)
    if status == "pass":
        return Finding(
            "S unitary", status, value, GOOD_UNITARITY, "1", "The computed scattering matrix conserves current."
        )
    return Finding(
        "S unitary",
        status,
        value,
        GOOD_UNITARITY,
        "1",
        f"The computed scattering matrix loses or gains {value:.1e} of the current.",
        "Check that H is Hermitian, and move the Fermi level away from a lead's band edge.",
        where,
    )
