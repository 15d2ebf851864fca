"""What a record may hold, and what in it contradicts itself."""

from __future__ import annotations

import json
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
import shapely
from pydantic import ValidationError

from layout.errors import RecordError
from layout.quantity import Floats
from layout.record.consistency import MOST_OUTLINE_POINTS
from layout.record.crossings import (
    JOINT,
    POINTING_PX,
    Crossing,
    find_crossings,
    mend_crossings,
    mend_outlines,
    pieces_of,
)
from layout.record.files import parse
from layout.record.model import Record
from tests import zoo

Spoil = Callable[[dict[str, Any]], object]


def test_every_key_of_the_format_is_an_attribute() -> None:
    record = parse(json.dumps(zoo.small_record()))
    view = record.views[0]
    assert view.scale.marks[1].at == (200.0, 750.0)
    assert (view.scale.below_face and (view.scale.below_face.mm, view.scale.below_face.sd)) == (9.0, 1.0)
    assert (view.rulings[1].id, view.rulings[1].runs, view.rulings[1].kind) == ("v2", "vertical", "double")
    assert view.writing[0].from_ == (510.0, 175.0)
    assert view.scale.known[0].to == (700.0, 100.0)
    assert record.candidates[0].columns[0].remains == ("", "[…]")
    assert record.pool.together == (1, 2)
    assert record.gaps[0].restorations == ("lugal-e",)
    assert record.photograph_of(view).file == "q17.png"


def test_what_nobody_gave_is_none_or_empty() -> None:
    record = parse(json.dumps(zoo.smallest_record()))
    view = record.views[0]
    assert (view.region, view.pointing_px, view.scale.tilt_sd_deg, view.scale.below_face) == (None,) * 4
    assert (record.thickness, record.convexity, record.asymmetry_percent) == (None,) * 3
    assert (view.outline, view.rulings, view.writing, record.lost.sides, record.candidates) == ((),) * 5


def test_a_record_cannot_be_changed() -> None:
    record = parse(json.dumps(zoo.smallest_record()))
    with pytest.raises(ValidationError, match="frozen"):
        record.name = "Q 2"


def test_incomplete_is_read() -> None:
    values = zoo.small_record()
    view = values["views"][0]
    view["scale"] = {"marks": [{"at": [1, 2], "mm": 0}]}
    view["outline"] = [{"edge": "left"}, {"edge": "break", "points": [[5, 5]]}]
    view["rulings"] = [
        {"id": "v1", "runs": "vertical", "points": [[1, 1]]},
        {"id": "h1", "runs": "horizontal"},
    ]
    view["writing"] = [{"text": "5", "from": [1, 1], "to": [2, 2]}]
    assert parse(json.dumps(values)).views[0].rulings[1].points == ()


def test_marks_of_a_flat_target_lie_in_the_plane() -> None:
    values = zoo.smallest_record()
    values["views"][0]["scale"] = {"marks": [{"at": [1, 2], "mm": [0, 0]}, {"at": [9, 2], "mm": [0, 10.5]}]}
    assert parse(json.dumps(values)).views[0].scale.marks[1].mm == (0.0, 10.5)


def put(*steps: str | int, value: object) -> Spoil:
    """Return a function that puts a value at a place of a record."""

    def spoil(values: dict[str, Any]) -> None:
        part: Any = values
        for step in steps[:-1]:
            part = part[step]
        part[steps[-1]] = value

    return spoil


def drop(*steps: str | int) -> Spoil:
    """Return a function that deletes a key of a record."""

    def spoil(values: dict[str, Any]) -> None:
        part: Any = values
        for step in steps[:-1]:
            part = part[step]
        del part[steps[-1]]

    return spoil


VIEW = ("views", 0)
MARKS = (*VIEW, "scale", "marks")


@pytest.mark.parametrize(
    ("spoil", "line"),
    [
        # wrong types
        (put("name", value=17), "name: needs a text in quotes, has 17"),
        (put("name", value=""), 'name: needs a text that is not empty, has ""'),
        (put("views", value={}), "views: needs a list in [ ], has {}"),
        (put("views", value=[3]), "views[0]: needs an object in { }, has 3"),
        (put("series", value=[]), "series: needs an object in { }, has []"),
        (put("series", "n", value="2,3"), 'series.n: needs a list in [ ], has "2,3"'),
        (put("series", "n m", value=[1]), 'series["n m"][0]: needs a text in quotes, has 1'),
        (put("series", "", value=[]), "series: needs a name for each run, has an empty one"),
        (put("thickness", value=24), "thickness: needs an object in { }, has 24"),
        (put("thickness", "mm", value="24"), 'thickness.mm: needs a number, has "24"'),
        (put("thickness", "mm", value=True), "thickness.mm: needs a number, has true"),
        (put("thickness", "mm", value=None), "thickness.mm: needs a number, has null"),
        (put("thickness", "sd", value=-1), "thickness.sd: needs 0 or more, has -1"),
        (put("thickness", "mm", value=2e6), "thickness.mm: needs 1000000 or less, has 2000000.0"),
        (put("evidence", 0, "sd", value=0), "evidence[0].sd: needs 1e-06 or more, has 0"),
        (
            put("evidence", 0, "about", value="depth"),
            "evidence[0].about: needs 'width' or 'height', has \"depth\"",
        ),
        (put("photographs", 0, "size", value=[0, 5]), "photographs[0].size[0]: needs 1 or more, has 0"),
        (
            put("photographs", 0, "size", value=[5.5, 5]),
            "photographs[0].size[0]: needs a whole number, has 5.5",
        ),
        (put("photographs", 0, "size", value=[5]), "photographs[0].size: needs [width, height], has [5]"),
        (
            put("photographs", 0, "sha256", value="abc"),
            'photographs[0].sha256: needs a SHA-256 of 64 digits 0-9 a-f, has "abc"',
        ),
        (put(*VIEW, "region", value=[]), "views[0].region: needs [x, y, width, height], has []"),
        (
            put(*VIEW, "rulings", 2, "points", 0, value=[1, 2, 3]),
            "views[0].rulings[2].points[0]: needs [x, y]",
        ),
        (
            put(*VIEW, "rulings", 2, "points", 0, value="1,2"),
            "views[0].rulings[2].points[0]: needs a list in [ ]",
        ),
        (put(*MARKS, 1, "mm", value="ten"), "views[0].scale.marks[1].mm: needs a number of mm along a bar"),
        (put(*MARKS, 1, "mm", value=[1]), "views[0].scale.marks[1].mm: needs a number of mm along a bar"),
        (
            put(*MARKS, 1, "mm", value=[1, True]),
            "views[0].scale.marks[1].mm: needs a number of mm along a bar",
        ),
        (put("pool", "together", value=[1]), "pool.together: needs [fewest, most], has [1]"),
        # keys
        (drop("name"), "needs the key 'name'; add it"),
        (drop("photographs", 0, "size"), "photographs[0]: needs the key 'size'; add it"),
        (drop(*VIEW, "writing", 0, "from"), "views[0].writing[0]: needs the key 'from'; add it"),
        (
            put(*VIEW, "scale", "below_fac", value=9),
            "views[0].scale.below_fac: unknown key; did you mean 'below_face'? known here: marks, ppi",
        ),
        (
            put("candidates", 0, "columns", 0, "zz", value=9),
            "candidates[0].columns[0].zz: unknown key; known here:",
        ),
        (
            put(*VIEW, "writing", 0, "from_", value=[1, 1]),
            "views[0].writing[0].from_: unknown key; did you mean 'from'",
        ),
        (put("a\x1b[2J", value=1), r'["a\u001b[2J"]: unknown key'),
        # what contradicts itself
        (put("photographs", value=[]), "photographs: needs one photograph or more, has none"),
        (put("views", value=[]), "views: needs one view or more, has none"),
        (
            put(*VIEW, "photograph", value="rev"),
            'views[0].photograph: no photograph is called "rev"; there are: obv',
        ),
        (
            put("photographs", 0, "file", value="/x.jpg"),
            "photographs[0].file: needs a file beside the record",
        ),
        (
            put("photographs", 0, "file", value="../x.jpg"),
            "photographs[0].file: needs a file beside the record",
        ),
        (
            put("photographs", 0, "file", value="C:\\x.jpg"),
            "photographs[0].file: needs a file beside the record",
        ),
        (
            put("photographs", 0, "file", value="x\0.jpg"),
            "photographs[0].file: needs a file beside the record",
        ),
        (put(*VIEW, "scale", "lens", value="/l.json"), "views[0].scale.lens: needs a file beside the record"),
        (
            put(*VIEW, "region", value=[0, 0, 1001, 700]),
            "views[0].region: [0.0, 0.0, 1001.0, 700.0] reaches beyond",
        ),
        (put(*VIEW, "rulings", 1, "id", value="v1"), 'views[0].rulings[1].id: the id "v1" stands 2 times'),
        (
            put(*VIEW, "rulings", 4, "id", value="edge"),
            "views[0].rulings[4].id: 'edge' means the tablet's edge",
        ),
        (
            put(*VIEW, "writing", 0, "column", value="v9"),
            'views[0].writing[0].column: no vertical ruling is called "v9"; there are: v1, v2, edge',
        ),
        (
            put(*VIEW, "writing", 0, "column", value="h1"),
            'views[0].writing[0].column: no vertical ruling is called "h1"',
        ),
        (
            put(*VIEW, "writing", 0, "to", value=[510, 175]),
            "views[0].writing[0]: begins and ends at (510.0, 175.0)",
        ),
        (
            put(*MARKS, 1, "at", value=[100.0, 750.5]),
            "views[0].scale.marks[1].at: stands where views[0].scale.marks[0]",
        ),
        (put(*MARKS, 1, "mm", value=0), "views[0].scale.marks[1].mm: reads what views[0].scale.marks[0]"),
        (put(*MARKS, 1, "mm", value=[0, 10]), "views[0].scale.marks[0].mm: bar 'a' mixes numbers and [X, Y]"),
        (put("lost", "sides", value=["left", "left"]), 'lost.sides: the side "left" stands 2 times'),
        (put("candidates", 0, "columns", 1, "entries", value=["1"]), "candidates[0].columns[1]: has both"),
        (put("pool", "together", value=[3, 2]), "pool.together: needs [fewest, most], has [3, 2]"),
        (put("gaps", 0, "view", value=1), "gaps[0].view: needs a view from 0 to 0, has 1"),
        (
            put("gaps", 0, "to", value=[1000, 1]),
            "gaps[0].to: (1000.0, 1.0) lies outside the photograph (1000 x 800)",
        ),
    ],
)
def test_each_fault_is_named_with_its_place(spoil: Spoil, line: str) -> None:
    values = zoo.small_record()
    spoil(values)
    with pytest.raises(RecordError, match=r"\S") as raised:
        parse(json.dumps(values))
    assert any(said.startswith(line) for said in raised.value.lines()), raised.value.lines()
    assert all("\n" not in said and said.isprintable() for said in raised.value.lines())


def test_repeated_photographs_and_candidates_are_refused() -> None:
    values = zoo.small_record()
    values["photographs"].append({"id": "obv", "file": "b.png", "size": [10, 10]})
    values["candidates"].append({"name": "products"})
    with pytest.raises(RecordError, match="photographs") as raised:
        parse(json.dumps(values))
    assert raised.value.lines() == [
        'photographs[1].id: the id "obv" stands 2 times; each needs its own',
        'candidates[1].name: the name "products" stands 2 times; each needs its own',
    ]


@pytest.mark.parametrize(
    ("x", "y", "inside"),
    [(-0.5, 0, True), (999.5, 799.5, True), (-0.51, 0, False), (999.51, 0, False), (0, 799.6, False)],
)
def test_a_photograph_reaches_half_a_pixel_beyond_its_outer_pixel_centres(
    x: float, y: float, inside: bool
) -> None:
    values = zoo.small_record()
    values["views"][0]["region"] = None
    values["views"][0]["rulings"][0]["points"][2] = [x, y]
    if inside:
        parse(json.dumps(values))
    else:
        with pytest.raises(RecordError, match="lies outside the photograph") as raised:
            parse(json.dumps(values))
        [line] = raised.value.lines()
        place = f"views[0].rulings[0].points[2]: ({float(x)}, {float(y)})"
        assert line == f"{place} lies outside the photograph (1000 x 800)"


def test_what_was_traced_lies_in_the_region_but_a_bar_may_lie_beside_it() -> None:
    values = zoo.small_record()
    parse(json.dumps(values))  # its bar lies below the region
    values["views"][0]["rulings"][0]["points"][0] = [500, 750]
    with pytest.raises(
        RecordError, match=r"outside the view's region \[0.0, 0.0, 1000.0, 700.0\]; move the point"
    ):
        parse(json.dumps(values))


SQUARE: list[Floats] = [
    np.array(points, dtype=float)
    for points in (
        [[0, 0], [50, 0], [100, 0]],
        [[100, 0], [100, 50], [100, 100]],
        [[100, 100], [50, 100], [0, 100]],
        [[0, 100], [0, 50], [0, 0]],
    )
]


def test_pieces_that_share_their_ends_do_not_cross() -> None:
    assert find_crossings(SQUARE) == []
    assert find_crossings([np.vstack(SQUARE)]) == []
    assert find_crossings([]) == []
    assert find_crossings([np.empty((0, 2)), np.array([[1.0, 1.0]])]) == []


def test_a_bow_crosses_in_its_middle() -> None:
    bow = np.array([[0.0, 0.0], [4.0, 4.0], [4.0, 0.0], [0.0, 4.0]])
    assert find_crossings([bow]) == [Crossing((0, 0), (0, 2), (2.0, 2.0))]
    assert find_crossings([bow[:2], bow[2:]]) == [Crossing((0, 0), (1, 0), (2.0, 2.0))]


def test_a_trace_through_its_own_point_crosses_itself() -> None:
    assert find_crossings([np.array([[0.0, 0.0], [2.0, 0.0], [4.0, 0.0], [2.0, 3.0], [2.0, -3.0]])])


@pytest.mark.parametrize("points", [3, 10, 60])
def test_crossings_are_those_that_shapely_finds(points: int) -> None:
    rng = np.random.default_rng(20)
    for _ in range(40):
        trace = rng.normal(size=(points, 2))
        segments = [shapely.LineString(trace[k : k + 2]) for k in range(points - 1)]
        expected = {
            (i, j)
            for i in range(points - 1)
            for j in range(i + 2, points - 1)
            if segments[i].intersects(segments[j])
        }
        found = find_crossings([trace])
        assert {(each.first[1], each.second[1]) for each in found} == expected
        for each in found:
            at = shapely.Point(each.at)
            assert segments[each.first[1]].distance(at) < 1e-9
            assert segments[each.second[1]].distance(at) < 1e-9


def test_ends_that_run_past_their_corner_are_cut_at_the_crossing() -> None:
    long = [SQUARE[0].copy(), SQUARE[1].copy(), *SQUARE[2:]]
    long[0][2] = [104, 0]
    long[1][0] = [100, -4]
    mended, crossings = mend_crossings(long, 10.0)
    assert [each.at for each in crossings] == [(100.0, 0.0)]
    for piece, expected in zip(mended, SQUARE, strict=True):
        np.testing.assert_allclose(piece, expected)
    assert find_crossings(mended) == []
    # the hand ran further than a hand runs: left as it is
    unmended, none = mend_crossings(long, 3.9)
    assert none == []
    assert len(find_crossings(unmended)) == 1


def test_the_last_piece_is_followed_by_the_first() -> None:
    long = [*SQUARE[:3], np.array([[0.0, 100.0], [0.0, 50.0], [0.0, -5.0]])]
    long[0] = np.array([[-3.0, 0.0], [50.0, 0.0], [100.0, 0.0]])
    mended, crossings = mend_crossings(long, 10.0)
    assert [each.at for each in crossings] == [(0.0, 0.0)]
    np.testing.assert_allclose(mended[0][0], [0, 0])
    np.testing.assert_allclose(mended[3][-1], [0, 0])


def test_a_single_piece_that_runs_past_its_beginning_is_cut() -> None:
    ring = np.vstack([*SQUARE, [[0.0, -5.0]]])
    ring[0] = [-5.0, 0.0]
    mended, crossings = mend_crossings([ring], 10.0)
    assert len(crossings) == 1
    np.testing.assert_allclose(mended[0][[0, -1]], [[0, 0], [0, 0]])


def test_a_tiny_loop_is_cut_and_a_large_one_is_not() -> None:
    loop = np.array([[0.0, 0.0], [50.0, 0.0], [53.0, 3.0], [50.0, 3.0], [53.0, 0.0], [100.0, 0.0]])
    mended, crossings = mend_crossings([loop], 10.0)
    assert len(crossings) == 1
    assert len(mended[0]) == 5
    assert find_crossings(mended) == []
    assert mend_crossings([10 * loop], 10.0)[1] == []


def crossed_record(run_past_px: float) -> dict[str, Any]:
    """Return a record whose upper and right edges run so far past their common corner."""
    values = zoo.small_record()
    outline = values["views"][0]["outline"]
    outline[0]["points"][-1] = [805 + run_past_px, 70]
    outline[1]["points"][0] = [805, 70 - run_past_px]
    return values


def test_a_tiny_crossing_is_read_and_mended_beside_the_record() -> None:
    record = parse(json.dumps(crossed_record(4)))
    mended, caveats = mend_outlines(record)
    assert [caveat.code for caveat in caveats] == ["outline.crossing"]
    assert "where outline[0] and outline[1] of views[0] meet, they cross" in caveats[0].text
    assert find_crossings(pieces_of(record.views[0]))
    assert find_crossings(pieces_of(mended.views[0])) == []
    assert mended.views[0].outline[1].state == "doubtful"
    assert mend_outlines(mended) == (mended, ())


def test_a_large_crossing_is_refused_with_both_places() -> None:
    with pytest.raises(RecordError, match=r"crosses itself at .*, behind outline\[0\].points\[3\]") as raised:
        parse(json.dumps(crossed_record(JOINT * POINTING_PX + 5)))
    assert raised.value.faults[0].place == "views[0].outline[1].points[0]"


def test_how_far_is_tiny_follows_the_pointing_uncertainty() -> None:
    values = crossed_record(JOINT * POINTING_PX + 5)
    values["views"][0]["pointing_px"] = 2.0
    parse(json.dumps(values))


def test_an_outline_of_too_many_points_is_refused_before_it_is_searched() -> None:
    values = zoo.small_record()
    values["views"][0]["outline"][0]["points"] = [[1, 1]] * (MOST_OUTLINE_POINTS + 1)
    with pytest.raises(
        RecordError, match=r"views\[0\].outline: needs 20000 points or fewer, has 20016; thin"
    ):
        parse(json.dumps(values))


def test_mm_of_a_model_made_in_code_is_checked_too() -> None:
    with pytest.raises(ValidationError, match="needs a number of mm"):
        Record.model_validate(
            {
                **zoo.smallest_record(),
                "views": [
                    zoo.small_record()["views"][0]
                    | {"scale": {"marks": [{"at": [1, 1], "mm": float("nan")}]}}
                ],
            }
        )
