"""What a laboratory asks about one device, on one sheet: the limits first, each with how it was obtained."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterable
from dataclasses import asdict, dataclass
from math import isfinite
from textwrap import wrap
from typing import Any

from scatterpump.errors import InputError
from scatterpump.measure import OWN, Measure
from scatterpump.operation.bench import Bench
from scatterpump.operation.lines import LIMITS, OUTPUT, Line
from scatterpump.operation.plateaus import Plateau, require_range
from scatterpump.operation.tolerance import SAMPLES
from scatterpump.plain import plain
from scatterpump.verdict import Verdict, judge
from scatterpump.version import version

__all__ = ["CAUTIONS", "Sheet", "operating_sheet"]

ERROR = 1e-6
WIDTH, LABEL, HOW = 98, 18, 11
CAUTIONS = (
    "Single-particle theory: no interaction, no charging energy, no phonons, no decoherence.",
    "Every limit is for one thing changed at a time, and for one species: levels that spin or valley leave together "
    "carry one charge each.",
    "Figures guide measurement and do not replace it, nor the laboratory's own safety rules.",
)


@dataclass(frozen=True)
class Sheet:
    """The answers for one device.

    Attributes
    ----------
    limits, output : tuple of Line
        How far the device can be changed or driven, and what it delivers.
    plateaus : tuple of Plateau
        Windows of Fermi levels near the device's own, or in the range asked for.
    verdict : Verdict
    measure : Measure
        The units in which the sheet is written.
    cautions : tuple of str
        What no figure on it takes into account.
    """

    limits: tuple[Line, ...]
    output: tuple[Line, ...]
    plateaus: tuple[Plateau, ...]
    verdict: Verdict
    measure: Measure
    cautions: tuple[str, ...] = CAUTIONS

    @property
    def trustworthy(self) -> bool:
        """True if there is a proven integer and no alarm."""
        return self.verdict.trustworthy

    def to_dict(self) -> dict[str, Any]:
        """Return plain data: numbers, text, lists and dictionaries; an infinite number is None."""
        found = {
            "scatterpump": version(),
            "trustworthy": self.trustworthy,
            "name": self.verdict.name,
            "fermi_level": self.verdict.fermi_level,
            "unit_of_energy": self.measure.scale,
            "units": None if self.measure.units is None else asdict(self.measure.units),
            "limits": [asdict(line) for line in self.limits],
            "output": [asdict(line) for line in self.output],
            "plateaus": [asdict(plateau) for plateau in self.plateaus],
            "cautions": self.cautions,
            "verdict": self.verdict.to_dict(),
        }
        return dict(plain(found))

    def to_json(self) -> str:
        """Return `to_dict` as JSON text."""
        return json.dumps(self.to_dict(), indent=2, allow_nan=False)

    def summary(self) -> str:
        """Return the sheet as a table, alarms and limits first."""
        level = self.measure.energy(self.verdict.fermi_level)
        lines = [f"{self.verdict.name}, Fermi level {level}   (scatterpump {version()})"]
        lines += [""] if self.measure.units else [f"energies in {OWN}, lengths in sites", ""]
        for finding in self.verdict.audit.alarms:
            lines += _row("ALARM", "", f"{finding.check}: {finding.message} {finding.remedy}")
        if not self.limits:
            lines += _row("limits", "", f"none to tell: {self._why_no_limits()}")
        for line in (*self.limits, *self.output):
            lines += _row(line.label, line.how, line.text)
        for number, plateau in enumerate(self.plateaus):
            how = plateau.how if plateau.exact else "estimated"
            lines += _row("" if number else "plateaus", how, self._plateau(plateau))
        for number, caution in enumerate(self.cautions):
            lines += _row("" if number else "not modelled", "", caution)
        return "\n".join(lines)

    def _why_no_limits(self) -> str:
        gap = self.verdict.gap
        if self.verdict.is_void:
            return "with what the alarm names none means anything"
        return self.verdict.interior if gap is None else "the interior is not gapped at this Fermi level"

    def _plateau(self, plateau: Plateau) -> str:
        carried = "not resolved" if plateau.number is None else f"{plateau.number:+d}" if plateau.number else "0"
        here = plateau.lower < self.verdict.fermi_level < plateau.upper
        own = ", the level's own" if here else ""
        return f"{self.measure.energies(plateau.lower, plateau.upper)}: {carried}{own}"


def operating_sheet(
    device: Any,
    *,
    error: float = ERROR,
    between: tuple[float, float] | None = None,
    samples: int = SAMPLES,
    hertz: float | None = None,
    compute: bool = False,
    progress: Callable[[float], None] | None = None,
) -> Sheet:
    """Answer what a laboratory asks about a device.

    Parameters
    ----------
    device : object
        A description such as `GatedChannel`: anything with a method ``pump()``.
    error : float
        Allowed deviation from the integer, between 0 and 1/2.
    between : (low, high), optional
        Range of Fermi levels for the plateaus; by default the one at the Fermi level and its neighbours.
    samples : int
        Samples of disorder to try.
    hertz : float, optional
        Cycles a second; then the sheet tells the current.
    compute : bool
        Compute the limits of temperature and speed, and the current at its frequency, rather than estimate them from
        the gap and the charge at rest: some minutes for a long device.
    progress : callable, optional
        Called with the share of the work that is done, 0 to 1.

    Raises
    ------
    ClosedProbeError
        If the probe has no open mode at the Fermi level.
    InputError
        If an argument is out of range, or a lead depends on the cycle.
    SolverError
        If the Hamiltonian or its solution fails at some phase.
    """
    if not 0 < error < 0.5:
        raise InputError(f"error is {error}", allowed="a number between 0 and 1/2")
    if hertz is not None and not (isfinite(hertz) and hertz > 0):
        raise InputError(f"hertz is {hertz}", allowed="a positive number of cycles a second")
    require_range(between)
    from threadpoolctl import threadpool_limits

    tell = progress or (lambda share: None)
    with threadpool_limits(1):  # many small problems: threads would only get in each other's way
        pump = device.pump()
        bench = Bench(device, pump, judge(pump), error, samples, between, hertz, compute)
        parts: list[list[Line]] = []
        count = len(LIMITS) + len(OUTPUT) + 2
        for done, ask in enumerate((*LIMITS, *OUTPUT), 1):
            tell(done / count)
            parts.append(_lines(ask(bench)))
        tell((count - 1) / count)
        found = bench.plateaus
    limits, output = parts[: len(LIMITS)], parts[len(LIMITS) :]
    return Sheet(_joined(limits), _joined(output), found, bench.verdict, bench.measure)


def _lines(answer: Line | tuple[Line, ...] | None) -> list[Line]:
    if answer is None:
        return []
    return [answer] if isinstance(answer, Line) else list(answer)


def _joined(parts: Iterable[list[Line]]) -> tuple[Line, ...]:
    return tuple(line for part in parts for line in part)


def _row(label: str, how: str, text: str) -> list[str]:
    first, *rest = wrap(text, WIDTH - LABEL - HOW) or [""]
    indent = " " * (LABEL + HOW)
    return [f"{label:<{LABEL}}{how:<{HOW}}{first}", *(indent + line for line in rest)]
