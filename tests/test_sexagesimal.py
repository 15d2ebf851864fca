"""Texts as places of a sexagesimal number."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from layout.errors import CallError
from layout.sexagesimal import read_places


@pytest.mark.parametrize(
    ("text", "places"),
    [
        ("2,13,20", (2, 13, 20)),
        ("2:13:20", (2, 13, 20)),
        ("2 13 20", (2, 13, 20)),
        ("2,13,0,20", (2, 13, 0, 20)),
        ("0;0,44", (44,)),
        ("44,0", (44,)),
        ("[2],1⸢3⸣#,20?", (2, 13, 20)),
        ("0", ()),
    ],
)
def test_a_number_is_read_in_every_notation(text: str, places: tuple[int, ...]) -> None:
    assert read_places(text) == places


@pytest.mark.parametrize("text", ["a-na", "{d}utu", "", "3(gur)", "x,15"])
def test_other_texts_are_no_numbers(text: str) -> None:
    assert read_places(text) is None


def test_a_place_above_59_is_refused() -> None:
    with pytest.raises(CallError, match="places from 0 to 59"):
        read_places("1,60")


@given(st.lists(st.integers(0, 59), min_size=1, max_size=30))
def test_blank_places_at_either_end_do_not_count(places: list[int]) -> None:
    text = ",".join(map(str, places))
    assert read_places(f"0,{text},0") == read_places(text)
