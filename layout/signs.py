"""Entries as signs: how many of each kind a text has."""

from __future__ import annotations

import re
from functools import lru_cache
from typing import NamedTuple

import numpy as np

from layout.errors import CallError
from layout.sexagesimal import drop_damage_marks, read_places

PLAIN_COUNTS = np.array([1.0, 0.5, 1.0, 0.5, 1 / 1.5])
"""The convention: a digit without tens is half, any other one; a full digit is about 1.5 mean signs (common
practice, no source)."""


class SignCounts(NamedTuple):
    """How many signs of each kind an entry has; the order is that of every array of ratios."""

    full: int = 0
    units_only: int = 0
    tens_only: int = 0
    blank: int = 0
    signs: int = 0

    @property
    def plain(self) -> float:
        """The plain count: a digit without tens is half, any other one.

        Examples
        --------
        >>> count_signs("2,13,20").plain
        2.5
        """
        return float(np.dot(self, PLAIN_COUNTS))


@lru_cache(maxsize=4096)  # the same entries come again with every measurement and candidate
def count_signs(text: str) -> SignCounts:
    """Count the signs of an entry by kind.

    A number's digits are full, units-only, tens-only or blank; blank places count only between others. In a
    transliteration every sign counts, determinatives included; ``< >`` was never written, ``<< >>`` was.

    Parameters
    ----------
    text
        As in the record.

    Returns
    -------
    SignCounts
        All zero for an empty text.

    Raises
    ------
    CallError
        If the number of signs cannot be known: ``…``, a place read as ``x``, a place above 59.

    Examples
    --------
    >>> count_signs("2,13,0,20")
    SignCounts(full=1, units_only=1, tens_only=1, blank=1, signs=0)
    >>> count_signs("{d}a-nu um")
    SignCounts(full=0, units_only=0, tens_only=0, blank=0, signs=4)
    >>> count_signs("")
    SignCounts(full=0, units_only=0, tens_only=0, blank=0, signs=0)
    """
    places = read_places(text)
    if places is not None:
        kinds = [_kind_of(place) for place in places]
        return SignCounts(*(kinds.count(kind) for kind in range(len(SignCounts._fields))))
    if "…" in text or "..." in text or _has_unread_place(text):
        message = f"needs a text of which every sign is known, has {text[:60]!r}"
        raise CallError(message)
    return SignCounts(signs=_count_transliterated(text))


def _kind_of(place: int) -> int:
    """Return a place's index in ``SignCounts``."""
    tens, units = divmod(place, 10)
    return {(True, True): 0, (False, True): 1, (True, False): 2, (False, False): 3}[bool(tens), bool(units)]


def _has_unread_place(text: str) -> bool:
    """Tell whether a text is a number but for places read as x: of what width, nobody knows."""
    return any(digit in text for digit in "0123456789") and read_places(text.replace("x", "1")) is not None


def _count_transliterated(text: str) -> int:
    """Return the number of signs that stood on the clay."""
    written = re.sub(r"<[^<>]*>", "", re.sub(r"<<|>>", "", text))
    signs = re.split(r"[-.\s{}]+", drop_damage_marks(written))
    return sum(1 for sign in signs if sign)
