"""The contour of a fragment on a plain ground: half a pixel, and a refusal where nothing can be told."""

from __future__ import annotations

import json
from collections.abc import Callable
from functools import cache
from pathlib import Path

import numpy as np
import pytest
import shapely

from layout.errors import CallError
from layout.image.contour import Contour, find_contour
from layout.image.photograph import Pixels, read_photograph
from layout.image.silhouette.ring import cut_at_corners
from tests.pictures.ground import (
    BLACK,
    BROWN,
    DARK,
    GREY,
    GREY_CLAY,
    PALE,
    WHITE,
    Card,
    Colour,
    Picture,
    Points,
    Setting,
    Thing,
    coverage,
    diagonal,
    distances,
    ellipse,
    evenly,
    layers,
    picture,
    rms_between,
    shifted,
    tablet,
    turned,
)

SAMPLES = Path(__file__).parent.parent / "sample_images"
SIZE = (580, 560)
MIDDLE = (290.0, 255.0)
SHADOW = {"shadow_px": 50.0, "soft_px": 9.0}


def card(x: float, y: float, width: float, height: float, turn_deg: float = 0.0) -> Card:
    """Return a printed card about a place."""
    half = np.array([[-1, -1], [1, -1], [1, 1], [-1, 1]]) * [width / 2, height / 2]
    return Card(shifted(turned(half, turn_deg), x, y))


def fragment(seed: int, colour: Colour = BROWN) -> tuple[Thing, Points]:
    """Return a tablet whose corner is broken off, turned any way, and the two ends of its break."""
    rng = np.random.default_rng(seed)
    ring, ends = diagonal(rng.uniform(270, 310), rng.uniform(300, 340), rng, rng.uniform(0.6, 1.4))
    turn = rng.uniform(0, 360)
    return Thing(turned(ring, turn) + MIDDLE, colour, rng.uniform(15, 50)), turned(ends, turn) + MIDDLE


@cache
def shown(
    seed: int, ground: Colour, colour: Colour, vignetting: float = 0.25, slope: float = 0.08, **more: float
) -> tuple[Picture, Thing, Points]:
    """Return a photograph of a fragment beside a bar, the fragment, and the ends of its break."""
    thing, ends = fragment(seed, colour)
    setting = Setting(ground, vignetting=vignetting, slope=slope, **more)  # type: ignore[arg-type]
    return picture(SIZE, [thing], setting, seed, (card(300, 532, 300, 30, 2),)), thing, ends


@pytest.mark.parametrize(
    ("seed", "ground", "colour", "more"),
    [
        (1, BLACK, BROWN, {}),
        (2, BLACK, DARK, {}),
        (3, BLACK, PALE, {}),
        (4, GREY, BROWN, SHADOW),
        (6, GREY, DARK, SHADOW),
        (8, WHITE, PALE, SHADOW),
        (9, WHITE, GREY_CLAY, SHADOW),
        (10, WHITE, DARK, {"vignetting": 0.5, "slope": 0.15}),
        (11, WHITE, BROWN, {"shadow_px": 90.0, "soft_px": 25.0}),
        (12, BLACK, GREY_CLAY, {"noise": 2.0}),
        (13, GREY, BROWN, {"blur_px": 1.7}),
    ],
)
def test_contours_are_half_a_pixel_right_and_the_uncertainty_says_so(
    seed: int, ground: Colour, colour: Colour, more: dict[str, float]
) -> None:
    pixels, thing, ends = shown(seed, ground, colour, **more)
    contour = find_contour(pixels, MIDDLE)
    there, back = rms_between(contour.points_px, thing.ring)
    assert there <= 0.5
    assert back <= 0.5
    assert 0.3 <= there / contour.sd_px <= 2.5
    check_ring(contour)
    # the ends of the break are cut points, to 1 % of the perimeter
    cuts = np.array([piece[0] for piece in contour.pieces])
    off = np.linalg.norm(cuts[:, None] - ends, axis=2).min(axis=0)
    assert off.max() < 0.01 * shapely.LinearRing(thing.ring).length
    assert 2 <= len(contour.pieces) <= 12


def test_grey_clay_beside_its_shadow_on_grey_is_a_pixel_right() -> None:
    # along a third of this contour neither brightness nor colour differ by a tenth
    pixels, thing, _ = shown(5, GREY, GREY_CLAY, **SHADOW)
    contour = find_contour(pixels, MIDDLE)
    assert max(rms_between(contour.points_px, thing.ring)) <= 1.0
    assert 0.3 <= rms_between(contour.points_px, thing.ring)[0] / contour.sd_px <= 2.5
    check_ring(contour)


def check_ring(contour: Contour) -> None:
    """Assert what holds of every contour."""
    ring = contour.points_px
    steps = np.linalg.norm(np.roll(ring, -1, axis=0) - ring, axis=1)
    assert steps.min() > 1
    assert steps.max() < 3
    assert shapely.LinearRing(ring).is_simple
    x, y = ring.T
    assert np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y) > 0, "clockwise as seen, y down"
    assert np.array_equal(np.vstack(contour.pieces), ring)
    assert 0.85 <= contour.plain <= 1


def test_a_photograph_larger_than_the_coarse_step_is_traced_as_finely() -> None:
    rng = np.random.default_rng(21)
    ring, _ = diagonal(600, 700, rng)
    thing = Thing(shifted(turned(ring, 20), 530, 480), BROWN, 90.0)
    setting = Setting(GREY, shadow_px=100.0, soft_px=18.0, vignetting=0.25)
    contour = find_contour(picture((1100, 950), [thing], setting, 21), (530.0, 480.0))
    assert max(rms_between(contour.points_px, thing.ring)) <= 0.5
    check_ring(contour)


def test_a_smooth_ellipse_is_one_piece() -> None:
    thing = Thing(ellipse((300.4, 250.7), (210.0, 150.0), 25.0), BROWN, 60.0)
    contour = find_contour(picture((600, 500), [thing], Setting(BLACK), 3), (300.0, 250.0))
    assert len(contour.pieces) == 1
    assert max(rms_between(contour.points_px, thing.ring)) <= 0.5


@pytest.mark.parametrize("flatness", [1.0, 1.25, 1.5])
def test_the_swell_of_an_ellipse_is_no_corner(flatness: float) -> None:
    ring, pieces = cut_at_corners(evenly(ellipse((0, 0), (600.0, 600.0 / flatness)), 2.0))
    assert len(pieces) == 1
    assert pieces[0] is ring


def test_a_whole_tablet_is_cut_at_its_four_round_corners() -> None:
    whole = evenly(tablet(800, 1000, np.random.default_rng(4)), 2.0)
    _, pieces = cut_at_corners(whole)
    cuts = np.array([piece[0] for piece in pieces])
    assert len(pieces) == 4
    assert sorted(map(tuple, np.sign(cuts))) == [(-1, -1), (-1, 1), (1, -1), (1, 1)]


def test_every_click_on_the_clay_gives_the_same_contour() -> None:
    pixels, thing, _ = shown(4, GREY, BROWN)
    first = find_contour(pixels, MIDDLE)
    aside = shapely.Polygon(thing.ring).buffer(-25).exterior.coords[0]
    second = find_contour(pixels, (float(aside[0]), float(aside[1])))
    assert np.array_equal(first.points_px, second.points_px)


def test_a_mirrored_photograph_gives_the_mirrored_contour() -> None:
    pixels, _, _ = shown(1, BLACK, BROWN)
    contour = find_contour(pixels, MIDDLE)
    flipped = find_contour(np.ascontiguousarray(pixels[:, ::-1]), (SIZE[0] - 1 - MIDDLE[0], MIDDLE[1]))
    back = flipped.points_px * [-1, 1] + [SIZE[0] - 1, 0]
    assert max(rms_between(back, contour.points_px)) < 0.1
    assert len(flipped.pieces) == len(contour.pieces)


def test_sixteen_bits_give_what_eight_give() -> None:
    pixels, _, _ = shown(1, BLACK, BROWN)
    deep = find_contour(pixels.astype(np.uint16) * 257, MIDDLE)
    assert max(rms_between(deep.points_px, find_contour(pixels, MIDDLE).points_px)) < 0.05


def test_a_picture_pasted_on_a_plate_keeps_its_own_ground() -> None:
    pixels, thing, _ = shown(3, (0.010, 0.010, 0.010), PALE, vignetting=0.0, slope=0.0)
    plate = np.full((760, 860, 3), 3, np.uint8)
    plate[120:680, 200:780] = pixels
    contour = find_contour(plate, (MIDDLE[0] + 200, MIDDLE[1] + 120))
    assert max(rms_between(contour.points_px, shifted(thing.ring, 200, 120))) <= 0.5


def test_edges_agree_with_those_that_a_hand_traced() -> None:
    # the hand wavers by 0.07 mm and points to 1.2 px; its break follows the inscribed face, which is not the silhouette
    record = json.loads((SAMPLES / "umbarrat-107.fragment.json").read_text(encoding="utf-8"))
    contour = find_contour(read_photograph(SAMPLES / "umbarrat-107.jpg"), (1700.0, 2000.0))
    hand = np.hypot(0.07 / 0.0335, 1.2)
    for piece in record["views"][0]["outline"]:
        if piece["edge"] != "break":
            off = distances(np.array(piece["points"]), contour.points_px)
            assert np.sqrt(np.mean(off**2)) < 1.25 * hand


def on_the_ground() -> tuple[Pixels, tuple[float, float]]:
    """A click beside the fragment."""
    return shown(1, BLACK, BROWN)[0], (40.0, 40.0)


def in_the_shadow() -> tuple[Pixels, tuple[float, float]]:
    """A click on the shadow, 20 px beside the clay and away from the lamp."""
    thing = Thing(ellipse(MIDDLE, (150.0, 120.0)), BROWN)
    pixels = picture(SIZE, [thing], Setting(WHITE, towards=(-0.7, 0.0, 0.7), **SHADOW), 1)  # type: ignore[arg-type]
    return pixels, (MIDDLE[0] + 170, MIDDLE[1])


def outside() -> tuple[Pixels, tuple[float, float]]:
    """A click outside the photograph."""
    return shown(1, BLACK, BROWN)[0], (580.0, 20.0)


def over_the_rim() -> tuple[Pixels, tuple[float, float]]:
    """A fragment that runs over the rim."""
    thing = Thing(ellipse((90.0, 300.0), (150.0, 120.0)), BROWN)
    return picture(SIZE, [thing], Setting(GREY), 1), (80.0, 300.0)


def on_wood() -> tuple[Pixels, tuple[float, float]]:
    """A ground with a grain."""
    thing, _ = fragment(1)
    pixels = picture(SIZE, [thing], Setting(GREY, texture=0.25), 1)
    return pixels, MIDDLE


def unseen() -> tuple[Pixels, tuple[float, float]]:
    """Clay as black as the ground."""
    thing, _ = fragment(1, (0.0033, 0.0033, 0.0033))
    return picture(SIZE, [thing], Setting(BLACK), 1), MIDDLE


def in_hard_light() -> tuple[Pixels, tuple[float, float]]:
    """A shadow with a sharp rim all around: it could be blackened clay."""
    return shown(4, GREY, BROWN, shadow_px=60.0, soft_px=1.0)[0], MIDDLE


def all_over() -> tuple[Pixels, tuple[float, float]]:
    """Nothing but spots."""
    rng = np.random.default_rng(2)
    spots = np.where(layers(SIZE, (3.0,), rng) > 0.5, 60, 200).astype(np.uint8)
    return np.repeat(spots[..., None], 3, axis=2), MIDDLE


def blank() -> tuple[Pixels, tuple[float, float]]:
    """A photograph of nothing."""
    return np.full((40, 30, 3), 90, np.uint8), (10.0, 10.0)


def a_speck() -> tuple[Pixels, tuple[float, float]]:
    """A crumb on the ground."""
    thing = Thing(ellipse(MIDDLE, (5.0, 4.0)), PALE, 2.0)
    return picture(SIZE, [thing], Setting(BLACK), 1), MIDDLE


@pytest.mark.parametrize(
    ("case", "message"),
    [
        (on_the_ground, r"at \(40.0, 40.0\) there is ground .* click on the fragment"),
        (in_the_shadow, "there is ground"),
        (outside, r"came \(580.0, 20.0\) on a photograph of 580 x 560 px; click within it"),
        (over_the_rim, "this one runs over the rim of the photograph; trace it by hand"),
        (on_wood, "needs a plain ground, along the rim its texture is"),
        (unseen, "there is ground or nothing that stands out from it"),
        (
            in_hard_light,
            r"stands out from a plain ground all around, here it does so along \d+% of the contour",
        ),
        (all_over, "needs a plain ground"),
        (blank, "there is ground or nothing"),
        (a_speck, "a speck of 1. px"),
    ],
)
def test_what_cannot_be_told_is_refused(
    case: Callable[[], tuple[Pixels, tuple[float, float]]], message: str
) -> None:
    with pytest.raises(CallError, match=message):
        find_contour(*case())


def test_the_renderer_draws_the_silhouette_where_it_says() -> None:
    # the truth of these tests by another way: area and centroid of the light
    rng = np.random.default_rng(6)
    for ring in (
        ellipse((120.3, 99.6), (70.0, 45.0), 30.0),
        shifted(diagonal(110, 130, rng)[0], 115.2, 98.7),
    ):
        cover = coverage((240, 200), ring).astype(float)
        y, x = np.mgrid[:200, :240]
        shape = shapely.Polygon(ring)
        assert abs(cover.sum() - shape.area) < 0.01 * shape.length, (
            "to a hundredth of a pixel along the contour"
        )
        centroid = np.array([(cover * x).sum(), (cover * y).sum()]) / cover.sum()
        assert np.allclose(centroid, [shape.centroid.x, shape.centroid.y], rtol=0, atol=0.01)
