"""A report on one device: what it is, the verdict with its margins, all findings, pictures, how to get it again.

The text is made here; `figures.report` puts it and the pictures on pages.
"""

from __future__ import annotations

import platform
from collections.abc import Callable
from dataclasses import dataclass
from hashlib import sha256
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import TYPE_CHECKING, Any

from scatterpump.anatomy.layout import Layout, inspect
from scatterpump.audit.finding import AuditReport, Finding
from scatterpump.builder.description import Disorder
from scatterpump.errors import InputError
from scatterpump.pump import Pump
from scatterpump.verdict import Verdict, judge

if TYPE_CHECKING:
    from scatterpump.figures.catalogue import Collection

__all__ = ["Report", "Source", "make_report"]

PACKAGES = ("scatterpump", "kwant", "numpy", "scipy", "matplotlib")
VERDICT_SHARE = 0.6  # of the work on a usual device
LIMITS = (
    "Single-particle theory at zero temperature in the adiabatic limit: no interactions, no decoherence.",
    "The report guides measurement; it replaces neither measurement nor the laboratory's own safety rules.",
)


@dataclass(frozen=True)
class Source:
    """Where a pump comes from.

    Attributes
    ----------
    command : str
        What makes the report again.
    files : tuple of path
        All files it was read from, the device file first.
    randomness : str
        The seed, or that nothing is random, in words.
    """

    command: str
    files: tuple[Path, ...] = ()
    randomness: str = "not known: a program built the pump"


@dataclass(frozen=True, eq=False)
class Report:
    """Everything a report shows.

    Attributes
    ----------
    layout : Layout
    verdict : Verdict
    pictures : Collection
        Those that are finished, and why others are not.
    source : Source
    """

    layout: Layout
    verdict: Verdict
    pictures: Collection
    source: Source

    def text(self) -> list[str]:
        """Return the lines of the first page: verdict, findings, how to get it again."""
        return [
            *self.verdict.summary().splitlines(),
            "",
            *findings_table(self.verdict.audit),
            "",
            *_origin(self.source),
            *(f"no picture of {name}: {reason}" for name, reason in self.pictures.missing),
            "",
            *LIMITS,
        ]

    def listing(self) -> list[str]:
        """Return the device file, line by line; empty for a pump built in Python."""
        if not self.source.files:
            return []
        file = self.source.files[0]
        return [f"{file.name}:", "", *file.read_text(encoding="utf-8").splitlines()]

    def write(self, path: str | Path) -> None:
        """Write the report as a PDF file of one to three pages.

        Raises
        ------
        InputError
            If the file does not end in .pdf or cannot be written.
        """
        from scatterpump.figures.report import write_pages

        write_pages(self, require_pdf(path))


def make_report(pump: Pump, *, source: Source | None = None, progress: Callable[[float], None] | None = None) -> Report:
    """Judge `pump` and draw it; an interrupt from the keyboard while it is drawn leaves the pictures finished.

    Parameters
    ----------
    pump : Pump
    source : Source, optional
        By default it says that the pump was built in Python.
    progress : callable, optional
        Called with the share of the work done, 0 to 1.

    Raises
    ------
    ClosedProbeError, InputError, SolverError
        As `judge`.
    """
    from scatterpump.figures.catalogue import PICTURES, collect
    from scatterpump.portrait.album import Album

    told = progress or (lambda share: None)
    verdict = judge(pump, progress=lambda share: told(VERDICT_SHARE * share))
    album = Album(pump, verdict.winding, verdict.gap)
    pictures = collect(
        album, PICTURES.values(), progress=lambda share: told(VERDICT_SHARE + (1 - VERDICT_SHARE) * share)
    )
    built = Source("scatterpump.make_report(pump).write(...), for a pump built in Python")
    return Report(inspect(pump), verdict, pictures, source or built)


def require_pdf(path: str | Path) -> Path:
    """Return `path` if it ends in .pdf, and raise an `InputError` if not: before any long work."""
    target = Path(path)
    if target.suffix.lower() != ".pdf":
        raise InputError(f"the ending {target.suffix!r} is no format of a report", allowed=".pdf", where=str(path))
    return target


def findings_table(report: AuditReport) -> list[str]:
    """Return a line for each check: what came out, what it is held against, and how sure that is."""
    heads = f"{'':8}{'check':28}{'value':>10}  {'limit':>10}  {'unit':12}{'basis':9}where"
    return [heads, *(_line(finding) for finding in report.findings), *(f"not made: {name}" for name in report.unseen)]


def _line(finding: Finding) -> str:
    numbers = f"{finding.value:>10.4g}  {finding.limit:>10.4g}"
    return (
        f"{finding.status:8}{finding.check:28.28}{numbers}  {finding.unit:12.12}{finding.basis:9}{finding.where}"
    ).rstrip()


def _origin(source: Source) -> list[str]:
    lines = [f"to get it again   {source.command}", f"randomness        {source.randomness}"]
    lines += [f"versions          {', '.join(_version(name) for name in PACKAGES)}"]
    lines += [f"                  Python {platform.python_version()} on {platform.system()} {platform.machine()}"]
    return lines + [f"{file.name:17.17} sha256 {sha256(file.read_bytes()).hexdigest()}" for file in source.files]


def _version(package: str) -> str:
    try:
        return f"{package} {version(package)}"
    except PackageNotFoundError:  # pragma: no cover - a package run from its folder
        return f"{package} of unknown version"


def source_of(device: Path, description: Any, changes: tuple[str, ...], target: str) -> Source:
    """Return where the pump of a device file comes from."""
    from shlex import join

    sets = [part for change in changes for part in ("--set", change)]
    files = [device]
    if getattr(description, "file", None):  # code that the device file runs
        files.append(Path(description.file))
    command = join(["scatterpump", "report", device.name, *sets, "-o", Path(target).name])
    return Source(command, tuple(files), _randomness(description))


def _randomness(description: Any) -> str:
    disorder = getattr(description, "disorder", None)
    if disorder is None:  # the device is built by a program of its own
        return Source.randomness
    if isinstance(disorder, Disorder):
        seed, is_random = disorder.seed, bool(disorder.onsite or disorder.bonds)
    else:  # a channel's or a superlattice's: a width, and the seed beside it
        seed, is_random = description.seed, disorder > 0
    return f"seed {seed} of the disorder" if is_random else "nothing is random"
