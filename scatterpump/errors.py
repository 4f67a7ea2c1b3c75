"""What can go wrong, as types that carry their data.

Every message answers four questions in one line: what is wrong, where, what is allowed, and what to do.
"""

from __future__ import annotations

from pathlib import Path
from traceback import extract_tb

__all__ = [
    "ClosedGapError",
    "ClosedProbeError",
    "CycleError",
    "InputError",
    "NoBulkError",
    "PumpError",
    "SingularReflectionError",
    "SolverError",
    "SweepError",
    "told",
]

LONGEST_SHOWN = 40


def told(error: BaseException) -> str:
    """Return what went wrong in the first place, in one line, and where if that is in a file of the user's."""
    while error.__cause__ is not None:
        error = error.__cause__
    text = " ".join(f"{type(error).__name__}: {error}".split()).rstrip(": ")
    own = [frame for frame in extract_tb(error.__traceback__) if _is_user_code(frame.filename)]
    return f"{text} (in {own[-1].name}, line {own[-1].lineno} of {Path(own[-1].filename).name})" if own else text


def _is_user_code(filename: str) -> bool:
    path = Path(filename)
    return not (
        "site-packages" in path.parts
        or filename.startswith("<frozen")
        or path.suffix == ".pyx"
        or path.is_relative_to(Path(__file__).parent)
    )


def _shown(value: object) -> str:
    text = " ".join(str(value).split())
    return text if len(text) <= LONGEST_SHOWN else text[:LONGEST_SHOWN] + "..."


class PumpError(Exception):
    """Base of every error that scatterpump raises on purpose."""


class InputError(PumpError, ValueError):
    """A description, file or argument that cannot be used.

    Attributes
    ----------
    problem : str
        What is wrong, with the offending value.
    allowed : str
        What would be accepted.
    where : str
        File and key, dotted, or empty when the value came from Python.
    """

    def __init__(self, problem: str, *, allowed: str = "", where: str = "") -> None:
        self.problem, self.allowed, self.where = problem, allowed, where
        text = f"{where}: {problem}" if where else problem
        super().__init__(" ".join((f"{text}; allowed: {allowed}" if allowed else text).split()))


class NoBulkError(InputError):
    """A pump whose interior does not repeat, so that it has no bands, gap or Chern number."""


class ClosedGapError(PumpError):
    """A band of the interior meets the Fermi level somewhere on the (k, phi) torus."""

    def __init__(self, fermi_level: float, finding: str) -> None:
        self.fermi_level, self.finding = fermi_level, finding
        super().__init__(
            f"the bulk gap closes at the Fermi level {fermi_level:g}: {finding}; "
            "allowed: a Fermi level that stays inside one gap for all k and phi"
        )


class ClosedProbeError(PumpError):
    """The probe lead has no open mode at the Fermi level, so r is empty and its winding means nothing."""

    def __init__(self, fermi_level: float, lead: int, role: str = "probe") -> None:
        self.fermi_level, self.lead, self.role = fermi_level, lead, role
        super().__init__(
            f"the {role} (lead {lead}) has no open mode at the Fermi level {fermi_level:g}; "
            "allowed: an energy inside the lead's band; raise the lead's hopping or shift its on-site level"
        )


class SingularReflectionError(PumpError):
    """r(phi) is not invertible somewhere on the cycle, so its winding is undefined.

    Attributes
    ----------
    phase : float
        Where the smallest singular value of r was met, in radians.
    smallest : float
        That singular value.
    """

    def __init__(self, phase: float, smallest: float) -> None:
        self.phase, self.smallest = phase, smallest
        super().__init__(
            f"r is singular at phi = {phase:.6g} (smallest singular value {smallest:.1e}); "
            "a winding needs r invertible all along the cycle; make the device longer or open its gap"
        )


class SolverError(PumpError):
    """The scattering problem could not be solved at some phase.

    Attributes
    ----------
    phase : float
        Where, in radians.
    parameters : dict
        The pump's parameters there.
    what : str
        What failed.
    """

    def __init__(
        self,
        phase: float,
        parameters: dict[str, object],
        cause: BaseException,
        what: str = "the Hamiltonian or its solution",
    ) -> None:
        self.phase, self.parameters, self.what = phase, parameters, what
        values = ", ".join(f"{name}={_shown(value)}" for name, value in parameters.items())
        super().__init__(f"{what} failed at phi = {phase:.6g} ({values}): {told(cause)}")


class CycleError(PumpError):
    """The cycle's function gave no parameters at some phase.

    Attributes
    ----------
    phase : float
        Where, in radians.
    """

    def __init__(self, phase: float, cause: BaseException) -> None:
        self.phase = phase
        super().__init__(
            f"the cycle's function failed at phi = {phase:.6g}: {told(cause)}; "
            "allowed: a function of phi in radians that returns the parameters as a mapping"
        )


class SweepError(PumpError):
    """A sweep cannot go on: its results cannot be written, or its workers die.  What is finished is safe."""
