"""Sexagesimal numbers in relative place value, and the tables that scribes made of them."""

from __future__ import annotations

from dataclasses import dataclass

BASE = 60


@dataclass(frozen=True)
class Column:
    """A column of a table: what it holds, and its entries line by line."""

    heading: str
    entries: tuple[str, ...]


def written(number: int) -> str:
    """Write a whole number without its trailing empty places.

    Examples
    --------
    >>> written(8000)
    '2,13,20'
    """
    while number % BASE == 0:
        number //= BASE
    places: list[int] = []
    while number:
        number, place = divmod(number, BASE)
        places.append(place)
    return ",".join(str(place) for place in reversed(places))


def reciprocal(number: int, power: int = 1) -> str:
    """Write the reciprocal of a regular number, or a power of it.

    Examples
    --------
    >>> reciprocal(27)
    '2,13,20'
    """
    divisor = number**power
    whole = 1
    while whole % divisor:
        whole *= BASE
    return written(whole // divisor)


def column(heading: str, numbers: list[int]) -> Column:
    """Return a column of whole numbers."""
    return Column(heading, tuple(written(number) for number in numbers))


def reciprocals(heading: str, numbers: list[int], power: int = 1) -> Column:
    """Return a column of reciprocals."""
    return Column(heading, tuple(reciprocal(number, power) for number in numbers))


def digits(text: str) -> list[int]:
    """Return the places of an entry.

    Examples
    --------
    >>> digits("2,13,20")
    [2, 13, 20]
    """
    return [int(place) for place in text.split(",")]
