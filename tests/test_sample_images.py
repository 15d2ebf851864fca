"""The renderer of the invented fragments, and the records and truths that lie beside their photographs.

Only crops are rendered here: a whole picture takes a minute.
"""

from __future__ import annotations

import hashlib
import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import cv2
import numpy as np
import pytest
import shapely

from layout.record.model import Record
from sample_images.render.camera import Camera, trace_rays
from sample_images.render.fragments import CORNER_LOST, LEFT_LOST, RIGHT_LOST, SITTINGS, Sitting
from sample_images.render.grid import Points, grid_over
from sample_images.render.light import Lamp, unshadowed
from sample_images.render.picture import develop
from sample_images.render.scribe import entry_width
from sample_images.render.shape import Body, smooth_outline
from sample_images.render.studio import EXPOSURE, photograph_face, shots_of, tilted
from sample_images.render.tables import digits, reciprocal, written
from sample_images.render.tablet import Tablet, make_tablet
from sample_images.render.wedges import Wedge, press

HERE = Path(__file__).resolve().parent.parent
FOLDER = HERE / "sample_images"
BUNDLED = HERE / "layout" / "demo"
STEMS = [sitting.spec.stem for sitting in SITTINGS]


@pytest.fixture(scope="module")
def tablets() -> dict[str, Tablet]:
    return {sitting.spec.stem: make_tablet(sitting.spec) for sitting in SITTINGS}


def record_of(stem: str) -> dict[str, Any]:
    data: dict[str, Any] = json.loads((FOLDER / f"{stem}.fragment.json").read_text("utf-8"))
    return data


def truth_of(stem: str) -> dict[str, Any]:
    data: dict[str, Any] = json.loads((FOLDER / f"{stem}.truth.json").read_text("utf-8"))
    return data


def camera(**changes: Any) -> Camera:  # noqa: ANN401 - any field of a camera
    return replace(Camera((1001, 801), 0.05, 600.0, -12.0, (0.0, 0.0)), **changes)


# The pinhole: x = c + f X / Z (identity)


def test_a_point_is_seen_where_the_pinhole_formula_says() -> None:
    points = np.array([[0.0, 0.0, -12.0], [10.0, 0.0, -12.0], [10.0, -20.0, 0.0]])
    focal = 600.0 / 0.05
    expected = [[500, 400], [500 + focal * 10 / 600, 400], [500 + focal * 10 / 588, 400 - focal * 20 / 588]]
    assert camera().project(points) == pytest.approx(np.array(expected), abs=1e-9)


def test_height_moves_a_point_away_from_the_centre_also_when_the_camera_is_aslant() -> None:
    aslant = camera(tilt_deg=(0.8, -1.1))
    low, high = aslant.project(np.array([[25.0, 15.0, -12.0], [25.0, 15.0, 0.0]]))
    vertical = aslant.project(np.array([[*aslant.pinhole[:2], -12.0]]))[0]
    assert np.hypot(*(high - vertical)) > np.hypot(*(low - vertical))


def test_the_optical_axis_meets_the_bar_plane_at_the_aim_and_at_the_distance() -> None:
    aslant = camera(tilt_deg=(1.5, 0.7), aim=(4.0, -3.0))
    assert aslant.project(np.array([[4.0, -3.0, -12.0]]))[0] == pytest.approx([500, 400], abs=1e-9)
    assert aslant.pinhole[2] + 12.0 == pytest.approx(600.0)


def test_a_ray_ends_on_the_step_that_stands_in_its_way() -> None:
    grid = grid_over(-30, -25, 30, 25, 10)
    heights = np.where(np.broadcast_to(np.abs(grid.x) < 8, grid.shape), 0.0, -20.0).astype(np.float32)
    look = camera(mm_per_px=0.05)
    middle, outside = look.project(np.array([[7.0, 0.0, 0.0], [15.0, 5.0, -20.0]]))
    for pixel, height in ((middle, 0.0), (outside, -20.0)):
        window = (round(pixel[0]), round(pixel[1]), 1, 1)
        column, row, z = trace_rays(look, window, heights, grid)
        assert z[0, 0] == pytest.approx(height, abs=0.02)
        place = [grid.left + column[0, 0] / 10, grid.upper + row[0, 0] / 10, float(z[0, 0])]
        seen = look.project(np.array([place]))[0]
        assert seen == pytest.approx([window[0], window[1]], abs=0.05)


def test_a_wall_throws_a_shadow_as_long_as_its_height_over_the_tangent_of_the_lamp() -> None:
    lamp = Lamp(azimuth_deg=180.0, elevation_deg=30.0, half_size_deg=1.0)
    grid = grid_over(-10, -5, 30, 5, 12)
    wall = (np.abs(grid.x) < 2) & (np.abs(grid.y) < 50)
    lit = unshadowed(np.where(wall, 6.0, 0.0).astype(np.float32), grid, lamp)
    middle = lit[grid.height // 2]
    shadow_end = 2 + 6 / np.tan(np.radians(30))
    x = grid.x[0]
    assert (middle[(x > 3) & (x < shadow_end - 1)] < 0.05).all()
    assert (middle[(x > shadow_end + 1.2) & (x < 28)] > 0.95).all()
    assert (middle[(x < -3) & (x > -9)] > 0.95).all()


def test_a_wedge_is_as_deep_as_it_was_pressed_and_leaves_the_face_around_it() -> None:
    grid = grid_over(-2, -2, 2, 6, 80)
    depth = np.zeros(grid.shape, np.float32)
    press(depth, grid, Wedge("unit", (0.0, 0.0), 1.6, 4.5, 0.6))
    assert depth.max() == pytest.approx(0.6, rel=0.02)
    rows, columns = np.nonzero(depth > 0)
    assert grid.y[rows].max() == pytest.approx(4.5, abs=0.1)
    assert np.ptp(grid.x[0, columns]) == pytest.approx(1.6, abs=0.05)


# The shape and the tables


def test_the_smooth_outline_reaches_its_tangents() -> None:
    body = Body((40.0, 41.0), (52.0, 51.0), (4.5, 5.0), 24.0, 12.0)
    points = smooth_outline(body)
    assert points.min(axis=0) == pytest.approx([-40.0, -52.0], abs=0.01)
    assert points.max(axis=0) == pytest.approx([41.0, 51.0], abs=0.01)


@pytest.mark.parametrize("number", [2, 27, 45, 54, 64, 81])
def test_a_number_times_its_reciprocal_is_a_power_of_sixty(number: int) -> None:
    value = sum(place * 60**power for power, place in enumerate(reversed(digits(reciprocal(number)))))
    assert written(value * number) == "1"


def test_the_same_seed_makes_the_same_tablet(tablets: dict[str, Tablet]) -> None:
    again = make_tablet(LEFT_LOST.spec).obverse
    for (edge, points), (edge_again, points_again) in zip(
        tablets["umbarrat-041"].obverse.outline, again.outline, strict=True
    ):
        assert edge == edge_again
        assert (points == points_again).all()


def test_the_girth_lies_half_the_thickness_below_the_face(tablets: dict[str, Tablet]) -> None:
    for tablet in tablets.values():
        for edge, points in tablet.obverse.outline:
            if edge != "break":
                assert points[:, 2] == pytest.approx(-tablet.spec.thickness / 2)


@pytest.mark.parametrize("number", [0, 2])
def test_a_ruling_is_seen_as_a_dark_line_where_it_was_drawn(tablets: dict[str, Tablet], number: int) -> None:
    sitting = SITTINGS[number]
    tablet = tablets[sitting.spec.stem]
    line = next(line for line in tablet.obverse.lines if line.id == "v4")
    look = tilted(sitting, 0)
    # one line of writing high, from just below a horizontal ruling
    x, y = line.points[len(line.points) // 2]
    half = round(2.4 / look.mm_per_px)
    centre = np.round(look.project(tablet.obverse.on_face(np.array([[x, y]])))[0]).astype(int)
    window = (int(centre[0]) - half, int(centre[1]) - half, 2 * half, 2 * half)
    linear, _ = photograph_face(sitting, tablet, tablet.obverse, look, ground=sitting.ground, window=window)
    grey = develop(linear, EXPOSURE, np.random.default_rng(0)).mean(axis=2)
    expected = look.project(tablet.obverse.on_face(line.points)) - window[:2]
    inside = (expected[:, 1] > 0) & (expected[:, 1] < 2 * half - 1)
    rows, columns = expected[inside, 1], expected[inside, 0]
    # straighten along the true course, then look for the darkest place across it
    offsets = np.arange(-half // 2, half // 2 + 1)
    across = [
        grey[round(row), np.round(column + offsets).astype(int)]
        for row, column in zip(rows, columns, strict=True)
    ]
    darkest = offsets[np.argmin(np.mean(across, axis=0))] * look.mm_per_px
    # the shadow lies within the groove, whose half width is 0.29 mm
    assert abs(darkest) < 0.3


# Records, truths and photographs as they are committed


@pytest.mark.parametrize("stem", STEMS)
def test_a_record_knows_its_photograph(stem: str) -> None:
    photograph = record_of(stem)["photographs"][0]
    path = FOLDER / photograph["file"]
    assert hashlib.sha256(path.read_bytes()).hexdigest() == photograph["sha256"]
    width, height = photograph["size"]
    assert 12e6 <= width * height <= 24e6
    # an eighth of the picture is decoded without the rest of it
    small = cv2.imread(str(path), cv2.IMREAD_REDUCED_GRAYSCALE_8)
    assert small is not None
    assert small.shape == (-(-height // 8), -(-width // 8))


def test_the_samples_take_less_than_25_megabytes_and_the_bundled_photograph_less_than_six() -> None:
    assert sum(path.stat().st_size for path in FOLDER.rglob("*") if path.is_file()) < 25e6
    assert (BUNDLED / f"{LEFT_LOST.spec.stem}.jpg").stat().st_size < 6e6


def test_the_bundled_fragment_is_the_first_sample() -> None:
    for ending in (".jpg", ".fragment.json"):
        name = f"{LEFT_LOST.spec.stem}{ending}"
        assert (BUNDLED / name).read_bytes() == (FOLDER / name).read_bytes()


@pytest.mark.parametrize("stem", STEMS)
def test_a_record_is_sound(stem: str) -> None:
    record = Record.model_validate(record_of(stem))
    for view in record.views:
        points = [piece.points for piece in view.outline]
        for before, after in zip(points[-1:] + points[:-1], points, strict=True):
            assert before[-1] == after[0]
        assert shapely.Polygon([point for piece in points for point in piece[:-1]]).is_valid
        names = {ruling.id for ruling in view.rulings}
        assert {entry.column for entry in view.writing} <= names
        assert len(names) == len(view.rulings)


@pytest.mark.parametrize("stem", STEMS)
def test_the_truth_adds_up(stem: str) -> None:
    truth = truth_of(stem)
    assert sum(truth["half_widths"]) == pytest.approx(truth["width"], abs=0.002)
    assert sum(truth["column_widths"]) + 2 * truth["margin"] == pytest.approx(truth["width"], abs=0.01)
    lost = slice(0, truth["lost_columns"])
    if record_of(stem)["lost"]["sides"] == ["right"]:
        lost = slice(-truth["lost_columns"], None)
    assert sum(truth["column_widths"][lost]) == pytest.approx(truth["lost_space"], abs=0.01)
    assert truth["lost_space"] / truth["sign_width"] == pytest.approx(truth["capacity"], abs=1e-4)
    for view, told in zip(record_of(stem)["views"], truth["views"], strict=True):
        names = {ruling["id"] for ruling in view["rulings"]}
        assert {name for column in told["columns"] for name in (column["left"], column["right"])} <= names


@pytest.mark.parametrize("sitting", SITTINGS, ids=STEMS)
def test_the_true_candidate_holds_what_the_scribe_wrote(sitting: Sitting) -> None:
    candidates = {candidate["name"]: candidate for candidate in record_of(sitting.spec.stem)["candidates"]}
    columns = candidates[truth_of(sitting.spec.stem)["true_candidate"]]["columns"]
    count, spec = sitting.spec.lost_columns, sitting.spec
    lost = spec.columns[:count] if spec.lost_side == "left" else spec.columns[-count:]
    assert [column["entries"] for column in columns] == [
        list(column.entries[: spec.obverse_lines]) for column in lost
    ]
    required = sum(max(entry_width(text) for text in column.entries) for column in lost)
    assert required < truth_of(spec.stem)["capacity"]


@pytest.mark.parametrize("sitting", SITTINGS, ids=STEMS)
def test_the_marks_give_the_true_scale_once_brought_up_to_the_face(sitting: Sitting) -> None:
    truth = truth_of(sitting.spec.stem)
    for view, told in zip(record_of(sitting.spec.stem)["views"], truth["views"], strict=True):
        marks = view["scale"]["marks"]
        at = np.array([mark["at"] for mark in marks])
        readings = np.array([mark["mm"] for mark in marks], float)
        centred = readings - readings.mean()
        px_per_mm = np.hypot(*(centred @ at / (centred @ centred)))
        at_face = (1 - truth["below_face"] / truth["distance"]) / px_per_mm
        # 70 mm from bar to face, on a plane aslant by 1 degree (sd) at 640 mm or more: 0.2 % (sd)
        assert at_face == pytest.approx(told["mm_per_px"], rel=0.006)


@pytest.mark.parametrize("sitting", [LEFT_LOST, RIGHT_LOST, CORNER_LOST], ids=STEMS)
def test_traced_points_lie_where_the_tablet_is_seen(sitting: Sitting, tablets: dict[str, Tablet]) -> None:
    tablet = tablets[sitting.spec.stem]
    for shot, view in zip(shots_of(sitting, tablet), record_of(sitting.spec.stem)["views"], strict=True):
        corner = np.array(shot.region[:2] if shot.region else (0, 0))
        true: list[Points] = [shot.camera.project(points) + corner for _, points in shot.side.outline]
        away = np.concatenate(
            [
                shapely.distance(shapely.LineString(seen), shapely.points(np.array(piece["points"])))
                for piece, seen in zip(view["outline"], true, strict=True)
            ]
        )
        # across the line: pointing, and a wobble of 0.07 mm over 6 mm; some 60 lengths of it go round a
        # fragment, so the root mean square is known to 9 % (sd) and 1.3 leaves three of these
        wobble_px = 0.07 / shot.camera.mm_per_px
        assert np.sqrt(np.mean(away**2)) < 1.3 * np.hypot(sitting.pointing_px, wobble_px)
