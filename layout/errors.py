"""One tree of exceptions; every message says where the fault is and how to mend it.

::

    LayoutError
    ├── RecordError        the record cannot be used: one or more faults, each with its place
    ├── PhotographError    the photograph cannot be used
    └── CallError          the call asks for what cannot be done
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path


class LayoutError(Exception):
    """Base of all errors that this package raises on purpose.

    Parameters
    ----------
    message
        What is wrong and what to do, without the file's name.
    file
        The file at fault, if there is one.
    """

    def __init__(self, message: str, *, file: Path | None = None) -> None:
        super().__init__(message if file is None else f"{file}: {message}")
        self.message = message
        self.file = file

    def lines(self) -> list[str]:
        """Return the error as lines to print, one for each fault."""
        return [str(self)]


@dataclass(frozen=True)
class Fault:
    """One fault of a record: its place (``views[0].rulings[3].points``, or empty) and what is wrong."""

    place: str
    text: str

    def __str__(self) -> str:
        return f"{self.place}: {self.text}" if self.place else self.text


class RecordError(LayoutError):
    """The record is malformed; all its faults are listed."""

    def __init__(self, faults: list[Fault], *, file: Path | None = None) -> None:
        self.faults = tuple(faults)
        super().__init__("; ".join(str(fault) for fault in faults), file=file)

    def lines(self) -> list[str]:
        """Return one line for each fault, each naming the file."""
        prefix = "" if self.file is None else f"{self.file}: "
        return [f"{prefix}{fault}" for fault in self.faults]


class PhotographError(LayoutError):
    """The photograph is missing, unreadable, damaged, or too large."""


class CallError(LayoutError):
    """What was asked for cannot be done: a wrong argument or an impossible combination."""
