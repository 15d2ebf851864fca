"""What `check` finds sound, faulty and missing."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from PIL import Image

from layout.errors import CallError, PhotographError
from layout.image.photograph import sha256_of
from layout.record.begin import begin
from layout.record.check import Check, check
from layout.record.files import parse
from tests import zoo

OF_TABLET = {
    "reconstructed.width",
    "reconstructed.height",
    "reconstructed.lost_space",
    "capacity.sign_widths",
    "capacity.lines",
    "ranking",
}
OF_VIEW = {f"views[0].{name}" for name in ("scale", "preserved", "rulings", "columns", "line_pitch")}


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """Return a folder with the photograph of the small record."""
    Image.fromarray(np.zeros((800, 1000), np.uint8)).save(tmp_path / "q17.png")
    return tmp_path


def checked(values: dict[str, Any], folder: Path) -> Check:
    """Check a record as it would be read."""
    return check(parse(json.dumps(values)), folder)


def traced(folder: Path) -> dict[str, Any]:
    """Return the small record with the hash of its photograph."""
    values = zoo.small_record()
    values["photographs"][0]["sha256"] = sha256_of(folder / "q17.png")
    return values


def missing(values: dict[str, Any], folder: Path) -> dict[str, str]:
    """Return what is missing: result and sentence."""
    return {one.result: one.text for one in checked(values, folder).missing}


def test_a_whole_record_is_sound(folder: Path) -> None:
    found = checked(traced(folder), folder)
    assert (found.faults, found.missing, found.findings) == ((), (), 0)
    assert found.sound[0] == "photographs[0]: q17.png is the one traced, 1000 x 800 pixels"
    assert {line.split(": ")[0] for line in found.sound[1:]} == OF_VIEW | OF_TABLET


def test_the_smallest_record_lacks_every_result_once(tmp_path: Path) -> None:
    found = checked(zoo.smallest_record(), tmp_path)
    names = [one.result for one in found.missing]
    assert set(names) == OF_VIEW | OF_TABLET
    assert len(names) == len(set(names))
    assert all(one.text.startswith("needs ") for one in found.missing)
    assert found.findings == len(names) + 1  # and its photograph
    assert f"missing  {found.missing[0].result}: {found.missing[0].text}" in found.lines()


@pytest.mark.parametrize(
    ("scale", "has_one"),
    [
        ({}, False),
        ({"marks": [{"at": [1, 1], "mm": 0}]}, False),
        ({"marks": [{"bar": "a", "at": [1, 1], "mm": 0}, {"bar": "b", "at": [9, 1], "mm": 5}]}, False),
        ({"marks": [{"at": [1, 1], "mm": 0}, {"at": [9, 1], "mm": 5}]}, True),
        ({"ppi": 600}, True),
        ({"known": [{"from": [1, 1], "to": [9, 1], "mm": 5, "sd": 0.1}]}, True),
    ],
)
def test_millimetres_need_a_scale_and_the_capacity_does_not(
    folder: Path, scale: dict[str, Any], has_one: bool
) -> None:
    values = traced(folder)
    values["views"][0]["scale"] = scale
    lacks = missing(values, folder)
    in_mm = OF_VIEW | {"reconstructed.width", "reconstructed.height", "reconstructed.lost_space"}
    assert set(lacks) == (set() if has_one else in_mm)


def test_what_is_lost_must_be_said(folder: Path) -> None:
    values = traced(folder)
    del values["lost"]
    lacks = missing(values, folder)
    assert set(lacks) == {"reconstructed.lost_space", "capacity.sign_widths", "ranking"}
    assert lacks["ranking"] == "needs the side that is lost, in lost.sides"


def test_both_sides_lost_need_evidence_about_the_width(folder: Path) -> None:
    values = traced(folder)
    values["lost"]["sides"] = ["left", "right"]
    assert missing(values, folder) == {}
    values["evidence"][0]["about"] = "height"
    lacks = missing(values, folder)
    assert lacks["capacity.sign_widths"] == "needs evidence about the width, since both sides are lost"


def test_an_original_edge_of_one_side_gives_one_dimension(folder: Path) -> None:
    values = traced(folder)
    outline = values["views"][0]["outline"]
    values["views"][0]["outline"] = [outline[0], outline[2]]
    assert set(missing(values, folder)) == {
        "reconstructed.width",
        "reconstructed.lost_space",
        "capacity.sign_widths",
        "ranking",
    }
    values["views"][0]["outline"] = [outline[1]]
    assert set(missing(values, folder)) == {"reconstructed.height", "capacity.lines"}


def test_a_ruling_of_one_point_is_no_line(folder: Path) -> None:
    values = traced(folder)
    for ruling in values["views"][0]["rulings"]:
        if ruling["runs"] == "vertical":
            ruling["points"] = ruling["points"][:1]
    assert set(missing(values, folder)) == {
        "views[0].columns",
        "reconstructed.lost_space",
        "capacity.sign_widths",
        "ranking",
    }


def test_an_edge_needs_neither_columns_nor_lines(folder: Path) -> None:
    values = traced(folder)
    values["views"].append({"face": "left edge", "photograph": "obv"})
    assert set(missing(values, folder)) == {"views[1].scale", "views[1].preserved"}


def test_without_candidates_there_is_no_ranking(folder: Path) -> None:
    values = traced(folder)
    values["candidates"] = []
    assert missing(values, folder) == {}  # a pool proposes them too
    del values["pool"]
    assert missing(values, folder) == {"ranking": "needs candidates with columns, or a pool"}


def test_a_photograph_that_is_not_the_one_traced_is_named(folder: Path) -> None:
    values = traced(folder)
    with (folder / "q17.png").open("ab") as file:
        file.write(b"\0")
    [changed] = checked(values, folder).faults
    assert changed.place == "photographs[0].sha256"
    assert changed.text.startswith("q17.png has changed since it was traced: its SHA-256 is ")
    Image.fromarray(np.zeros((1000, 800), np.uint8)).save(folder / "q17.png")
    size, _ = checked(values, folder).faults
    assert str(size) == (
        "photographs[0].size: q17.png has 800 x 1000 pixels, not 1000 x 800; put back the one that was traced"
    )
    (folder / "q17.png").write_bytes(b"GIF89a")
    [fault] = checked(values, folder).faults
    assert str(fault).startswith("photographs[0].file: q17.png: is no JPEG, PNG or TIFF")
    (folder / "q17.png").unlink()
    [fault] = checked(values, folder).faults
    assert str(fault) == "photographs[0].file: q17.png: there is no such photograph; check the name"


def test_a_hash_that_was_not_recorded_is_offered(folder: Path) -> None:
    [fault] = checked(zoo.small_record(), folder).faults
    assert str(fault) == f"photographs[0].sha256: not recorded; q17.png has {sha256_of(folder / 'q17.png')}"


def test_a_tiny_crossing_is_reported(folder: Path) -> None:
    values = traced(folder)
    outline = values["views"][0]["outline"]
    outline[0]["points"][-1], outline[1]["points"][0] = [809, 70], [805, 66]
    [fault] = checked(values, folder).faults
    assert "where outline[0] and outline[1] of views[0] meet, they cross within a few pixels" in fault.text


def test_pieces_out_of_order_are_reported_once_the_break_is_traced(folder: Path) -> None:
    values = traced(folder)
    outline = values["views"][0]["outline"]
    outline[1]["points"].reverse()
    [fault] = checked(values, folder).faults
    assert fault.place == "views[0].outline"
    assert "list them as they follow around the fragment" in fault.text
    del outline[3]
    assert checked(values, folder).faults == ()


def test_a_record_begins_with_sizes_and_hashes(folder: Path) -> None:
    (folder / "more").mkdir()
    Image.fromarray(np.zeros((10, 20), np.uint8)).save(folder / "more" / "q17.png")
    record = begin("Q 17", [folder / "q17.png", folder / "more" / "q17.png"], folder)
    assert [one.file for one in record.photographs] == ["q17.png", "more/q17.png"]
    assert len({one.id for one in record.photographs}) == 2
    assert record.photographs[1].size == (20, 10)
    assert check(record, folder).faults == ()


def test_a_record_begins_only_with_photographs_beside_it(folder: Path) -> None:
    with pytest.raises(CallError, match="needs one photograph or more, has none"):
        begin("Q 17", [], folder)
    with pytest.raises(CallError, match=r"lies outside the record's folder .*; copy it there first"):
        begin("Q 17", [folder / "q17.png"], folder / "elsewhere")
    Image.fromarray(np.zeros((10, 20), np.uint8)).save(folder / "a.png")
    with pytest.raises(CallError, match=r"q17.png: is named 2 times; name each photograph once"):
        begin("Q 17", [folder / "a.png", folder / "q17.png", folder / "q17.png"], folder)
    with pytest.raises(PhotographError, match="there is no such photograph"):
        begin("Q 17", [folder / "no.png"], folder)
