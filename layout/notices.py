"""Every assumption, warning and missing result: its code and its sentence, in one registry.

What is assumed is never silent: a step that uses a value which nobody gave returns a ``Notice``, and the
results and the sheet print it. Templates take their numbers by name.
"""

from __future__ import annotations

from dataclasses import dataclass

ASSUMPTIONS: dict[str, str] = {}

WARNINGS: dict[str, str] = {}


@dataclass(frozen=True)
class Assumption:
    """A value that the user did not give but that matters: code, the field it is about, and a sentence."""

    code: str
    about: str
    text: str


@dataclass(frozen=True)
class Caveat:
    """A caveat on a result: code and sentence."""

    code: str
    text: str


@dataclass(frozen=True)
class Missing:
    """A result that cannot be given, and why: the result's name in the results file, and a sentence."""

    result: str
    text: str


Notice = Assumption | Caveat | Missing


def assume(code: str, about: str, **values: object) -> Assumption:
    """Return the assumption registered under ``code``; a KeyError is a fault of this program."""
    return Assumption(code, about, ASSUMPTIONS[code].format(**values))


def warn(code: str, **values: object) -> Caveat:
    """Return the warning registered under ``code``; a KeyError is a fault of this program."""
    return Caveat(code, WARNINGS[code].format(**values))
