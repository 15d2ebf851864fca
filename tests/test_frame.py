"""Pixels to millimetres."""

from __future__ import annotations

import copy
from typing import Any

import numpy as np
import pytest

from layout.frame import Frame, Plane, Scale, find_homography
from layout.notices import Caveat, Notice
from layout.record.model import Record
from layout.scale import fit_scale

SIZE = (6001, 4001)
CENTRE = np.array([3000.0, 2000.0])
MARKS = [{"bar": "a", "at": [2000.0 + 250 * cm, 3000.0], "mm": 10 * cm} for cm in range(6)]
SQUARE: dict[str, Any] = {
    "marks": MARKS,
    "below_face": {"mm": 10.0, "sd": 0.0},
    "distance": {"mm": 400.0, "sd": 0.0},
    "tilt_sd_deg": 0.0,
}
THICK = {"mm": 24.0, "sd": 0.0}


def fit(
    scale: dict[str, Any], thickness: dict[str, float] | None = THICK, draws: int = 4000
) -> tuple[Scale, list[Notice]]:
    """Fit the scale of a view that holds nothing else."""
    record = Record.model_validate(
        {
            "schema": 1,
            "name": "t",
            "photographs": [{"id": "p", "file": "p.jpg", "size": list(SIZE)}],
            "views": [{"face": "obverse", "photograph": "p", "pointing_px": 1.0, "scale": scale}],
            **({} if thickness is None else {"thickness": thickness}),
        }
    )
    return fit_scale(
        record.views[0], record.photographs[0], record.thickness, draws, np.random.default_rng(0)
    )


def face_of(scale: Scale) -> float:
    """Return the median mm per px at the face, at the centre."""
    return float(np.median(scale.face.local(CENTRE)))


def with_(**changes: Any) -> dict[str, Any]:  # noqa: ANN401
    """Return the square scale with changes."""
    return {**copy.deepcopy(SQUARE), **changes}


def test_rays_meet_their_plane() -> None:
    rng = np.random.default_rng(0)
    pixels = rng.uniform(-2000, 2000, (5, 2))
    a, b, distance, height = 0.04, -0.03, 600.0, 12.0
    one = np.ones(1)
    plane = Plane(find_homography(0.03 * one, np.array([[a, b]]), one / distance, height * one), 0.03)
    seen = plane.map(pixels)[0]
    n = np.array([a, b, np.sqrt(1 - a * a - b * b)])
    e1 = np.array([n[2], 0.0, -a]) / np.hypot(n[2], a)
    points = seen[:, :1] * e1 + seen[:, 1:] * np.cross(n, e1) - height * n + [0, 0, distance]
    assert points[:, :2] / points[:, 2:] * (distance / 0.03) == pytest.approx(pixels)


def test_the_local_scale_is_that_of_a_small_square() -> None:
    rng = np.random.default_rng(1)
    tilt, one = rng.normal(0.0, 0.03, (5, 2)), np.ones(5)
    plane = Plane(find_homography(0.03 * one, tilt, one / 500, 12 * one), 0.03)
    at = np.array([700.0, 3100.0])
    corners = plane.map(at + np.array([[-0.5, 0.0], [0.5, 0.0], [0.0, -0.5], [0.0, 0.5]]))
    (across_x, across_y), (down_x, down_y) = (
        (corners[:, 1] - corners[:, 0]).T,
        (corners[:, 3] - corners[:, 2]).T,
    )
    assert plane.local(at) ** 2 == pytest.approx(across_x * down_y - across_y * down_x, rel=1e-6)


def test_a_face_ten_millimetres_nearer_at_400_is_two_and_a_half_per_cent_larger() -> None:
    # dz / D, an identity of central projection (CHECKS: camera, plane, lens)
    assert face_of(fit(SQUARE)[0]) == pytest.approx(0.04 * (1 - 0.025), rel=1e-3)


def test_the_outline_lies_half_the_thickness_below_the_face() -> None:
    scale, _ = fit(SQUARE)
    outline = np.median(scale.outline.local(CENTRE))
    assert outline == pytest.approx(0.04 * (1 - (10 - 12) / 400), rel=1e-3)
    assert scale.outline.nominal_mm_per_px == pytest.approx(outline, rel=1e-3)


def test_what_is_not_given_is_assumed_and_widens_the_interval() -> None:
    sharp, _ = fit(SQUARE)
    scale, notices = fit({"marks": MARKS}, thickness=None)
    assert {note.code for note in notices if not hasattr(note, "result")} == {
        "scale.thickness",
        "scale.below_face",
        "scale.distance",
        "scale.tilt",
    }
    wide, narrow = (one.face.local(CENTRE).std() for one in (scale, sharp))
    assert wide > 3 * narrow


def test_tilt_widens_the_interval_of_a_face_away_from_the_bar() -> None:
    square, _ = fit(SQUARE)
    tilted, _ = fit(with_(tilt_sd_deg=1.5))
    # the bar stands 40 mm below the centre and 15 mm to the left of it: at a tilt across it all its lengths
    # change by 40 sin / 400, at a tilt along it those along it by twice 15 sin / 400
    added = np.sqrt(tilted.face.local(CENTRE).std() ** 2 - square.face.local(CENTRE).std() ** 2)
    assert added / 0.039 == pytest.approx(np.hypot(40, 2 * 15) * np.sin(np.deg2rad(1.5)) / 400, rel=0.1)


def test_a_shared_scale_error_does_not_average_down() -> None:
    # GUM H.3 (JCGM 100:2008): a systematic uncertainty common to all points stays whole in their mean
    scale, _ = fit(with_(below_face={"mm": 10.0, "sd": 2.0}))
    points = np.array([[1000.0, 2000.0], [3000.0, 2000.0], [5000.0, 2000.0]])
    mapped = scale.face.map(points)
    one = (mapped[:, 1] - mapped[:, 0])[:, 0]
    mean = (mapped[:, 2] - mapped[:, 0])[:, 0] / 2
    assert mean.std() == pytest.approx(one.std(), rel=1e-6)


def test_bars_that_agree_sharpen_the_scale_and_others_raise_a_warning() -> None:
    other = [{"bar": "b", "at": [5000.0, 1000.0 + 250 * cm], "mm": 10 * cm} for cm in range(6)]
    one, _ = fit(SQUARE)
    both, notices = fit(with_(marks=MARKS + other))
    assert not any(isinstance(note, Caveat) for note in notices)
    assert both.mm_per_px.std() < 0.8 * one.mm_per_px.std()
    wrong = [{**mark, "mm": 11 * cm} for cm, mark in enumerate(other)]
    torn, notices = fit(with_(marks=MARKS + wrong))
    assert [note.code for note in notices if isinstance(note, Caveat)] == ["scale.disagree"]
    assert torn.mm_per_px.std() > 5 * both.mm_per_px.std()


def test_a_flat_target_gives_the_scale_whichever_way_its_y_runs() -> None:
    for sign in (1, -1):
        marks = [
            {"at": [1000.0 + 250 * x, 1000.0 + 250 * sign * y], "mm": [10 * x, 10 * y]}
            for x in range(4)
            for y in range(3)
        ]
        assert face_of(fit(with_(marks=marks))[0]) == pytest.approx(0.039, rel=1e-3)


def test_a_length_known_on_the_object_lies_in_the_face() -> None:
    known = [{"from": [1000, 2000], "to": [4000, 2000], "mm": 117.0, "sd": 0.1}]
    assert face_of(fit(with_(marks=[], known=known))[0]) == pytest.approx(0.039, rel=1e-3)


def test_a_scanner_has_one_scale_at_every_height() -> None:
    scale, notices = fit({"ppi": 600})
    assert face_of(scale) == pytest.approx(25.4 / 600, rel=1e-3)
    assert np.array_equal(scale.face.local(CENTRE), scale.outline.local(CENTRE))
    assert "scale.ppi" in {getattr(note, "code", "") for note in notices}


def test_one_mark_gives_no_scale() -> None:
    scale, notices = fit(with_(marks=MARKS[:1]))
    assert not scale.known
    assert "needs two marks or more" in notices[-1].text


def test_the_scale_of_noisy_marks_is_covered() -> None:
    from tests.coverage import exact_limits

    hits = 0
    for seed in range(300):
        rng = np.random.default_rng(seed)
        marks = [{**mark, "at": [float(c + rng.normal()) for c in mark["at"]]} for mark in MARKS]  # type: ignore[attr-defined]
        scale, _ = fit(with_(marks=marks), draws=1000)
        low, high = np.percentile(scale.face.local(CENTRE), [2.5, 97.5])
        hits += low <= 0.039 <= high
    limits = exact_limits(hits, 300, 0.998)
    assert limits[1] > 0.93


def test_to_px_is_the_inverse_of_to_mm() -> None:
    frame = Frame(CENTRE, np.array([4.0, -7.0]), 0.03)
    points = np.array([[100.0, 200.0], [5000.0, 3000.0]])
    assert frame.to_px(frame.to_mm(points, 0.04), 0.04) == pytest.approx(points)
