"""The divisions of a bar, found from two rough points on rendered photographs whose truth is a homography."""

from __future__ import annotations

import cv2
import numpy as np
import pytest
from numpy.typing import NDArray

from layout.errors import CallError
from layout.image.ticks import Divisions, find_divisions
from tests.pictures.bars import Bar, Floats, Picture, photograph

RMS_PX = 0.15
"""What is promised of divisions."""

CLEAN = [
    Bar(),
    Bar(px_per_mm=4.0, turn_deg=17),
    Bar(px_per_mm=4.2, length=100, paper=0.1, ink=0.7, noise=0.02),
    Bar(px_per_mm=20, turn_deg=200, slant=(12, -14), tick=0.3),
    Bar(px_per_mm=9, slant=(20, 18), glare=0.4, missing=(7, 23)),
    Bar(px_per_mm=6, turn_deg=91, paper=0.05, ink=0.6, ground=0.7),
    Bar("ticks and inches", px_per_mm=10, turn_deg=-40),
    Bar("ticks and inches", px_per_mm=6, slant=(-12, 10), noise=0.02),
    Bar("fine ticks", px_per_mm=14, length=40, tick=0.13, turn_deg=5),
    Bar("fine ticks", px_per_mm=20, length=30, tick=0.13, slant=(10, 5)),
    Bar("blocks", growth=0.5, turn_deg=20),
    Bar("blocks", px_per_mm=4, length=100, growth=-0.2, slant=(10, 12)),
    Bar("white blocks", ground=0.03, growth=0.3, turn_deg=130),
    Bar("blocks and patches", px_per_mm=12, turn_deg=-5),
    Bar("blocks and patches", growth=0.4, slant=(-10, 8), noise=0.02),
    Bar("halves", px_per_mm=12, length=30, growth=0.25, turn_deg=-75),
]
NAMES = [f"{bar.style}-{bar.px_per_mm:g}-{number}" for number, bar in enumerate(CLEAN)]


def point_roughly(picture: Picture, rng: np.random.Generator) -> Floats:
    """Return two points as a person clicks them: near the ends, up to 2 mm beside, up to 3 degrees off."""
    bar, half = picture.bar, picture.readings()[-1] / 2
    tall = 1.5 if bar.style == "fine ticks" else 2.6 if "ticks" in bar.style else 5.0
    down, turn = rng.uniform(-2, tall + 2), np.tan(np.radians(rng.uniform(-3, 3)))
    ends = half + np.array([-1.0, 1.0]) * (half - picture.step * rng.uniform(-0.3, 0.4, 2))
    return picture.to_px(np.stack([ends, down + (ends - half) * turn], axis=-1))


def find(picture: Picture, points: Floats, step: float | None = None, first: float = 0.0) -> Divisions:
    """Find the divisions between two points."""
    start, end = np.clip(points, 0, np.array(picture.pixels.shape[1::-1]) - 1.0).tolist()
    return find_divisions(picture.pixels, tuple(start), tuple(end), step=step or picture.step, first=first)


def on_bar(picture: Picture, points: Floats) -> Floats:
    """Return points of the photograph in mm along and across the bar."""
    seen = np.column_stack([points, np.ones(len(points))]) @ np.linalg.inv(picture.homography).T
    return np.asarray(seen[:, :2] / seen[:, 2:])


def misses(picture: Picture, found: Divisions) -> tuple[Floats, Floats]:
    """Return how far each mark lies from the nearest division, along the bar in px, and that division, mm."""
    at = np.array([mark.at for mark in found.marks])
    bar, true = on_bar(picture, at), picture.readings()
    nearest = true[np.abs(bar[:, :1] - true).argmin(axis=1)]
    away = at - picture.to_px(np.stack([nearest, bar[:, 1]], axis=-1))
    return np.hypot(*away.T) * np.sign(bar[:, 0] - nearest), nearest


def rms(values: Floats) -> float:
    """Return the root of the mean square."""
    return float(np.sqrt(np.mean(values**2)))


@pytest.mark.parametrize("bar", CLEAN, ids=NAMES)
def test_divisions_are_found_none_lost_none_invented(bar: Bar) -> None:
    picture = photograph(bar)
    for seed in range(3):
        points = point_roughly(picture, np.random.default_rng([seed, 301]))
        found = find(picture, points)
        off, true = misses(picture, found)
        assert rms(off) < RMS_PX
        assert len(set(true)) == len(true), "two marks at one division"
        readings = np.array([mark.mm for mark in found.marks])
        assert np.allclose(readings - readings[0], true - true[0], atol=1e-9), "marks are misread"
        first, last = sorted(on_bar(picture, points)[:, 0])
        between = {mm for mm in picture.readings() if first <= mm <= last}
        assert between <= set(true), "a division is lost"


def test_what_is_said_of_the_uncertainty_holds() -> None:
    ratios = []
    for seed in range(40):
        bar = Bar(px_per_mm=7 + seed % 5, noise=0.03, length=40, turn_deg=9.0 * seed, seed=seed)
        picture = photograph(bar)
        found = find(picture, point_roughly(picture, np.random.default_rng([seed, 302])))
        off, true = misses(picture, found)
        # what a smooth curve through all of them takes up is the scale's and the zero's
        rest = off - np.polyval(np.polyfit(true, off, 2), true)
        ratios.append(rms(rest) / found.marks[0].sd_px)
    assert 0.6 < np.median(ratios) < 1.3


@pytest.mark.parametrize("growth", [-0.3, 0.0, 0.6])
def test_blocks_that_came_out_too_wide_do_not_change_the_scale(growth: float) -> None:
    picture = photograph(Bar("blocks", growth=growth, px_per_mm=10))
    found = find(picture, picture.to_px(np.array([[1.0, 2.0], [49.0, 3.0]])))
    assert found.kind == "blocks"
    # two edges of opposite polarity, each with an error below the promised one
    assert found.spread_px == pytest.approx(growth * 10, abs=2 * RMS_PX)
    assert rms(misses(picture, found)[0]) < RMS_PX


def test_dirt_and_lost_divisions_are_left_out_and_named() -> None:
    picture = photograph(Bar(px_per_mm=9, dirt=12, missing=(11, 12, 30), seed=4))
    found = find(picture, picture.to_px(np.array([[0.4, 1.0], [49.7, 1.4]])))
    off, _ = misses(picture, found)
    assert np.median(np.abs(off)) < RMS_PX
    assert {11.0, 12.0, 30.0} <= set(found.missing)
    assert len(found.marks) + len(found.missing) == 51


def test_figures_across_the_ticks_do_no_harm() -> None:
    picture = photograph(Bar(px_per_mm=12, across=True, length=60, turn_deg=8))
    found = find(picture, picture.to_px(np.array([[0.2, 0.8], [59.6, 1.2]])))
    assert len(found.marks) == 61
    assert rms(misses(picture, found)[0]) < RMS_PX


def test_coloured_patches_are_not_taken_for_centimetres() -> None:
    picture = photograph(Bar("blocks and patches", px_per_mm=10))
    found = find(picture, picture.to_px(np.array([[1.0, 6.5], [49.0, 6.8]])))
    assert found.pitch_px == pytest.approx(100.0, rel=2e-3)


def test_inches_are_not_read_as_millimetres() -> None:
    picture = photograph(Bar("ticks and inches", px_per_mm=10, length=80))
    along_the_inches = picture.to_px(np.array([[1.0, 13.0], [78.0, 12.8]]))
    with pytest.raises(CallError, match="inch"):
        find(picture, along_the_inches)
    assert find(picture, along_the_inches, step=25.4 / 16).pitch_px == pytest.approx(15.875, rel=1e-3)


def test_longer_ticks_are_centimetres_where_these_are_asked_for() -> None:
    picture = photograph(Bar(px_per_mm=8, length=80))
    found = find(picture, picture.to_px(np.array([[0.4, 1.0], [79.9, 1.0]])), step=10.0)
    assert [mark.mm for mark in found.marks] == [10.0 * n for n in range(9)]
    assert found.pitch_px == pytest.approx(80.0, rel=1e-3)


def test_readings_start_where_they_are_told_and_run_with_the_points() -> None:
    picture = photograph(Bar())
    found = find(picture, picture.to_px(np.array([[40.2, 1.0], [9.8, 1.0]])), first=40.0)
    assert [mark.mm for mark in found.marks] == [40.0 + n for n in range(31)]
    assert found.marks[0].at[0] > found.marks[-1].at[0]


def textures() -> list[NDArray[np.uint8]]:
    """Return pictures without a scale: noise of several grain sizes."""
    rng = np.random.default_rng(303)
    pictures = []
    for grain in (0.0, 1.0, 2.0, 4.0, 8.0) * 12:
        field = rng.normal(0, 1, (300, 500))
        if grain:
            field = np.asarray(cv2.GaussianBlur(field, (0, 0), grain))
        grey = (field / field.std() * 40 + 128).clip(0, 255).astype(np.uint8)
        pictures.append(np.repeat(grey[..., None], 3, axis=2))
    return pictures


def test_nothing_is_invented_where_there_is_no_scale() -> None:
    rng = np.random.default_rng(304)
    for picture in textures():
        middle, turn = np.array([250.0, 150.0]), rng.uniform(0, np.pi)
        away = rng.uniform(60, 140) * np.array([np.cos(turn), np.sin(turn)])
        start, end = (middle - away).tolist(), (middle + away).tolist()
        with pytest.raises(CallError, match="no regular divisions"):
            find_divisions(picture, tuple(start), tuple(end))


def test_plain_ground_has_no_divisions() -> None:
    plain = np.full((200, 300, 3), 90, np.uint8)
    with pytest.raises(CallError, match="no regular divisions"):
        find_divisions(plain, (10.0, 100.0), (290.0, 100.0))


@pytest.mark.parametrize(
    ("start", "end", "step", "message"),
    [
        ((-9.0, 4.0), (50.0, 4.0), 1.0, "lies outside the photograph"),
        ((10.0, 40.0), (18.0, 40.0), 1.0, "20 px apart or more, has 8.0 px"),
        ((10.0, 40.0), (99.0, 40.0), 0.0, "a step above 0 mm, has 0"),
    ],
)
def test_calls_that_cannot_be_answered(
    start: tuple[float, float], end: tuple[float, float], step: float, message: str
) -> None:
    with pytest.raises(CallError, match=message):
        find_divisions(np.zeros((90, 120, 3), np.uint8), start, end, step=step)
