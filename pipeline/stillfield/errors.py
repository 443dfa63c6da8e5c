"""Faults a user can mend, each told as what, where, got, wanted and cure.

Every error stillfield raises on purpose derives from `StillfieldError`; the command line prints
its text without a traceback and leaves with its `exit_code`. Anything else is a defect of the
program and leaves with 1 and a traceback.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import ClassVar

EXIT_OK = 0
EXIT_DEFECT = 1
EXIT_BAD_INPUT = 2
EXIT_OUTPUT = 3
EXIT_INTERRUPTED = 130


class StillfieldError(Exception):
    """Base of every error that has a cure.

    Parameters
    ----------
    what : str
        The fault in one clause.
    where : str, optional
        File, key, variable, row or cell.
    got, wanted : object, optional
        The value found and what was expected in its place.
    cure : str, optional
        What to do about it, as a sentence.

    Examples
    --------
    >>> print(StillfieldError("no such variable", where="a.nc", got="sun", wanted="ghi", cure="Map it."))
    a.nc: no such variable (got sun; wanted ghi). Map it.
    """

    exit_code: ClassVar[int] = EXIT_BAD_INPUT

    def __init__(
        self,
        what: str,
        *,
        where: str | None = None,
        got: object = None,
        wanted: object = None,
        cure: str | None = None,
    ) -> None:
        self.what = what
        self.where = where
        self.got = got
        self.wanted = wanted
        self.cure = cure
        super().__init__(self._sentence())

    def _sentence(self) -> str:
        pairs = (("got", self.got), ("wanted", self.wanted))
        facts = [f"{label} {value}" for label, value in pairs if value is not None]
        text = f"{self.where}: {self.what}" if self.where else self.what
        if facts:
            text += f" ({'; '.join(facts)})"
        return f"{text}. {self.cure}" if self.cure else text


class WeatherError(StillfieldError):
    """A weather file that cannot be read, recognised or believed."""


class UnitsError(WeatherError):
    """A unit that is missing, unknown or of the wrong kind."""


class PlacesError(StillfieldError):
    """A village table that cannot be used as it is."""


class MethodError(StillfieldError):
    """A yield method that does not exist or lacks the weather it needs."""


class DecisionError(StillfieldError):
    """A need, reliability, size, cost or rank that cannot be worked out from what was given."""


class MemoryLimitError(StillfieldError):
    """A run that cannot be worked within the memory it is allowed."""


class OutputError(StillfieldError):
    """An output that could not be written whole."""

    exit_code = EXIT_OUTPUT


@dataclass(frozen=True)
class Fault:
    """One fault of a text file: its line (from 1), the key path and the sentence about it."""

    line: int | None
    key: str
    message: str

    def __str__(self) -> str:
        """One line of the fault list."""
        place = ", ".join(part for part in (f"line {self.line}" if self.line else "", self.key) if part)
        return f"{place}: {self.message}" if place else self.message


class RunFileError(StillfieldError):
    """All faults of a run file or still file at once.

    Examples
    --------
    >>> print(RunFileError("run.yaml", [Fault(4, "still.tilt_deg", "should be at most 80 (got 95)")]))
    run.yaml has 1 fault:
      line 4, still.tilt_deg: should be at most 80 (got 95)
    """

    def __init__(self, path: str, faults: Iterable[Fault]) -> None:
        self.path = path
        self.faults = tuple(faults)
        count = len(self.faults)
        lines = "".join(f"\n  {fault}" for fault in self.faults)
        super().__init__(f"{path} has {count} fault{'s' if count != 1 else ''}:{lines}")
