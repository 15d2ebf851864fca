"""The whole outline from its surviving edges."""

from __future__ import annotations

import numpy as np
import pytest

from layout.lengths import polygon_area
from layout.outline import (
    Outline,
    Traced,
    Wobbles,
    distances,
    feet,
    fit_outline,
    linearised,
)
from layout.quantity import Floats
from layout.wobble import matern32, matern52
from tests.coverage import exact_limits

WIDTH, HEIGHT = 100.0, 110.0


def ring(n_upper: float, n_lower: float) -> tuple[Floats, Floats]:
    """Return a superellipse at even steps of 1.8 mm: points and outward normals."""
    t = np.linspace(0, 2 * np.pi, 6000, endpoint=False)
    n = np.where(np.sin(t) < 0, n_upper, n_lower)
    fine = np.column_stack(
        [
            WIDTH / 2 * np.sign(np.cos(t)) * np.abs(np.cos(t)) ** (2 / n),
            HEIGHT / 2 * np.sign(np.sin(t)) * np.abs(np.sin(t)) ** (2 / n),
        ]
    )
    arc = np.concatenate([[0], np.cumsum(np.hypot(*np.diff(fine, axis=0).T))])
    at = np.arange(0, arc[-1], 1.8)
    points = np.column_stack([np.interp(at, arc, fine[:, 0]), np.interp(at, arc, fine[:, 1])])
    along = np.roll(points, -1, axis=0) - np.roll(points, 1, axis=0)
    along /= np.hypot(*along.T)[:, None]
    return points, np.column_stack([along[:, 1], -along[:, 0]])


def traced(
    rng: np.random.Generator, *, lost: float = 0.3, wobble: float = 0.35, pointing: float = 0.03
) -> Traced:
    """Trace the right part of a tablet: the left is lost; an edge with a squared exponential wobble of 8 mm."""
    points, normals = ring(4.0, 3.5)
    apart = np.abs(np.arange(len(points))[:, None] - np.arange(len(points))) * 1.8
    apart = np.minimum(apart, len(points) * 1.8 - apart)
    root = np.linalg.cholesky(np.exp(-((apart / 8.0) ** 2) / 2) + 1e-6 * np.eye(len(points)))
    moved = points + wobble * (root @ rng.standard_normal(len(points)))[:, None] * normals
    moved += rng.normal(0, pointing, moved.shape)
    angle = np.arctan2(points[:, 1] / HEIGHT, points[:, 0] / WIDTH)
    survives = points[:, 0] > (lost - 0.5) * WIDTH
    edge = np.where(np.abs(angle) < np.pi / 4, "right", np.where(angle < 0, "upper", "lower"))
    pieces = tuple((name, moved[(edge == name) & survives]) for name in ("upper", "right", "lower"))
    x = (lost - 0.5) * WIDTH
    breaks = np.column_stack([np.full(20, x) + rng.normal(0, 1, 20), np.linspace(-50, 50, 20)])
    return Traced(pieces, breaks, max(pointing, 0.005))


def fit(what: Traced, *, asymmetry: float = 0.01, seed: int = 0, draws: int = 1500) -> Outline:
    """Fit an outline that can be fitted."""
    outline, _ = fit_outline(what, asymmetry, draws, np.random.default_rng(seed))
    assert outline is not None
    return outline


def at(values: list[float], width: float = WIDTH) -> tuple[Floats, Floats]:
    """Return one outline's parameters as draws."""
    return np.array([np.log(width)]), np.array([values])


SHAPE = [
    1.0,
    -2.0,
    0.02,
    float(np.log(HEIGHT)),
    float(np.log(3.5)),
    float(np.log(4.5)),
    0.01,
    -0.02,
    0.05,
    0.04,
]


def outline_of(values: list[float], width: float = WIDTH) -> Outline:
    """Return an outline whose draws are all the same."""
    log_width, shape = at(values, width)
    zero = np.zeros(20, dtype=np.intp)
    return Outline(np.repeat(log_width, 20), np.repeat(shape, 20, axis=0), Wobbles(zero, zero))


def test_an_exact_superellipse_gives_its_width_and_height() -> None:
    outline = fit(traced(np.random.default_rng(0), wobble=0.0, pointing=0.001), asymmetry=0.0)
    assert np.median(np.exp(outline.log_width)) == pytest.approx(WIDTH, abs=0.5)
    left, right, upper, lower = outline.halves
    assert np.median(upper + lower) == pytest.approx(HEIGHT, abs=0.2)
    assert np.median(left / right) == pytest.approx(1.0, abs=1e-3)


def test_the_width_is_covered() -> None:
    hits = sum(
        low <= WIDTH <= high
        for low, high in (
            np.percentile(
                np.exp(fit(traced(np.random.default_rng([1, seed]), lost=0.15 + 0.35 * seed / 60)).log_width),
                [2.5, 97.5],
            )
            for seed in range(60)
        )
    )
    assert exact_limits(hits, 60, 0.998)[1] > 0.93


def test_more_lost_is_less_sure() -> None:
    little, much = (
        np.exp(fit(traced(np.random.default_rng(2), lost=lost)).log_width).std() for lost in (0.15, 0.45)
    )
    assert much > 2 * little


@pytest.mark.parametrize(("n", "area"), [(4.0, 3.708149), (2.5, 3.380935), (2.0, np.pi)])
def test_the_area_of_a_superellipse(n: float, area: float) -> None:
    # 4 a b G(1 + 1/n)^2 / G(1 + 2/n), an identity; values as in CHECKS (curves)
    log_n = float(np.log(n))
    outline = outline_of([0, 0, 0, float(np.log(2.0)), log_n, log_n, 0, 0, 0, 0], 2.0)
    assert outline.area()[0] == pytest.approx(area, abs=5e-7)


def test_the_polygon_has_the_area_of_the_formula() -> None:
    for end, side in ((0.0, 0.0), (0.05, 0.04), (0.1, 0.1), (-0.02, 0.03)):
        outline = outline_of([*SHAPE[:8], end, side])
        assert polygon_area(outline.polygon(0.5, 4000)) == pytest.approx(outline.area()[0], rel=2e-3)


def test_tangents_touch_the_polygon() -> None:
    log_width, shape = at(SHAPE)
    outline = outline_of(SHAPE)
    assert distances(outline.tangents[0], log_width, shape) == pytest.approx(0.0, abs=1e-9)
    assert np.abs(distances(outline.polygon(0.5), log_width, shape)).max() < 1e-6


def test_bulging_sides_fall_back_towards_the_corners() -> None:
    # with n large the sides are straight but for the bulge: at half the half-height they fall back by a quarter of it
    log_n = float(np.log(60.0))
    right = outline_of([0, 0, 0, float(np.log(HEIGHT)), log_n, log_n, 0, 0, 0, 0.08]).polygon(0.5, 8000)
    right = right[right[:, 0] > 0]
    at_half = np.interp(HEIGHT / 4, *right[np.argsort(right[:, 1])][:, ::-1].T)
    assert at_half == pytest.approx(WIDTH / 2 * (1 - 0.08 / 4), rel=1e-3)


def test_slopes_are_those_of_the_distances() -> None:
    points = np.array([[40.0, 30.0], [50.0, -20.0], [20.0, 54.0], [43.0, 45.0], [-30.0, -55.0]])
    log_width, shape = at(SHAPE)
    away, slopes = linearised(points, log_width, shape)
    for parameter in range(shape.shape[1]):
        step = np.zeros_like(shape)
        step[0, parameter] = 1e-5
        ahead, behind = (distances(points, log_width, shape + sign * step) for sign in (1, -1))
        # exact on the curve; a point r away from it is off by r over the radius of curvature
        near = np.abs(away[0]) < 5
        assert slopes[0, parameter, near] == pytest.approx(
            (ahead - behind)[0, near] / 2e-5, rel=0.1, abs=0.05
        )


def test_feet_lie_on_the_outline() -> None:
    log_width, shape = at(SHAPE)
    points = np.array([[52.0, 10.0], [40.0, 47.0], [0.0, -55.0]])
    away = distances(feet(points, log_width, shape), log_width, shape)
    assert np.abs(away).max() < 0.02


def test_mirroring_the_fragment_mirrors_the_result() -> None:
    what = traced(np.random.default_rng(4))
    sides = {"right": "left", "upper": "upper", "lower": "lower"}
    mirrored = Traced(
        tuple((sides[name], points * [-1, 1]) for name, points in what.pieces),
        what.breaks * [-1, 1],
        what.pointing_mm,
    )
    one, other = fit(what, draws=4000), fit(mirrored, draws=4000, seed=1)
    spread = np.exp(one.log_width).std()
    assert np.median(np.exp(one.log_width)) == pytest.approx(
        np.median(np.exp(other.log_width)), abs=0.15 * spread
    )
    assert np.median(one.shape[:, 0]) == pytest.approx(-np.median(other.shape[:, 0]), abs=0.15 * spread)


def test_the_direction_of_tracing_does_not_matter() -> None:
    what = traced(np.random.default_rng(5))
    back = Traced(tuple((name, points[::-1]) for name, points in what.pieces), what.breaks, what.pointing_mm)
    one, other = (np.exp(fit(piece).log_width) for piece in (what, back))
    # the same random numbers meet the same posterior: far closer than other random numbers would come
    assert np.median(one) == pytest.approx(np.median(other), abs=0.002 * one.std())


def test_a_break_that_reaches_further_makes_the_tablet_wider() -> None:
    what = traced(np.random.default_rng(6), lost=0.45)
    further = Traced(what.pieces, what.breaks - np.array([40.0, 0.0]), what.pointing_mm)
    assert np.percentile(np.exp(fit(further).log_width), 2.5) > 85.0


def test_a_break_outside_every_outline_is_named() -> None:
    what = traced(np.random.default_rng(7), lost=0.15)
    outside = Traced(what.pieces, np.array([[0.0, 120.0], [0.0, -120.0]]), what.pointing_mm)
    outline, caveats = fit_outline(outside, 0.01, 1000, np.random.default_rng(0))
    assert outline is None
    assert caveats[-1].code == "outline.break_outside"


def test_correlations_begin_at_one_and_fall() -> None:
    # Rasmussen and Williams 2006, eq. 4.17, at one correlation length
    assert matern32(np.array([0.0, 1.0])) == pytest.approx([1.0, (1 + 3**0.5) * np.exp(-(3**0.5))])
    assert matern52(np.array([0.0, 1.0])) == pytest.approx([1.0, (1 + 5**0.5 + 5 / 3) * np.exp(-(5**0.5))])
