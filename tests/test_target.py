"""The scale card as it is drawn, and as it is found in photographs of known truth."""

from __future__ import annotations

import functools
import re
from collections.abc import Sequence
from typing import Any

import cv2
import numpy as np
import pytest
from numpy.typing import NDArray

from layout.errors import CallError
from layout.image.card import CARD, CARD_AT, HEIGHT, MARKER, POINTS_PER_MM, WIDTH, card_pdf, draw_card
from layout.image.target import FoundMark, find_card
from tests.pictures.card import DOTS, Floats, Pinhole, Plane, Print, facing, photograph, printed_card

SIZE = (1000, 620)
MIDDLE = (WIDTH / 2, HEIGHT / 2)


@functools.cache
def card(gain_dots: int = 0) -> Plane:
    """Return the printed card, whose ink ran so many dots."""
    return printed_card(draw_card(), gain_dots)


def seen(
    how: Print, tilts_deg: tuple[float, float, float] = (0.0, 0.0, 0.0), px_per_mm: float = 5.5, seed: int = 0
) -> tuple[NDArray[np.uint8], Pinhole]:
    """Photograph the card."""
    camera = facing(SIZE, MIDDLE, px_per_mm, tilts_deg=tilts_deg)
    return photograph(card(how.gain_dots), (0.0, 0.0), camera, SIZE, how, seed), camera


def errors_of(marks: Sequence[FoundMark], camera: Pinhole) -> Floats:
    """Return how far the found corners are from the true ones, px, shape (N, 2)."""
    return np.array([mark.at_px for mark in marks]) - camera.see(np.array([mark.mm for mark in marks]))


def root_mean_square(values: Floats) -> float:
    """Return the root of the mean square."""
    return float(np.sqrt(np.mean(np.square(values))))


def blocks_of_svg() -> set[tuple[float, ...]]:
    """Return the filled rectangles of the SVG, mm."""
    found = re.findall(r"M(\S+) (\S+)h(\S+?)v(\S+?)h\S+?z", draw_card())
    return {tuple(round(float(value), 3) for value in box) for box in found}


def blocks_of_pdf() -> set[tuple[float, ...]]:
    """Return the filled rectangles of the PDF, in mm of the card."""
    boxes = np.array(re.findall(rb"(\S+) (\S+) (\S+) (\S+) re", card_pdf()), float) / POINTS_PER_MM
    x, y, width, height = boxes.T
    top = 297.0 - y - height
    placed = np.column_stack([x - CARD_AT[0], top - CARD_AT[1], width, height])
    return {tuple(round(float(value), 3) + 0.0 for value in box) for box in placed}


# ---------------------------------------------------------------- the drawing


def test_the_svg_is_true_to_scale() -> None:
    svg = draw_card()
    assert f'width="{WIDTH:g}mm" height="{HEIGHT:g}mm" viewBox="0 0 {WIDTH:g} {HEIGHT:g}"' in svg
    # the check line, and the two strokes between whose middles it is 100 mm long
    lines = [tuple(map(float, ends)) for ends in re.findall(r"M(\S+) (\S+)L(\S+) ([^\s\"]+)", svg)]
    (check,) = [(x1, x2) for x1, y1, x2, y2 in lines if y1 == y2 and abs(x2 - x1) == 100.0]
    assert {x1 for x1, y1, x2, y2 in lines if x1 == x2 and round(abs(y2 - y1), 3) == 4.8} == set(check)


def test_the_rule_has_a_division_at_every_millimetre() -> None:
    ticks = sorted((x + w / 2, h) for x, y, w, h in blocks_of_svg() if y == 0)
    assert [round(x - ticks[0][0], 6) for x, _ in ticks] == list(range(101))
    assert all((h == 5.0) == (mm % 10 == 0) for mm, (_, h) in enumerate(ticks))
    figures = re.findall(r'<text x="(\S+)" y="8" font-size="(\S+)">(\d+)</text>', draw_card())
    assert [int(text) for _, _, text in figures] == list(range(0, 101, 10))
    for x, size, text in figures:
        middle = float(x) + len(text) * 0.556 * float(size) / 2
        assert middle == pytest.approx(ticks[int(text)][0], abs=1e-3)


def test_svg_and_pdf_show_the_same() -> None:
    assert len(blocks_of_svg()) > 140
    # PDF is written to 1e-4 points; a box is as good as its rounding to a micrometre
    apart = np.abs(np.array(sorted(blocks_of_svg())) - np.array(sorted(blocks_of_pdf())))
    assert apart.max() < 2e-3
    pdf = card_pdf().decode("cp1252")
    for text in re.findall(r"<text [^>]*>([^<]*)</text>", draw_card()):
        assert f"({text})" in pdf


def test_both_forms_say_how_to_check_the_print_and_never_to_touch_the_clay() -> None:
    for text in (draw_card(), card_pdf().decode("cp1252")):
        assert "Never lay it on the clay. Never touch the object with it." in text
        assert "It stands beside the object, level with the inscribed face." in text
        assert "conservators and their rules decide." in text
        assert "this line 100.0 mm, the card 60.0 mm high, each within 0.3 mm." in text


def test_both_forms_are_the_same_each_time() -> None:
    assert draw_card() == draw_card()
    assert card_pdf() == card_pdf()


def test_the_pdf_is_sound() -> None:
    pdf = card_pdf()
    assert pdf.startswith(b"%PDF-1.6\n")
    assert pdf.endswith(b"%%EOF\n")
    start = int(pdf.rsplit(b"startxref\n", 1)[1].split()[0])
    assert pdf[start : start + 5] == b"xref\n"
    for number, place in enumerate(re.findall(rb"(\d{10}) 00000 n ", pdf), start=1):
        assert pdf[int(place) :].startswith(b"%d 0 obj\n" % number)
    length = int(re.findall(rb"/Length (\d+)", pdf)[0])
    assert pdf.split(b"stream\n", 1)[1].split(b"\nendstream", 1)[0] == pdf.split(b"stream\n", 1)[1][:length]
    # A4; and the viewer is asked not to fit it to the paper
    box = re.findall(rb"/MediaBox \[0 0 (\S+) (\S+)\]", pdf)[0]
    np.testing.assert_allclose(np.array(box, float) * 25.4 / 72, (210, 297), atol=1e-3)
    assert b"/PrintScaling /None" in pdf


def test_the_markers_are_those_of_the_table() -> None:
    picture = (card() > 0.4).astype(np.uint8) * 255
    family = cv2.aruco.getPredefinedDictionary(cv2.aruco.DICT_APRILTAG_36h11)
    corners, numbers, _ = cv2.aruco.ArucoDetector(family).detectMarkers(picture)
    assert sorted(np.ravel(numbers)) == sorted(CARD)
    for number, quad in zip(np.ravel(numbers), corners, strict=True):
        # OpenCV gives the outermost black dots, to a dot or two
        np.testing.assert_allclose((quad[0] + 0.5) / DOTS, CARD[int(number)], atol=2.5 / DOTS)
        np.testing.assert_allclose(np.ptp(CARD[int(number)], axis=0), MARKER)


# ---------------------------------------------------------------- finding it


def hard_cases() -> list[tuple[Print, tuple[float, float, float], float]]:
    """Return photographs of all kinds: tilted up to 30 degrees, blurred, noisy, flooded, unevenly lit."""
    rng = np.random.default_rng(8)
    cases = []
    for _ in range(8):
        direction, tilt = rng.uniform(0, 2 * np.pi), rng.uniform(5, 30)
        how = Print(
            gain_dots=int(rng.integers(-1, 2)),
            blur_px=rng.uniform(0.5, 1.6),
            halation=rng.uniform(0, 0.2),
            slope=rng.uniform(0, 0.6),
            noise=rng.uniform(0.005, 0.03),
            exposure=rng.uniform(0.5, 1.2),
        )
        turn = rng.uniform(-15, 15) + 180 * rng.integers(0, 2)
        about = (float(tilt * np.cos(direction)), float(tilt * np.sin(direction)), float(turn))
        cases.append((how, about, rng.uniform(3.2, 5.2)))
    return cases


def test_corners_are_found_to_a_fraction_of_a_pixel_and_know_how_well() -> None:
    errors, z = [], []
    for seed, (how, tilts, px_per_mm) in enumerate(hard_cases()):
        picture: Any
        picture, camera = seen(how, tilts, px_per_mm, seed)
        if seed % 2:
            picture = cv2.imdecode(cv2.imencode(".jpg", picture, [cv2.IMWRITE_JPEG_QUALITY, 90])[1], 1)
        marks = find_card(picture)
        assert len(marks) == 16
        assert [mark.marker for mark in marks] == sorted(4 * [*CARD])
        found = errors_of(marks, camera)
        errors.append(found)
        z.append(found / np.array([mark.sd_px for mark in marks])[:, None])
    # what was asked for is 0.15 px
    assert root_mean_square(np.vstack(errors)) < 0.15
    assert root_mean_square(np.vstack(z)) < 1.2
    assert (np.abs(np.vstack(z)) < 2).mean() > 0.92


@pytest.mark.parametrize("gain_dots", [-1, 1])
def test_ink_that_ran_does_not_move_the_corners(gain_dots: int) -> None:
    how = Print(gain_dots=gain_dots, halation=0.1, noise=0.01)
    picture, camera = seen(how, (0.0, 0.0, 4.0))
    error = errors_of(find_card(picture), camera).reshape(4, 4, 2)
    true = camera.see(np.array([CARD[number] for number in sorted(CARD)]))
    out = true - true.mean(axis=1, keepdims=True)
    outward = (error * out).sum(axis=-1) / np.linalg.norm(out, axis=-1)
    # the edges themselves stand 0.05 mm, a quarter of a pixel, further out or in
    edges_px = abs(gain_dots) / DOTS * 5.5
    assert abs(outward.mean()) < edges_px / 10


def test_a_photograph_of_16_bits_gives_the_same() -> None:
    picture, _ = seen(Print(noise=0.01))
    deep = picture.astype(np.uint16) * np.uint16(257)
    for one, other in zip(find_card(picture), find_card(deep), strict=True):
        assert one.at_px == pytest.approx(other.at_px, abs=1e-3)


def test_a_turned_photograph_gives_the_same_corners() -> None:
    picture, _ = seen(Print(noise=0.01), (12.0, -8.0, 3.0))
    turned = np.ascontiguousarray(np.rot90(picture))
    for one, other in zip(find_card(picture), find_card(turned), strict=True):
        assert (one.mm, one.marker) == (other.mm, other.marker)
        # a quarter turn to the left: x becomes the row, counted from below
        assert other.at_px == pytest.approx((one.at_px[1], SIZE[0] - 1 - one.at_px[0]), abs=0.02)


def test_a_large_photograph_is_measured_at_its_own_resolution() -> None:
    picture, camera = seen(Print(blur_px=1.0, noise=0.01), (10.0, 10.0, 0.0))
    large: Any = cv2.resize(picture, None, fx=5, fy=5, interpolation=cv2.INTER_CUBIC)
    marks = find_card(large)
    assert len(marks) == 16
    at = (np.array([mark.at_px for mark in marks]) + 0.5) / 5 - 0.5
    assert root_mean_square(at - camera.see(np.array([mark.mm for mark in marks]))) < 0.05


def test_one_marker_is_enough() -> None:
    picture, camera = seen(Print(noise=0.01))
    keep = camera.see(np.array([[-2.0, -2.0], [21.0, 21.0]]))
    left, top, right, bottom = np.round(keep).astype(int).ravel()
    hidden = np.full_like(picture, 90)
    hidden[top:bottom, left:right] = picture[top:bottom, left:right]
    marks = find_card(hidden)
    assert [mark.marker for mark in marks] == [227] * 4
    assert root_mean_square(errors_of(marks, camera)) < 0.15
    np.testing.assert_allclose([mark.mm for mark in marks], CARD[227])


def test_a_marker_at_the_rim_is_left_out() -> None:
    picture, camera = seen(Print(noise=0.01))
    cut = int(camera.see(np.array([4.5, 10.0]))[0])
    assert {mark.marker for mark in find_card(np.ascontiguousarray(picture[:, cut:]))} == {289, 487}


def test_what_a_ruler_says_of_the_print_is_believed() -> None:
    picture, _ = seen(Print(noise=0.01))
    plain, stretched = find_card(picture), find_card(picture, printed_mm=(99.0, 60.6))
    for one, other in zip(plain, stretched, strict=True):
        assert other.at_px == one.at_px
        assert other.mm == pytest.approx((one.mm[0] * 0.99, one.mm[1] * 1.01))


@pytest.mark.parametrize("printed_mm", [(100.0, 0.0), (96.0, 60.0), (float("nan"), 60.0)])
def test_a_print_that_cannot_be_of_this_card_is_refused(printed_mm: tuple[float, float]) -> None:
    with pytest.raises(CallError, match=r"needs a check line of about 100 mm.*print the card again at 100 %"):
        find_card(np.zeros((10, 10, 3), np.uint8), printed_mm=printed_mm)


def test_two_cards_are_refused() -> None:
    picture, _ = seen(Print(noise=0.01))
    with pytest.raises(CallError, match=r"shows the marker \d+ twice; keep one scale card"):
        find_card(np.vstack([picture, picture]))


def test_markers_of_two_cards_are_refused() -> None:
    picture, _ = seen(Print(noise=0.01))
    half = SIZE[0] // 2
    apart = np.hstack([picture[:, :half], np.full((SIZE[1], 300, 3), 110, np.uint8), picture[:, half:]])
    with pytest.raises(CallError, match="markers of more than one scale card, or a bent one"):
        find_card(apart)


def test_without_a_card_nothing_is_invented() -> None:
    rng = np.random.default_rng(4)
    noise = rng.integers(0, 256, (600, 800, 3)).astype(np.uint8)
    coarse = cv2.resize(rng.integers(0, 2, (60, 80)).astype(np.uint8) * 255, (800, 600), interpolation=0)
    squares = (np.indices((600, 800)) // 40).sum(axis=0) % 2 * 255
    for picture in (noise, coarse, squares, np.zeros((600, 800))):
        three = picture if picture.ndim == 3 else np.repeat(picture[..., None], 3, axis=2)
        assert find_card(three.astype(np.uint8)) == []
    assert find_card(np.full((1, 1, 3), 7, np.uint8)) == []


def test_other_markers_are_ignored() -> None:
    sheet = np.full((700, 900), 255, np.uint8)
    families = (cv2.aruco.DICT_APRILTAG_36h11, cv2.aruco.DICT_4X4_50, cv2.aruco.DICT_6X6_250)
    for row, family in enumerate(families):
        for column, number in enumerate((0, 3, 27, 41)):
            marker = cv2.aruco.generateImageMarker(cv2.aruco.getPredefinedDictionary(family), number, 160)
            sheet[50 + 210 * row :][:160, 50 + 210 * column :][:, :160] = marker
    assert find_card(np.repeat(sheet[..., None], 3, axis=2)) == []


def test_a_mirrored_photograph_shows_no_card() -> None:
    picture, _ = seen(Print(noise=0.01))
    assert find_card(np.ascontiguousarray(picture[:, ::-1])) == []


@pytest.mark.parametrize(("px_per_mm", "blur_px"), [(1.2, 0.7), (4.0, 6.0)])
def test_a_card_too_small_or_too_blurred_is_not_guessed_at(px_per_mm: float, blur_px: float) -> None:
    picture, _ = seen(Print(blur_px=blur_px, noise=0.01), px_per_mm=px_per_mm)
    assert find_card(picture) == []
