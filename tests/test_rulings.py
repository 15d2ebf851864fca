"""Rulings: straight lines, and the pitch of lines of writing."""

from __future__ import annotations

import numpy as np
import pytest

from layout.quantity import Floats
from layout.rulings import Line, fit_lines, fit_pitch
from tests.coverage import exact_limits


def level(heights: Floats, rng: np.random.Generator, noise: float = 0.03) -> list[Line]:
    """Return horizontal lines traced at some heights."""
    x = np.linspace(-30, 30, 8)
    traces = [
        (f"h{at}", "horizontal", np.column_stack([x, height + rng.normal(0, noise, 8)]))
        for at, height in enumerate(heights)
    ]
    return fit_lines(traces, max(noise, 0.01), 1000, rng)


def test_an_exact_line_is_found() -> None:
    y = np.linspace(-20, 20, 7)
    points = np.column_stack([3 + 0.02 * y, y])
    line = fit_lines([("v", "vertical", points)], 0.01, 1000, np.random.default_rng(0))[0]
    assert np.median(line.at(0.0)[:, 0]) == pytest.approx(3.0, abs=0.01)
    assert np.median(line.slope) == pytest.approx(0.02, abs=0.001)
    assert line.reach == (-20.0, 20.0)


def test_the_order_of_points_does_not_matter() -> None:
    y = np.linspace(-20, 20, 7)
    points = np.column_stack([3 + 0.02 * y + np.sin(y) / 10, y])
    one, other = (
        fit_lines([("v", "vertical", p)], 0.03, 1000, np.random.default_rng(0))[0]
        for p in (points, points[::-1])
    )
    assert np.median(one.offset) == pytest.approx(np.median(other.offset), abs=0.01)


def test_the_distance_of_two_lines_is_covered() -> None:
    hits = 0
    for seed in range(300):
        rng = np.random.default_rng([5, seed])
        y = np.linspace(-25, 25, 9)
        traces = [
            (name, "vertical", np.column_stack([x + rng.normal(0, 0.1, 9), y]))
            for name, x in (("a", 0.0), ("b", 17.0))
        ]
        a, b = fit_lines(traces, 0.04, 1000, rng)
        low, high = np.percentile(b.at(0.0)[:, 0] - a.at(0.0)[:, 0], [2.5, 97.5])
        hits += low <= 17.0 <= high
    assert exact_limits(hits, 300)[1] > 0.93


def test_even_lines_give_their_spacing() -> None:
    pitch = fit_pitch(
        level(np.linspace(0.0, 35.0, 6), np.random.default_rng(1)), 1000, np.random.default_rng(2)
    )
    assert pitch is not None
    assert np.median(pitch.pitch) == pytest.approx(7.0, abs=0.05)
    assert pitch.alternatives == ()


def test_lines_whose_rulings_are_missing_are_counted() -> None:
    lines = level(np.array([0, 1, 3, 4, 7, 8]) * 6.5, np.random.default_rng(3))
    pitch = fit_pitch(lines, 1000, np.random.default_rng(2))
    assert pitch is not None
    assert list(pitch.index.values()) == [0, 1, 3, 4, 7, 8]


def test_a_growing_pitch_shows_its_drift() -> None:
    k = np.arange(10)
    heights: Floats = np.asarray(6.0 * k + 0.08 * (k - 4.5) ** 2 / 2, dtype=np.float64)
    lines = level(heights, np.random.default_rng(4))
    pitch = fit_pitch(lines, 1000, np.random.default_rng(2))
    assert pitch is not None
    assert pitch.drift is not None
    assert np.percentile(pitch.drift, 2.5) < 0.08 < np.percentile(pitch.drift, 97.5)
    assert np.percentile(pitch.drift, 2.5) > 0


def test_one_line_has_no_pitch() -> None:
    assert fit_pitch(level(np.array([1.0]), np.random.default_rng(5)), 1000, np.random.default_rng(6)) is None


def test_the_pitch_is_covered_when_rulings_are_missing() -> None:
    hits = 0
    for seed in range(300):
        rng = np.random.default_rng([6, seed])
        number = np.array([0, 1, 2, 4, 5, 8])
        pitch = fit_pitch(level(number * 7.0 + rng.normal(0, 0.2, 6), rng), 1000, rng)
        assert pitch is not None
        low, high = np.percentile(pitch.pitch, [2.5, 97.5])
        hits += low <= 7.0 <= high
    assert exact_limits(hits, 300)[1] > 0.93
