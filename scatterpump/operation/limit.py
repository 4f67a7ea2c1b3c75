"""How far one can go before the charge misses the integer by more than is allowed."""

from __future__ import annotations

from dataclasses import dataclass

from scatterpump.errors import InputError
from scatterpump.operation.slow import SlowCharge

__all__ = ["Limit", "found_limit", "require_error", "why_not"]

HALF = 0.5  # of a charge: nearer to another integer


@dataclass(frozen=True)
class Limit:
    """A limit of operation.

    Attributes
    ----------
    value : float or None
        Largest k_B T or hbar omega, as an energy in the pump's unit, up to which the charge is found within `allowed`
        of the integer; 0 where it is not even so when cold and slow; None without a proven integer, or where none was
        met.
    si : float or None
        The same in kelvin or hertz; None for a pump that does not say what its unit of energy is.
    unit : "K" or "Hz"
    allowed : float
        Largest deviation of the charge from the integer, in e.
    leakage : float or None
        The deviation when cold and slow.
    estimate : float or None
        A quick estimate of `value`, from the gap alone; None where there is none.
    evaluations : int
        Scattering problems solved, a ladder of sidebands counting as one.
    reason : str
        What sets the limit.
    """

    value: float | None
    si: float | None
    unit: str
    allowed: float
    leakage: float | None
    estimate: float | None
    evaluations: int
    reason: str


def why_not(slow: SlowCharge, allowed: float) -> str:
    """Say why there is no limit to look for; empty if there is one."""
    if slow.number is None:
        return "there is no proven integer"
    if abs(slow.found.leak) > allowed:
        return "the leak of the cold, slow pump: a longer device or a wider gap leaks less"
    return ""


def require_error(error: float) -> None:
    """Raise an `InputError` unless `error` can be allowed."""
    if not 0 < error < HALF:
        raise InputError(f"error is {error}", allowed="a number between 0 and 1/2")


def found_limit(
    value: float | None,
    si: float | None,
    unit: str,
    slow: SlowCharge,
    error: float,
    estimate: float | None,
    work: int,
    reason: str,
) -> Limit:
    """Put a limit together: `work` is what was solved beyond the slow charge; other arguments as in `Limit`."""
    leakage = None if slow.number is None else slow.found.leak
    return Limit(value, si, unit, error, leakage, estimate, slow.found.evaluations + work, reason)
