"""Faces on a plate told apart, and silhouettes of one fragment laid on each other."""

from __future__ import annotations

import json
import math
from pathlib import Path

import numpy as np
import pytest
import shapely

from layout.errors import CallError
from layout.image.contour import Contour
from layout.image.faces import FoundFace, find_faces, match_silhouettes
from layout.image.photograph import Pixels, read_photograph
from tests.pictures.ground import (
    BLACK,
    BROWN,
    DARK,
    GREY,
    PALE,
    WHITE,
    Card,
    Colour,
    Picture,
    Points,
    Setting,
    Thing,
    clockwise,
    diagonal,
    evenly,
    layers,
    picture,
    rms_between,
    shifted,
    tablet,
    turned,
)
from tests.test_contour import card

SAMPLES = Path(__file__).parent.parent / "sample_images"


def as_contour(ring: Points) -> Contour:
    """Return a ring as a contour of one piece."""
    return Contour(ring, 0.1, (ring,), 1.0)


def three_faces(colour: Colour = BROWN) -> list[Thing]:
    """Return an obverse, its reverse below, and an edge at the right, not in this order of size."""
    ring, _ = diagonal(260, 300, np.random.default_rng(31))
    reverse = clockwise(ring * [1, -1])
    edge = tablet(70, 290, np.random.default_rng(32), corner=0.3)
    return [
        Thing(shifted(edge, 470, 200), colour, 25.0),
        Thing(shifted(ring, 230, 200), colour, 40.0),
        Thing(shifted(reverse * 0.9, 230, 620), colour, 36.0),
    ]


def check_regions(faces: list[FoundFace], pixels: Pixels, others: list[Points]) -> None:
    """Assert that every region holds its face with room, and nothing of another face or card."""
    for face in faces:
        x, y, width, height = face.region
        assert all(isinstance(side, int) for side in face.region)
        assert x >= 0
        assert y >= 0
        assert x + width <= pixels.shape[1]
        assert y + height <= pixels.shape[0]
        inside = shapely.box(x, y, x + width - 1, y + height - 1)
        assert inside.buffer(-2).contains(shapely.Polygon(face.contour.points_px))
        rest = [other.contour.points_px for other in faces if other is not face] + others
        assert not any(inside.intersects(shapely.Polygon(ring)) for ring in rest)


@pytest.mark.parametrize(("ground", "colour", "shadow_px"), [(GREY, DARK, 30.0), (WHITE, PALE, 0.0)])
def test_faces_are_told_apart_and_cards_are_none(ground: Colour, colour: Colour, shadow_px: float) -> None:
    things = three_faces(colour)
    cards = (
        card(230, 400, 220, 30, 0.5),
        card(490, 560, 150, 110, 4),
        Card(card(480, 700, 130, 60).corners, 6),
    )
    pixels = picture((600, 800), things, Setting(ground, shadow_px=shadow_px, vignetting=0.15), 5, cards)
    faces = find_faces(pixels)
    areas = [shapely.Polygon(face.contour.points_px).area for face in faces]
    assert areas == sorted(areas, reverse=True)
    truths = sorted((thing.ring for thing in things), key=lambda ring: -shapely.Polygon(ring).area)
    assert len(faces) == 3
    for face, truth in zip(faces, truths, strict=True):
        assert max(rms_between(face.contour.points_px, truth)) <= 0.5
    check_regions(faces, pixels, [one.corners for one in cards])


def pasted(ratio: float, turn_deg: float) -> tuple[Picture, list[Points]]:
    """Return a plate put together from two pictures, and the two silhouettes on it.

    The pictures have grounds of their own; the reverse was resized and turned before it was pasted.
    """
    ring, _ = diagonal(300, 340, np.random.default_rng(41))
    reverse = turned(clockwise(ring * [1, -1]) / ratio, turn_deg)
    plate = np.full((1010, 560, 3), 2, np.uint8)
    rings = []
    for silhouette, ground, top in (ring, 0.004, 20), (reverse, 0.010, 520):
        thing = Thing(shifted(silhouette, 250, 235), BROWN, 40.0)
        seen = picture((500, 470), [thing], Setting((ground,) * 3, vignetting=0.0), top)
        plate[top : top + 470, 30:530] = seen
        rings.append(shifted(thing.ring, 30, top))
    return plate, rings


def test_a_plate_put_together_from_pictures_shows_its_faces_and_their_scales() -> None:
    plate, rings = pasted(1.15, 9.0)
    faces = find_faces(plate)
    assert len(faces) == 2
    for face, ring in zip(faces, rings, strict=True):
        assert max(rms_between(face.contour.points_px, ring)) <= 0.5
    check_regions(faces, plate, [])
    match = match_silhouettes(faces[0].contour, faces[1].contour)
    assert match.mirrored
    assert abs(match.ratio - 1.15) < 3 * match.ratio_sd
    assert match.ratio_sd < 0.002
    assert match.rms_px < 1


def test_the_six_faces_of_the_sample_plate_are_found_and_its_bars_are_none() -> None:
    record = json.loads((SAMPLES / "umbarrat-212.fragment.json").read_text(encoding="utf-8"))
    pixels = read_photograph(SAMPLES / "umbarrat-212.jpg")
    faces = find_faces(pixels)
    assert len(faces) == 6
    bars = [np.array([mark["at"] for mark in view["scale"]["marks"]]) for view in record["views"]]
    for view in record["views"]:
        outline = np.vstack([piece["points"] for piece in view["outline"]])
        middle = outline.mean(axis=0)
        holding = [
            face for face in faces if shapely.Polygon(face.contour.points_px).contains(shapely.Point(middle))
        ]
        assert len(holding) == 1
        x, y, width, height = holding[0].region
        assert ((outline >= [x, y]) & (outline <= [x + width, y + height])).all()
        for bar in bars:
            assert not ((bar >= [x, y]) & (bar <= [x + width, y + height])).all(axis=1).any()
    check_regions(faces, pixels, [])


def wavering(ring: Points, rms_px: float, over_px: float, rng: np.random.Generator) -> Points:
    """Return a ring whose points stray across it, correlated over a length."""
    count = len(ring)
    length = float(np.linalg.norm(np.roll(ring, -1, axis=0) - ring, axis=1).sum())
    share = np.exp(-0.5 * (np.arange(count // 2 + 1) * over_px / length) ** 2)
    waves = share * (rng.normal(size=len(share)) + 1j * rng.normal(size=len(share)))
    waves[0] = math.sqrt(2) * waves[0].real
    stray = (
        np.fft.irfft(waves, count)
        * count
        * rms_px
        / math.sqrt(2 * share[0] ** 2 + 4 * np.sum(share[1:] ** 2))
    )
    along = np.roll(ring, -1, axis=0) - np.roll(ring, 1, axis=0)
    normals = np.column_stack([-along[:, 1], along[:, 0]]) / np.linalg.norm(along, axis=1, keepdims=True)
    return np.asarray(ring + stray[:, None] * normals)


def test_the_ratio_of_scales_lies_within_its_uncertainty() -> None:
    z = []
    for seed in range(10):
        rng = np.random.default_rng(seed)
        ring = evenly(diagonal(400, 480, rng)[0], 2.0)
        ratio, turn, mirrored = rng.uniform(0.6, 1.6), rng.uniform(-180, 180), seed % 3 > 0
        second = turned(ring, -turn) / ratio
        second = (second * [-1, 1])[::-1] if mirrored else second
        second = np.roll(second + rng.uniform(0, 500, 2), rng.integers(len(second)), axis=0)
        over = rng.uniform(10, 80)
        match = match_silhouettes(
            as_contour(evenly(wavering(ring, 1.0, over, rng), 2.0)),
            as_contour(evenly(wavering(second, 1.0 / ratio, over, rng), 2.0)),
        )
        assert match.mirrored == mirrored
        assert abs((match.turn_deg - turn + 180) % 360 - 180) < 0.5
        z.append((match.ratio - ratio) / match.ratio_sd)
    # 99 % of samples of 10 standard normal numbers have an RMS within these
    assert 0.46 < np.sqrt(np.mean(np.square(z))) < 1.59
    assert np.max(np.abs(z)) < 3.5


def test_mirroring_up_to_down_is_mirroring_left_to_right_and_half_a_turn() -> None:
    ring = evenly(diagonal(400, 480, np.random.default_rng(7))[0], 2.0)
    match = match_silhouettes(as_contour(ring), as_contour(clockwise(ring * [1, -1])))
    assert match.mirrored
    assert abs(abs(match.turn_deg) - 180) < 0.01
    assert abs(match.ratio - 1) < 1e-3
    assert match.rms_px < 0.1


def test_silhouettes_of_two_fragments_do_not_match() -> None:
    first = evenly(diagonal(400, 480, np.random.default_rng(7))[0], 2.0)
    second = evenly(tablet(100, 500, np.random.default_rng(8)), 2.0)
    with pytest.raises(CallError, match=r"needs two silhouettes of one fragment, these differ by .* px"):
        match_silhouettes(as_contour(first), as_contour(second))


def test_a_plate_without_clay_is_refused() -> None:
    pixels = picture((500, 400), [], Setting(BLACK), 1, (card(250, 200, 300, 40),))
    with pytest.raises(CallError, match="faces need clay that stands out from a plain ground, nothing"):
        find_faces(pixels)


def test_a_plate_on_a_rough_ground_is_refused() -> None:
    spots = np.where(layers((300, 300), (3.0,), np.random.default_rng(2)) > 0.5, 60, 200).astype(np.uint8)
    with pytest.raises(CallError, match="needs a plain ground, along the rim its texture is"):
        find_faces(np.repeat(spots[..., None], 3, axis=2))
