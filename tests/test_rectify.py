"""The face as a picture of known resolution."""

from __future__ import annotations

import json
from pathlib import Path

import cv2
import numpy as np
import pytest

from layout.errors import CallError
from layout.homography import apply
from layout.image.photograph import Pixels
from layout.record.model import Record
from layout.rectify import rectify, to_tiff
from tests.command import run
from tests.pictures.scene import CARD, SIZE, Floats, Sitting, record_of

SAMPLES = Path(__file__).parent.parent / "sample_images"


def dots(record: Record) -> Pixels:
    """Return a photograph that shows nothing but dots at a record's marks."""
    pixels = np.full((SIZE[1] // 2, SIZE[0] // 2, 3), 200, np.uint8)
    for mark in record.views[0].scale.marks:
        centre = (round(mark.at[0] / 2 * 16), round(mark.at[1] / 2 * 16))
        cv2.circle(pixels, centre, 12 * 16, (0, 0, 0), -1, cv2.LINE_AA, 4)
    return np.asarray(cv2.resize(pixels, SIZE, interpolation=cv2.INTER_LINEAR), np.uint8)


def centres(pixels: Pixels) -> Floats:
    """Return the middles of the dots."""
    dark = (cv2.cvtColor(pixels, cv2.COLOR_RGB2GRAY) < 100) & (pixels.max(axis=2) < 100)
    grown = cv2.morphologyEx(dark.astype(np.uint8), cv2.MORPH_OPEN, np.ones((5, 5), np.uint8))
    _, _, sizes, middles = cv2.connectedComponentsWithStats(grown)
    return np.asarray(middles[1:][sizes[1:, cv2.CC_STAT_AREA] < 60_000])


def test_a_plane_at_the_face_is_shown_at_its_true_size() -> None:
    # the card lies at the height of the face itself: what is seen of it must be true to scale
    sitting = Sitting("card", (0.2, -0.15), mm_per_px=0.07, rocking_deg=0.0, below_sd=1e-6, mark_sd_px=0.01)
    record = record_of(sitting, below_face={"mm": 0.0, "sd": 1e-6})
    photograph = dots(record)
    photograph[:60], photograph[-60:], photograph[:, :60], photograph[:, -60:] = 200, 200, 200, 200
    whole = record.model_copy(
        update={"views": (record.views[0].model_copy(update={"rulings": (), "outline": ()}),)}
    )
    found = centres(rectify(whole, 0, photograph, 10.0).pixels)
    assert len(found) == len(CARD)
    away = np.hypot(*(CARD[:, None] - CARD[None]).transpose(2, 0, 1)).ravel()
    seen = np.hypot(*(found[:, None] - found[None]).transpose(2, 0, 1)).ravel() / 10.0
    assert np.sort(seen) == pytest.approx(np.sort(away), abs=0.15)


def test_the_file_says_how_many_pixels_make_a_centimetre(tmp_path: Path) -> None:
    done = run(
        "rectify",
        SAMPLES / "umbarrat-212.fragment.json",
        "-o",
        tmp_path / "f.tif",
        "--per-mm",
        "8",
        cwd=tmp_path,
    )
    assert (done.code, done.out) == (0, "")
    from PIL import Image

    with Image.open(tmp_path / "f.tif") as picture:
        tags = picture.tag_v2  # type: ignore[attr-defined]
        # TIFF 6.0: 282 and 283 are the resolutions, 296 = 3 their unit, a centimetre
        assert (float(tags[282]), float(tags[283]), tags[296]) == (80.0, 80.0, 3)
        width, height = picture.size
    truth = json.loads((SAMPLES / "umbarrat-212.truth.json").read_text(encoding="utf-8"))
    # the whole tablet is no smaller than its fragment, shown with a margin of 5 mm
    assert width / 8 - 10 < truth["width"]
    assert height / 8 - 10 < truth["height"] * 1.02


def test_rulings_are_as_far_apart_as_they_are_measured(tmp_path: Path) -> None:
    from layout.image.photograph import read_photograph
    from layout.record.files import read
    from layout.rectify import _to_mm
    from layout.scale import fit_scale
    from layout.views import find_frame

    record = read(SAMPLES / "umbarrat-041.fragment.json")
    truth = json.loads((SAMPLES / "umbarrat-041.truth.json").read_text(encoding="utf-8"))
    view = record.views[0]
    scale, _ = fit_scale(view, record.photographs[0], record.thickness, 500, np.random.default_rng(0))
    to_mm = _to_mm(scale, find_frame(view, scale))
    lines = {one.id: apply(to_mm, np.array(one.points)) for one in view.rulings}
    for column in truth["views"][0]["columns"]:
        apart = lines[column["right"]][:, 0].mean() - lines[column["left"]][:, 0].mean()
        assert apart == pytest.approx(column["width"], rel=0.02)
    assert read_photograph(SAMPLES / "umbarrat-041.jpg").shape[2] == 3


@pytest.mark.parametrize(
    ("number", "per_mm", "message"),
    [
        (3, 20.0, "a view from 0 to 0, has 3"),
        (0, 0.5, "1 to 200 pixels per mm"),
        (0, 7.77, "in tenths, has 7.77"),
    ],
)
def test_calls_that_cannot_be_answered(number: int, per_mm: float, message: str) -> None:
    record = record_of(Sitting("card"))
    with pytest.raises(CallError, match=message):
        rectify(record, number, np.zeros((*SIZE[::-1], 3), np.uint8), per_mm)


def test_without_a_scale_there_is_no_true_size() -> None:
    record = record_of(Sitting("card"), marks=[])
    with pytest.raises(CallError, match="has no scale"):
        rectify(record, 0, np.zeros((*SIZE[::-1], 3), np.uint8), 10.0)


def test_sixteen_bits_stay_sixteen() -> None:
    record = record_of(Sitting("card"))
    found = rectify(record, 0, np.full((*SIZE[::-1], 3), 40_000, np.uint16), 4.0)
    assert found.pixels.dtype == np.uint16
    assert np.median(found.pixels) == 40_000
    assert cv2.imdecode(np.frombuffer(to_tiff(found), np.uint8), cv2.IMREAD_UNCHANGED).dtype == np.uint16  # type: ignore[union-attr]
