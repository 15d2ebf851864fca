"""Grooves drawn on rendered clay, whose true courses are known, at all lights; and clay without any."""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest
from numpy.typing import NDArray

from layout.errors import CallError
from layout.image.groove.strip import lay_strip
from layout.image.grooves import draw_to_groove
from layout.image.photograph import Pixels
from tests.pictures.clay import SECTIONS, Lamp, Points, Ruling, Section, Wedge, hand_drawn, photograph

LENGTH = 700


def run_of(width: float, rng: np.random.Generator) -> Points:
    """Return the true course of a groove across a picture of 700 x 160."""
    aslant = rng.uniform(-7, 7)
    return hand_drawn((-5, 80 - aslant), (LENGTH + 5, 80 + aslant), rng, stray=2, over=max(120, 6 * width))


def signs(width: float, rng: np.random.Generator) -> list[Wedge]:
    """Return a few signs that cross the groove or stand beside it."""
    size = max(width, 10)
    many = int(np.clip(LENGTH / (6 * width), 2, 6))
    return [
        Wedge(
            (rng.uniform(0, LENGTH), 80 + size * rng.uniform(-1.5, 1)),
            size * rng.uniform(0.8, 1.6),
            size * rng.uniform(2, 5),
            rng.uniform(60, 110),
        )
        for _ in range(many)
    ]


def traced(line: Points, rng: np.random.Generator, pointing: float = 2.0) -> Points:
    """Return a tracing of a true course by an unsteady hand: a point every 100 px."""
    points = line[20:-20:100]
    return points + rng.normal(0, pointing, points.shape)


def single(
    width: float, lamp: Lamp, rng: np.random.Generator, section: Section = "round"
) -> tuple[Pixels, Points]:
    """Return the picture of one groove, crossed by signs, and its course."""
    line = run_of(width, rng)
    ruling = Ruling(line, width, rng.uniform(0.4, 0.8) * width / 2, section, lips=rng.choice([0, 0.1]))
    return photograph((160, LENGTH), [ruling], lamp, rng, wedges=signs(width, rng)), line


def beside(points: Points, line: Points) -> NDArray[np.float64]:
    """Return how far points lie beside a dense line."""
    nearest = ((points[:, None] - line) ** 2).sum(axis=-1).argmin(axis=1).clip(1, len(line) - 2)
    along = line[nearest + 1] - line[nearest - 1]
    away = points - line[nearest]
    return np.asarray((away[:, 1] * along[:, 0] - away[:, 0] * along[:, 1]) / np.hypot(*along.T))


def rms(values: NDArray[np.float64]) -> float:
    return float(np.sqrt(np.mean(values**2)))


# degrees off the groove's own direction (its sign: from which side), and above the face
LIGHTS = ((25, 15), (-25, 35), (-45, 20), (45, 60), (70, 35), (-90, 15), (90, 60))


@pytest.mark.parametrize(("width", "light"), list(product((4, 8, 18, 40), LIGHTS)))
def test_the_centre_is_found_to_half_a_pixel_at_every_light(width: int, light: tuple[int, int]) -> None:
    off, elevation = light
    rng = np.random.default_rng([width, off + 90, elevation])
    section = SECTIONS[int(rng.integers(3))]
    pixels, line = single(width, Lamp(off, elevation), rng, section)
    groove = draw_to_groove(pixels, traced(line, rng), within_px=15)
    assert groove.found
    assert groove.seen > 0.8
    assert rms(beside(groove.points_px, line)) < 0.5


def test_where_the_bright_flank_fades_the_uncertainty_says_so() -> None:
    # at 25 degrees off and 55 above the face flanks of middling slope return the light of the level face
    ratios, within = [], 0
    for seed in range(12):
        rng = np.random.default_rng([25, 55, seed])
        pixels, line = single(rng.choice([6.0, 12.0, 25.0]), Lamp(25, 55), rng, SECTIONS[seed % 3])
        groove = draw_to_groove(pixels, traced(line, rng), within_px=15)
        off = rms(beside(groove.points_px, line))
        assert groove.sd_px is not None
        ratios.append(off / groove.sd_px)
        within += off < 0.5
    assert within >= 9
    assert max(ratios) < 3


def test_the_uncertainty_is_that_of_any_one_place() -> None:
    ratios = []
    for seed in range(16):
        rng = np.random.default_rng([7, seed])
        lamp = Lamp(rng.choice([-1, 1]) * rng.uniform(30, 90), rng.uniform(20, 45))
        pixels, line = single(rng.uniform(5, 25), lamp, rng, SECTIONS[seed % 3])
        groove = draw_to_groove(pixels, traced(line, rng), within_px=15)
        assert groove.sd_px is not None
        assert groove.scatter_px is not None
        ratios += list(beside(groove.points_px[20::40], line) / groove.sd_px)
    assert 0.4 < rms(np.array(ratios)) < 1.3
    assert np.mean(np.abs(ratios) < 2) > 0.9


def test_a_shadow_does_not_pull_the_centre() -> None:
    # the same groove under a low lamp from either side: its shadow fills one half of it, then the other
    rng = np.random.default_rng(3)
    line = run_of(20, rng)
    trace = traced(line, rng)
    centres = []
    for off in (-80, 80):
        ruling = Ruling(line, 20, 7, "vee")
        pixels = photograph((160, LENGTH), [ruling], Lamp(off, 18), np.random.default_rng(4))
        centres.append(beside(draw_to_groove(pixels, trace, within_px=15).points_px, line).mean())
    assert max(np.abs(centres)) < 0.5
    assert abs(centres[0] - centres[1]) < 0.5


def pair(
    width: float, gap: float, lamp: Lamp, rng: np.random.Generator, section: Section
) -> tuple[Pixels, Points, list[Points]]:
    """Return the picture of two grooves side by side, the middle between them, and both."""
    middle = run_of(width, rng)
    both = [middle + np.array([0, side * gap / 2]) for side in (-1, 1)]
    rulings = [Ruling(line, width, 0.3 * width, section) for line in both]
    return photograph((160, LENGTH), rulings, lamp, rng, wedges=signs(width, rng)), middle, both


@pytest.mark.parametrize(("width", "gap", "off"), [(5, 9, 60), (8, 12, -35), (12, 30, 90), (20, 40, -60)])
def test_a_double_ruling_is_drawn_midway(width: float, gap: float, off: float) -> None:
    rng = np.random.default_rng([int(width), int(gap)])
    pixels, middle, _ = pair(width, gap, Lamp(off, 30), rng, SECTIONS[int(width) % 3])
    groove = draw_to_groove(pixels, traced(middle, rng), within_px=12, kind="double")
    assert groove.found
    assert rms(beside(groove.points_px, middle)) < 0.5


def test_one_groove_is_no_double_ruling() -> None:
    found = 0
    for seed in range(8):
        rng = np.random.default_rng([2, seed])
        pixels, line = single(rng.uniform(6, 20), Lamp(rng.uniform(30, 90), 35), rng, SECTIONS[seed % 3])
        found += draw_to_groove(pixels, traced(line, rng), within_px=12, kind="double").found
    assert found <= 1


@pytest.mark.parametrize(("width", "gap", "off"), [(5, 9, 60), (8, 12, -35), (12, 30, 90), (20, 40, -60)])
@pytest.mark.parametrize("which", [0, 1])
def test_of_two_grooves_the_traced_one_is_followed(width: float, gap: float, off: float, which: int) -> None:
    rng = np.random.default_rng([int(width), int(gap), which])
    pixels, _, both = pair(width, gap, Lamp(off, 30), rng, SECTIONS[int(width) % 3])
    groove = draw_to_groove(pixels, traced(both[which], rng, 1.0), within_px=0.9 * gap)
    assert groove.found
    assert rms(beside(groove.points_px, both[which])) < 0.5


def test_clay_without_a_groove_gives_the_tracing_back() -> None:
    traces = 0
    for seed in range(20):
        rng = np.random.default_rng([11, seed])
        lamp = Lamp(rng.uniform(0, 360), rng.choice([15, 30, 50]))
        pixels = photograph((150, 500), [], lamp, rng, roughness=rng.choice([0.02, 0.045, 0.09]))
        for height, within in product((50, 75, 100), (8, 25)):
            across = np.linspace(15, 485, int(rng.integers(2, 8)))
            trace = np.column_stack([across, height + rng.normal(0, 2, len(across))])
            groove = draw_to_groove(pixels, trace, within_px=within)
            assert not groove.found
            assert np.array_equal(groove.points_px, trace)
            assert (groove.sd_px, groove.scatter_px) == (None, None)
            traces += 1
    assert traces == 120


def test_a_row_of_signs_is_no_groove() -> None:
    for seed in range(8):
        rng = np.random.default_rng([12, seed])
        places = np.cumsum(rng.uniform(22, 50, 20))
        row = [Wedge((x, 70 + rng.normal(0, 1.5)), 16, 45, 90 + rng.normal(0, 4)) for x in places]
        pixels = photograph((160, LENGTH), [], Lamp(222, 35), rng, wedges=row)
        trace = np.array([[15.0, 72.0], [350.0, 73.0], [685.0, 71.0]])
        assert not draw_to_groove(pixels, trace, within_px=12).found


def test_no_point_lies_further_from_the_tracing_than_is_allowed() -> None:
    for seed in range(4):
        rng = np.random.default_rng([13, seed])
        pixels, line = single(10, Lamp(60, 30), rng)
        trace = traced(line, rng, 4.0)
        groove = draw_to_groove(pixels, trace, within_px=3.0)
        dense = np.column_stack([np.interp(np.arange(0, 700, 0.05), *trace.T) for _ in (0, 1)])
        dense[:, 0] = np.arange(0, 700, 0.05)
        nearest = [float(np.hypot(*(dense - point).T).min()) for point in groove.points_px]
        assert max(nearest) <= 3.0 + 0.05


def test_a_groove_out_of_reach_is_left_alone() -> None:
    rng = np.random.default_rng(14)
    pixels, line = single(10, Lamp(60, 30), rng)
    trace = line[20:-20:100] + np.array([0, 30])
    groove = draw_to_groove(pixels, trace, within_px=8)
    assert not groove.found
    assert [one.code for one in groove.caveats] == ["groove.unseen"]
    assert np.array_equal(groove.points_px, trace)


def test_where_half_of_a_groove_is_gone_the_rest_is_found() -> None:
    rng = np.random.default_rng(15)
    line = hand_drawn((-5, 80), (LENGTH + 5, 84), rng)
    ruling = Ruling(line[:420], 12, 4)
    pixels = photograph((160, LENGTH), [ruling], Lamp(-60, 35), rng)
    groove = draw_to_groove(pixels, traced(line, rng), within_px=10)
    assert groove.found
    assert 0.4 < groove.seen < 0.8
    left = groove.points_px[groove.points_px[:, 0] < 380]
    assert rms(beside(left, line)) < 0.5
    assert np.abs(beside(groove.points_px, line)).max() < 5


def scene() -> tuple[Pixels, Points]:
    """Return a picture with a groove, and a tracing."""
    rng = np.random.default_rng(16)
    pixels, line = single(12, Lamp(50, 35), rng)
    return pixels, traced(line, rng)


def test_a_tracing_from_the_other_end_gives_the_same_line() -> None:
    pixels, trace = scene()
    there, back = (draw_to_groove(pixels, points, within_px=12) for points in (trace, trace[::-1]))
    assert np.abs(there.points_px - back.points_px[::-1]).max() < 0.15


def test_a_turned_picture_gives_the_turned_line() -> None:
    pixels, trace = scene()
    upright = draw_to_groove(pixels, trace, within_px=12)
    turned = draw_to_groove(np.ascontiguousarray(pixels.swapaxes(0, 1)), trace[:, ::-1], within_px=12)
    assert np.abs(upright.points_px - turned.points_px[:, ::-1]).max() < 0.15


def test_sixteen_bits_give_the_line_of_eight() -> None:
    pixels, trace = scene()
    eight, sixteen = (
        draw_to_groove(each, trace, within_px=12) for each in (pixels, pixels.astype(np.uint16) * 257)
    )
    assert np.abs(eight.points_px - sixteen.points_px).max() < 1e-3


def test_only_a_strip_of_a_large_photograph_is_read() -> None:
    # 108 megapixels of one colour, which take no room
    photo = np.broadcast_to(np.full(3, 120, np.uint8), (9000, 12000, 3))
    trace = np.array([[300.0, 4000.0], [6000.0, 4090.0], [11700.0, 4210.0]])
    assert lay_strip(photo, trace, 130).mosaic.size < 1e6
    assert not draw_to_groove(photo, trace, within_px=20).found


def test_points_may_repeat() -> None:
    pixels, trace = scene()
    doubled = draw_to_groove(pixels, np.repeat(trace, 2, axis=0), within_px=12)
    assert np.array_equal(doubled.points_px, draw_to_groove(pixels, trace, within_px=12).points_px)


@pytest.mark.parametrize(
    "trace", [np.empty((0, 2)), np.array([[1.0, 2.0]]), np.array([[1.0, 2.0], [1.0, 2.0]])]
)
def test_a_tracing_needs_two_points_that_are_apart(trace: Points) -> None:
    with pytest.raises(CallError, match="two points or more that are apart"):
        draw_to_groove(scene()[0], trace, within_px=5)


@pytest.mark.parametrize("trace", [np.array([[1.0, np.nan], [5.0, 5.0]]), np.zeros(4), np.zeros((3, 3))])
def test_a_tracing_needs_finite_points(trace: Points) -> None:
    with pytest.raises(CallError, match="finite points"):
        draw_to_groove(scene()[0], trace, within_px=5)


@pytest.mark.parametrize("within", [0.0, -1.0, float("nan"), float("inf")])
def test_the_reach_needs_a_length(within: float) -> None:
    pixels, trace = scene()
    with pytest.raises(CallError, match="above 0 px"):
        draw_to_groove(pixels, trace, within_px=within)


def test_other_kinds_have_no_groove() -> None:
    pixels, trace = scene()
    with pytest.raises(CallError, match="'single' or 'double'"):
        draw_to_groove(pixels, trace, within_px=5, kind="spacing")  # type: ignore[arg-type]
