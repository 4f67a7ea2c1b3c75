"""A device that a Python function builds: anybody's kwant geometry behind the same command.

The function is called with ``arguments`` by name and returns a `Pump`, or a kwant system with its leads attached.
Such a file is code and runs as code: with all the rights of whoever asks for the verdict.
"""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any, ClassVar

from scatterpump.cycle import Cycle
from scatterpump.errors import InputError, PumpError, told
from scatterpump.pump import Pump

__all__ = ["PythonFile"]

MODULE = "scatterpump_device_"  # before the name of a file, so that no module of that name is replaced


@dataclass(frozen=True, kw_only=True)
class PythonFile:
    """A function in a Python file that returns a pump or a kwant system.

    What is None here is taken from the pump that the function returns; if it returns a kwant system, the cycle is phi
    itself, the probe the first lead and the drain the next one, and the Fermi level has to be given.

    Parameters
    ----------
    file : str
        Path of the Python file; in a device file, from that file's folder.
    function : str
        Name of the function in it.
    arguments : mapping
        What it is called with, by name.
    fermi_level : float or None
        Energy of the electrons sent in.
    probe, drain : int, str or None
        Leads, by number in the order they were attached, or by name.
    lead_names : sequence of str
        Names of the leads in that order.
    cycle : Cycle or None
        What the pump is driven round.
    name : str
        What to call the device in a report; the function's name if empty.

    Raises
    ------
    InputError
        From `pump`, if the file cannot be run, the function fails, or what it returns is no pump.
    """

    file: str
    function: str
    arguments: Mapping[str, Any] = field(default_factory=dict)
    fermi_level: float | None = None
    probe: int | str | None = None
    drain: int | str | None = None
    lead_names: Sequence[str] = ()
    cycle: Cycle | None = None
    name: str = ""

    __pydantic_config__: ClassVar[Any] = {"extra": "forbid"}

    def located(self, folder: Path) -> PythonFile:
        """Return the same with its path taken from `folder`."""
        return replace(self, file=str(folder / self.file))

    def pump(self) -> Pump:
        """Run the function and return its pump."""
        made = self._called()
        return self._completed(made if isinstance(made, Pump) else self._adopted(made))

    @property
    def _where(self) -> str:
        return f"{self.file}: {self.function}"

    def _called(self) -> Any:
        """What the function returns."""
        shown = ", ".join(f"{name}={value!r}" for name, value in self.arguments.items())
        with _importing_from(Path(self.file).parent):
            function = self._function()
            try:
                return function(**self.arguments)
            except PumpError as error:
                raise InputError(f"{self.function}({shown}) failed: {error}", where=self.file) from error
            except (Exception, SystemExit) as cause:  # it may raise anything
                raise InputError(
                    f"{self.function}({shown}) failed: {told(cause)}",
                    allowed="a function that returns a Pump or a kwant system",
                    where=self.file,
                ) from cause

    def _function(self) -> Callable[..., Any]:
        module = _run(Path(self.file))
        function = getattr(module, self.function, None)
        if not callable(function):
            known = [name for name, value in vars(module).items() if _defined_in(module, value)]
            raise InputError(
                f"there is no function {self.function!r}",
                allowed=", ".join(known) or "one that the file defines",
                where=self.file,
            )
        return function  # type: ignore[no-any-return]  # callable() narrows Any to a callable that returns Any

    def _adopted(self, system: Any) -> Pump:
        """The pump of a kwant system, with the usual parts where the description says nothing."""
        if self.fermi_level is None:
            raise InputError("the Fermi level is missing", allowed="fermi_level = an energy", where=self._where)
        probe = 0 if self.probe is None else self._number(self.probe)
        leads = len(getattr(system, "leads", ()))
        drain = (0 if probe else 1) if self.drain is None else self._number(self.drain)
        with _told_of(self._where):
            return Pump(
                system, self.cycle or Cycle.angle(), self.fermi_level, probe=probe, drain=drain if leads != 1 else None
            )

    def _completed(self, pump: Pump) -> Pump:
        """The pump with what the description says about it."""
        names = self.lead_names or pump.lead_names
        said = {
            "fermi_level": self.fermi_level,
            "cycle": self.cycle,
            "probe": self._number(self.probe, names),
            "drain": self._number(self.drain, names),
            "name": self.name or (self.function if pump.name == "pump" else None),
        }
        with _told_of(self._where):
            return replace(pump, lead_names=names, **{name: value for name, value in said.items() if value is not None})

    def _number(self, lead: int | str | None, names: Sequence[str] | None = None) -> Any:
        names = self.lead_names if names is None else names
        if not isinstance(lead, str):
            return lead
        if lead not in names:
            raise InputError(
                f"no lead is named {lead!r}",
                allowed=", ".join(map(repr, names)) or "a number, or a name that lead_names lists",
                where=self._where,
            )
        return list(names).index(lead)


def _defined_in(module: Any, value: Any) -> bool:
    return callable(value) and getattr(value, "__module__", None) == module.__name__


def _run(file: Path) -> Any:
    """Run a Python file as a module of its own, always from its source, and return it."""
    from importlib.machinery import SourceFileLoader
    from importlib.util import module_from_spec, spec_from_loader

    name = MODULE + file.stem
    loader = SourceFileLoader(name, str(file))
    try:
        source = loader.get_data(str(file))
    except (OSError, ValueError) as error:
        raise InputError(
            f"the file cannot be read: {getattr(error, 'strerror', None) or error}",
            allowed="a readable Python file, its path taken from the device file's folder",
            where=str(file),
        ) from error
    spec = spec_from_loader(name, loader)
    assert spec is not None  # only a loader without a module's name has none
    module = module_from_spec(spec)
    sys.modules[name] = module  # dataclasses and pickle look their module up there
    try:
        exec(
            loader.source_to_code(source, str(file)), vars(module)
        )  # a cached compilation could be older than the file
    except (Exception, SystemExit) as cause:  # it may raise anything
        raise InputError(
            f"running the file failed: {told(cause)}", allowed="Python that runs to its end", where=str(file)
        ) from cause
    return module


@contextmanager
def _importing_from(folder: Path) -> Iterator[None]:
    """Let a file import its neighbours."""
    place = str(folder.resolve())
    sys.path.insert(0, place)
    try:
        yield
    finally:
        if place in sys.path:
            sys.path.remove(place)


@contextmanager
def _told_of(where: str) -> Iterator[None]:
    """Say where an error of a pump belongs to."""
    try:
        yield
    except InputError as error:
        raise InputError(error.problem, allowed=error.allowed, where=error.where or where) from error
