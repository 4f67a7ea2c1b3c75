"""Checks on the cycle: after one turn the Hamiltonian must be back where it began."""

from __future__ import annotations

import numpy as np

from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import Finding, graded

__all__ = ["cycle_closes"]

CLOSED = 1e-9


def cycle_closes(evidence: Evidence) -> Finding:
    """|H(2 pi) - H(0)| against |H|, both by their largest element."""
    pump = evidence.pump
    start, end = (
        pump.finalized.hamiltonian_submatrix(params=pump.parameters(phase), sparse=True) for phase in (0.0, 2 * np.pi)
    )
    gap = abs(end - start).max() / max(abs(start).max(), abs(end).max(), 1e-300)
    status = graded(float(gap), CLOSED, CLOSED)
    if status == "pass":
        return Finding(
            "cycle closes", status, gap, CLOSED, "1", "After one cycle the Hamiltonian is back at its start."
        )
    return Finding(
        "cycle closes",
        status,
        gap,
        CLOSED,
        "1",
        f"After one cycle the Hamiltonian differs from its start by {gap:.1e} of its size, so det r does not come back "
        "and has no winding.",
        "Let every parameter return to its first value; spread a flux so that one cycle changes it by a whole quantum "
        "on each bond that carries it.",
        "phi = 0",
    )
