"""The same edge seen on two faces has one length, or a warning says that it has not."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import layout
from layout.record.model import Record

PLATE = Path(__file__).parent.parent / "sample_images" / "umbarrat-212.fragment.json"


def warned(record: dict[str, Any]) -> list[str]:
    """Return the warnings about faces that disagree."""
    results = layout.measure(Record.model_validate(record), draws=1000)
    return [one.text for one in results.warnings if one.code == "faces.disagree"]


def test_two_faces_of_one_fragment_agree() -> None:
    assert warned(json.loads(PLATE.read_text(encoding="utf-8"))) == []


def test_a_face_that_was_resized_before_the_plate_was_put_together_is_noticed() -> None:
    record = json.loads(PLATE.read_text(encoding="utf-8"))
    reverse = next(view for view in record["views"] if view["face"] == "reverse")
    for mark in reverse["scale"]["marks"]:
        # the bar was left at its old size, 10 % too small for the face beside it
        mark["mm"] *= 1.1
    found = warned(record)
    assert len(found) == 1
    assert all(word in found[0] for word in ("height", "obverse", "reverse"))
