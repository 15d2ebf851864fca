"""Entries as signs."""

from __future__ import annotations

from fractions import Fraction
from math import gcd

import pytest

from layout.errors import CallError
from layout.signs import SignCounts, count_signs


def test_digits_are_told_by_tens_and_units() -> None:
    assert count_signs("2,13,0,20") == SignCounts(full=1, units_only=1, tens_only=1, blank=1)


@pytest.mark.parametrize(
    ("text", "signs"),
    [
        ("a-na", 2),
        ("{d}utu", 2),
        ("[a]-na#", 2),
        ("a-<na>", 1),
        ("a-<<na>>", 2),
        ("lugal kur.kur", 3),
    ],
)
def test_marks_of_the_editor_do_not_change_what_stood_on_the_clay(text: str, signs: int) -> None:
    assert count_signs(text).signs == signs


def test_a_text_of_unknown_length_has_no_count() -> None:
    with pytest.raises(CallError, match="every sign is known"):
        count_signs("a-na …")
    with pytest.raises(CallError, match="every sign is known"):
        count_signs("x,15")


def places_of(value: Fraction) -> str:
    """Return a finite sexagesimal number in relative place value."""
    while value.denominator > 1:
        value *= 60
    number, places = value.numerator, []
    while number:
        number, place = divmod(number, 60)
        places.append(place)
    return ",".join(map(str, places[::-1]))


def is_regular(number: int) -> bool:
    """Whether a number divides a power of 60."""
    return pow(60, number.bit_length(), number) == 0


def test_plain_counts_of_the_38_pairs() -> None:
    # common practice, no source: 38 pairs of coprime regular s < 60 and 1 < r/s < 1 + sqrt 2, and the widest
    # entries by the convention that a digit without tens counts half
    pairs = [
        (r, s)
        for s in range(1, 60)
        for r in range(s + 1, 3 * s)
        if gcd(r, s) == 1 and is_regular(r) and is_regular(s) and (r - s) ** 2 < 2 * s * s
    ]
    assert len(pairs) == 38
    columns = {
        "s": [Fraction(s) for _, s in pairs],
        "r": [Fraction(r) for r, _ in pairs],
        "r/s": [Fraction(r, s) for r, s in pairs],
        "s/r": [Fraction(s, r) for r, s in pairs],
        "difference": [(Fraction(r, s) - Fraction(s, r)) / 2 for r, s in pairs],
        "sum": [(Fraction(r, s) + Fraction(s, r)) / 2 for r, s in pairs],
    }
    widest = {name: max(count_signs(places_of(v)).plain for v in values) for name, values in columns.items()}
    assert widest == {"s": 1.0, "r": 1.5, "r/s": 3.5, "s/r": 4.0, "difference": 4.0, "sum": 4.5}
