"""Reading a text as a sexagesimal number: which place stands after which.

Only what measuring needs: the places that the scribe wrote. Values follow from them, since the notation is
one of relative place value.
"""

from __future__ import annotations

import re

from layout.errors import CallError

DAMAGE_MARKS = "[]⸢⸣#?!"
"""What an editor adds for damage and doubt; it took no space on the clay."""

BASE = 60

_DIGITS = "0123456789"
_NOTATION = frozenset(_DIGITS + ",:.; ")
_BETWEEN_PLACES = re.compile(r" *[,:.;] *| +")


def drop_damage_marks(text: str) -> str:
    """Return a text without the editor's marks of damage and doubt, and without spaces around it.

    Examples
    --------
    >>> drop_damage_marks("[2],1⸢3⸣#")
    '2,13'
    """
    return text.translate(dict.fromkeys(map(ord, DAMAGE_MARKS))).strip()


def read_places(text: str) -> tuple[int, ...] | None:
    """Read a text as the places of a sexagesimal number.

    A text is a number only if all its characters belong to the notation: digits; ``,`` ``:`` ``.`` or a space
    between places, ``;`` before the fraction; damage marks, which are ignored. So ``1.20`` is a number and
    ``a.na`` is not: the full stop alone decides nothing. Two separators with nothing between them enclose a
    blank place. Leading and trailing blank places are left out: they are the editor's, who notes an absolute
    value (``0;44``), and stand for nothing on the clay.

    Parameters
    ----------
    text
        As the editor wrote it.

    Returns
    -------
    tuple of int, or None
        Each place, 0 to 59, where 0 is a blank place; empty for a number of blank places only. None: the text
        is not a number.

    Raises
    ------
    CallError
        If all characters belong to the notation, but a place is above 59, or a second fraction begins.

    Examples
    --------
    >>> read_places("2,13,0,20")
    (2, 13, 0, 20)
    >>> read_places("0;0,[4]4")
    (44,)
    >>> read_places("a.na") is None
    True
    """
    bare = drop_damage_marks(text)
    if not _NOTATION.issuperset(bare) or not any(digit in bare for digit in _DIGITS):
        return None
    if bare.count(";") > 1:
        message = f"needs one ';' at most, before the fraction, has {bare.count(';')} in {text!r}"
        raise CallError(message)
    places = [_read_place(place, text) for place in _BETWEEN_PLACES.split(bare)]
    written = [index for index, place in enumerate(places) if place]
    return tuple(places[written[0] : written[-1] + 1]) if written else ()


def _read_place(place: str, text: str) -> int:
    """Return one place as a number."""
    digits = place.lstrip("0")
    if len(digits) > 2 or int(digits or 0) >= BASE:
        message = f"needs places from 0 to 59, joined by ',', has {place[:20]!r} in {text[:60]!r}"
        raise CallError(message)
    return int(digits or 0)
