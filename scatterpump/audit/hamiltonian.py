"""Checks on H itself: its elements must be numbers, and it must be Hermitian."""

from __future__ import annotations

import numpy as np

from scatterpump.anatomy.geometry import geometry
from scatterpump.audit.check import Outcome, alarm, check, graded, passed
from scatterpump.audit.evidence import Evidence
from scatterpump.audit.finding import Place
from scatterpump.errors import SolverError
from scatterpump.pump import Pump

__all__ = ["elements_finite", "hermitian"]

SKEW = 5e-14  # of the largest element: more than the rounding of a value function, and less than kwant refuses


@check(
    "elements finite",
    unit="elements",
    because="An infinite or undefined matrix element leaves no Hamiltonian to speak of.",
    alarm="at some phase an element is infinite or not a number",
    remedy="Mend the value function there; a division by a parameter that passes 0 is the usual cause.",
)
def elements_finite(evidence: Evidence) -> Outcome | None:
    """Are all matrix elements of H finite numbers at the phases sampled?"""
    try:
        evidence.motion  # noqa: B018  (asking for it samples H)
    except SolverError as error:
        found = _not_finite(evidence.pump, error.phase)
        if found is None:
            raise
        count, place = found
        return alarm(count, 0, f"{count} matrix element(s) of H are infinite or not a number.", place)
    return passed(0, 0, "All matrix elements are finite.")


def _not_finite(pump: Pump, phase: float) -> tuple[int, Place] | None:
    """Number of elements that are not finite at `phase`, and the first one's site; None if H cannot be built."""
    try:
        matrix, counts, _ = pump.finalized.hamiltonian_submatrix(
            params=pump.parameters(phase), sparse=True, return_norb=True
        )
    except Exception:  # the value function fails: that is bad input, and the first error says so
        return None
    found = matrix.tocoo()
    bad = np.flatnonzero(~np.isfinite(found.data))
    if not bad.size:
        return None
    site = int(np.searchsorted(np.cumsum(counts), found.row[bad[0]], side="right"))
    return len(bad), Place(phase=phase, site=geometry(pump).at(site))


@check(
    "Hamiltonian Hermitian",
    unit="1",
    because="Only a Hermitian H conserves particles; an imaginary level makes or destroys them, r is not unitary even "
    "in a gap, and no charge can be read from it.",
    alarm=f"|H - H^+| exceeds {SKEW:g} of the largest element",
    remedy="Make on-site values real or Hermitian matrices; kwant sets the reverse of every hopping itself.",
)
def hermitian(evidence: Evidence) -> Outcome | None:
    """Is H(phi) Hermitian at the phases sampled?"""
    motion = evidence.motion
    worst = int(motion.skew.argmax()) if motion.skew.size else 0
    value = float(motion.skew.max(initial=0.0)) / max(motion.scale, 1e-300)
    site = int(motion.site_of[motion.driven.rows[worst]])
    return graded(
        value,
        (SKEW, SKEW),
        "H is Hermitian, so particles are conserved.",
        f"H differs from its adjoint by {value:.1e} of its size, so particles are made or destroyed.",
        Place(site=evidence.geometry.at(site)),
    )
