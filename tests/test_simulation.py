"""The simulator itself: its truth is true, its noise is as stated, its records are well formed."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import shapely
from scipy.stats import chi2

from tests.simulation import FAMILIES, KINDS, simulate
from tests.simulation.camera import Camera, tilted
from tests.simulation.shapes import OWN_FAMILY, curve_of_powers, make_outline
from tests.simulation.wobble import correlation, sample_around

ALL_FAMILIES = [*FAMILIES, OWN_FAMILY]
KNOWN_KEYS = {
    "": {"schema", "name", "photographs", "views", "thickness", "lost"},
    "photographs": {"id", "file", "sha256", "size"},
    "views": {"face", "photograph", "pointing_px", "scale", "outline", "rulings", "writing"},
    "scale": {"marks", "below_face", "distance", "tilt_sd_deg"},
    "marks": {"bar", "at", "mm"},
    "below_face": {"mm", "sd"},
    "distance": {"mm", "sd"},
    "thickness": {"mm", "sd"},
    "outline": {"edge", "points"},
    "rulings": {"id", "runs", "points"},
    "writing": {"text", "from", "to", "column", "line"},
    "lost": {"sides"},
}
# without any error of observation, seen squarely, with a ruler
EXACT: dict[str, Any] = {
    "pointing_px": 0.0,
    "below_face_sd": 0.0,
    "distance_sd": 0.0,
    "thickness_sd": 0.0,
    "tilt_sd_deg": 0.0,
    "ruling_wobble": 0.0,
    "wobble_sd": 0.0,
}


def points_of(simulated_view: dict[str, Any]) -> np.ndarray[Any, np.dtype[np.float64]]:
    """Return the traced ring, shared ends once."""
    return np.array([point for piece in simulated_view["outline"] for point in piece["points"][:-1]])


def keys_of(value: object, name: str = "") -> set[tuple[str, str]]:
    """Return all keys of a record, each with the key it stands under."""
    if isinstance(value, list):
        return set().union(*(keys_of(one, name) for one in value))
    if not isinstance(value, dict):
        return set()
    return {(name, key) for key in value}.union(*(keys_of(one, key) for key, one in value.items()))


def test_record_has_the_keys_of_the_design_and_no_other() -> None:
    record = simulate(np.random.default_rng(1), entries=12).record
    assert keys_of(record) == {(name, key) for name, keys in KNOWN_KEYS.items() for key in keys}


@pytest.mark.parametrize("side", ["left", "right"])
def test_traced_outline_is_a_simple_ring_of_pieces_that_share_their_ends(side: str) -> None:
    rng = np.random.default_rng(2)
    for number in range(40):
        view = simulate(rng, side=side, corner_lost=number % 2 == 0).record["views"][0]
        ring = shapely.Polygon(points_of(view))
        assert ring.is_valid
        pieces = view["outline"]
        for piece, following in zip(pieces, pieces[1:] + pieces[:1], strict=True):
            assert piece["points"][-1] == following["points"][0]
        survives = {"left": "right", "right": "left"}[side]
        assert {piece["edge"] for piece in pieces} == {"upper", survives, "lower", "break"}


def test_all_that_is_traced_lies_in_the_photograph() -> None:
    rng = np.random.default_rng(3)
    for _ in range(60):
        record = simulate(rng, tilt_sd_deg=1.5).record
        view = record["views"][0]
        traced = np.concatenate(
            [
                points_of(view),
                *(ruling["points"] for ruling in view["rulings"]),
                [mark["at"] for mark in view["scale"]["marks"]],
                *([entry["from"], entry["to"]] for entry in view["writing"]),
            ]
        )
        assert (traced >= -0.5).all()
        assert (traced <= np.array(record["photographs"][0]["size"]) - 0.5).all()


def test_scale_follows_from_the_marks_by_the_pinhole_formula() -> None:
    # seen squarely from the distance D, what lies h above the bar is larger by D / (D - h)
    simulated = simulate(np.random.default_rng(4), **EXACT, distance=600.0, below_face=12.0)
    marks = [mark["at"] for mark in simulated.record["views"][0]["scale"]["marks"]]
    mm_per_px_at_bar = 10.0 / np.hypot(*np.subtract(marks[1], marks[0]))
    assert simulated.truth["scale"] == pytest.approx(mm_per_px_at_bar * (600.0 - 12.0) / 600.0, rel=1e-5)


def test_scale_is_the_mean_magnification_when_tilted() -> None:
    camera = Camera(700.0, 14000.0, tilted(1.2, -0.8), (6000, 4000))
    square = np.array([[20.0, 30.0], [20.2, 30.0], [20.2, 30.2], [20.0, 30.2]])
    seen = camera.project(square, 9.0)
    measured = np.sqrt(0.04 / shapely.Polygon(seen).area)
    assert camera.mm_per_px(seen.mean(axis=0), 9.0) == pytest.approx(measured, rel=1e-6)


def test_truth_is_what_an_exact_observer_measures() -> None:
    settings = {**EXACT, "distance": 700.0, "below_face": 10.0, "side": "left", "lost": 0.3}
    rng = np.random.default_rng(5)
    for _ in range(10):
        simulated = simulate(rng, **settings, px_per_mm=20.0, stretch=0.0, entries=30)
        view, truth = simulated.record["views"][0], simulated.truth
        face = truth["scale"]
        rulings = {ruling["id"]: np.array(ruling["points"]) * face for ruling in view["rulings"]}
        middles = [rulings[name].mean(axis=0) for name in rulings if name.startswith("v")]
        widths = np.diff([middle[0] for middle in middles])
        # the lines are turned against each other by some tenths of a degree: 0.3 mm over 60 mm
        assert list(widths) == pytest.approx(list(truth["columns"].values()), abs=0.7)
        thickness = simulated.record["thickness"]["mm"]
        girth = face * (700.0 - 10.0 + thickness / 2) / (700.0 - 10.0)
        ring = points_of(view) * girth
        height = np.ptp(ring[:, 1])
        # turned by one or two degrees, the box of an outline is a little larger than between its tangents
        assert truth["height"] == pytest.approx(height, rel=0.02)
        full = [
            np.hypot(*np.subtract(entry["to"], entry["from"])) * face
            for entry in view["writing"]
            if entry["text"].isdigit() and int(entry["text"]) > 10 and int(entry["text"]) % 10
        ]
        assert full == pytest.approx([truth["sign_width"]] * len(full), rel=1e-3)


def test_lost_space_and_columns_and_margins_make_up_the_width() -> None:
    rng = np.random.default_rng(6)
    for side in ("left", "right"):
        for _ in range(20):
            truth = simulate(rng, **EXACT, side=side).truth
            parts = truth["lost_space"] + sum(truth["columns"].values()) + 2 * truth["margin"]
            # rulings turned against the outline, and against one another
            assert parts == pytest.approx(truth["width"], abs=2.5)


@pytest.mark.parametrize("family", ALL_FAMILIES)
def test_outline_is_symmetric_but_for_its_unequal_halves(family: str) -> None:
    outline = make_outline(np.random.default_rng(7), family, (100.0, 80.0))
    left, right, above, below = outline.halves
    assert left + right == pytest.approx(100.0)
    assert above + below == pytest.approx(80.0)
    assert np.ptp(outline.points, axis=0) == pytest.approx([100.0, 80.0], abs=0.02)
    x, y = outline.points.T
    one, other = shapely.LineString(outline.points[x >= 0]), outline.points[(x < -1.0)]
    mirrored = shapely.points(np.column_stack([-other[:, 0] * right / left, other[:, 1]]))
    assert shapely.distance(one, mirrored).max() < 0.05
    assert y[np.argmin(x)] == pytest.approx(y[np.argmax(x)], abs=6.0)


def test_superellipse_has_its_area() -> None:
    # 4 a b G(1 + 1/n)^2 / G(1 + 2/n) (identity, as in the table of values: n = 4 gives 3.708149 a b)
    assert shapely.Polygon(curve_of_powers((4.0, 4.0), (4.0, 4.0))).area == pytest.approx(3.708149, rel=1e-4)


@pytest.mark.parametrize("kind", KINDS)
def test_wobble_has_its_variance_and_its_correlation(kind: str) -> None:
    rng, count, perimeter = np.random.default_rng(8), 512, 320.0
    samples = np.array([sample_around(rng, kind, 8.0, perimeter, count) for _ in range(2000)])
    # the variance of one place is chi-square distributed with 2000 degrees of freedom
    low, high = np.asarray(chi2.ppf([5e-5, 1 - 5e-5], 2000) / 2000)
    assert low < np.mean(samples[:, 0] ** 2) < high
    lag = 16  # 10 mm
    rho = correlation(kind, np.array(10.0), 8.0)
    found = np.mean(samples[:, 0] * samples[:, lag])
    # sd of a mean of products of normal numbers: sqrt((1 + rho^2) / n)
    assert abs(found - rho) < 4 * np.sqrt((1 + rho**2) / 2000)


def test_wobble_of_a_fragment_has_the_stated_sd() -> None:
    rng = np.random.default_rng(9)
    squares = [
        np.mean(simulate(rng, wobble_sd=0.4, wobble_length=5.0, lost=0.2).edge.displacement ** 2)
        for _ in range(150)
    ]
    assert abs(np.mean(squares) - 0.4**2) < 4 * np.std(squares, ddof=1) / np.sqrt(len(squares))


def test_pointing_errors_have_the_stated_sd() -> None:
    residuals = []
    rng = np.random.default_rng(10)
    for _ in range(40):
        settings = {**EXACT, "pointing_px": 2.0, "below_face": 5.0}
        marks = simulate(rng, **settings).record["views"][0]["scale"]["marks"]
        at = np.array([mark["at"] for mark in marks])
        design = np.column_stack([np.ones(len(at)), [mark["mm"] for mark in marks]])
        residual = at - design @ np.linalg.lstsq(design, at, rcond=None)[0]
        residuals.append((np.sum(residual**2), 2 * (len(at) - 2)))
    total, freedom = np.sum(residuals, axis=0)
    low, high = np.asarray(chi2.ppf([5e-4, 1 - 5e-4], freedom))
    assert low < total / 2.0**2 < high


def test_stated_distance_scatters_about_the_true_one() -> None:
    rng = np.random.default_rng(11)
    errors = [
        simulate(rng, distance=600.0, distance_sd=15.0).record["views"][0]["scale"]["distance"]["mm"] - 600.0
        for _ in range(100)
    ]
    low, high = np.asarray(chi2.ppf([5e-4, 1 - 5e-4], 100))
    assert low < np.sum(np.square(errors)) / 15.0**2 < high


def test_traced_lines_tell_the_pitch_from_its_multiples() -> None:
    rng = np.random.default_rng(12)
    for _ in range(60):
        rulings = simulate(rng).record["views"][0]["rulings"]
        numbers = [int(ruling["id"][1:]) for ruling in rulings if ruling["runs"] == "horizontal"]
        assert np.gcd.reduce(np.diff(numbers)) == 1
        assert len([ruling for ruling in rulings if ruling["runs"] == "vertical"]) >= 3


def test_the_same_seed_gives_the_same_fragment() -> None:
    one, other = (simulate(np.random.default_rng(13)) for _ in range(2))
    assert one.record == other.record
    assert one.truth == other.truth
