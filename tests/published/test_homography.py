"""Homographies against published ones and identities."""

from __future__ import annotations

import csv
from pathlib import Path

import cv2
import numpy as np
import pytest
from numpy.typing import NDArray

from layout.errors import CallError
from layout.homography import apply, fit_homography

CORNERS = Path(__file__).parent / "data" / "opencv_left_corners.csv"

# scikit-image's gallery example of ruled paper in perspective: the quadrilateral and the matrix that follows from it
PAPER = [[0, 0], [0, 50], [300, 50], [300, 0]], [[155, 15], [65, 40], [260, 130], [360, 95]]
PAPER_MATRIX = np.array(
    [
        [0.4672195892575, -1.8533965244866, 155.0],
        [0.2096366508689, 0.467140600316, 15.0],
        [-0.0006003159557662, -0.0008214849921011, 1.0],
    ]
)


def corners(picture: str) -> NDArray[np.float64]:
    """Return a picture's corners, px, in the order of the board's."""
    with CORNERS.open(encoding="utf-8") as file:
        rows = [row for row in csv.DictReader(file) if row["image"] == picture]
    return np.array([[float(row["u_px"]), float(row["v_px"])] for row in rows])


def test_the_chessboard_of_two_real_pictures_as_opencv_maps_it() -> None:
    # the corners are those of the project's list of checks; cv2.findHomography is an independent implementation
    second, first = corners("left02.jpg"), corners("left01.jpg")
    theirs = np.asarray(cv2.findHomography(second, first)[0], np.float64)
    assert apply(fit_homography(second, first).matrix, second) == pytest.approx(
        apply(theirs, second), abs=1e-3
    )


def test_four_points_of_ruled_paper() -> None:
    found = fit_homography(np.array(PAPER[0], float), np.array(PAPER[1], float))
    assert found.matrix == pytest.approx(PAPER_MATRIX, rel=1e-6)
    assert found.rms_px < 1e-6


def test_the_cross_ratio_of_evenly_spaced_points_stays_four_thirds() -> None:
    # an identity of projective geometry
    matrix = np.array([[1.1, 0.2, 30.0], [-0.1, 0.9, 12.0], [2e-3, -1e-3, 1.0]])
    a, b, c, d = (apply(matrix, np.array([10.0 * n, 3.0])) for n in range(4))
    away = [np.hypot(*(p - q)) for p, q in ((c, a), (d, b), (c, b), (d, a))]
    assert away[0] * away[1] / (away[2] * away[3]) == pytest.approx(4 / 3)


def test_the_covariance_is_what_repeated_noise_gives() -> None:
    plane = np.array([[x, y] for x in range(0, 100, 20) for y in range(0, 60, 20)], float)
    matrix = np.array([[8.0, 0.4, 300.0], [-0.3, 7.5, 200.0], [4e-4, -2e-4, 1.0]])
    rng = np.random.default_rng(306)
    fits = [
        fit_homography(plane, apply(matrix, plane) + rng.normal(0, 0.2, plane.shape), 0.2) for _ in range(400)
    ]
    elements = np.array([fit.matrix.ravel()[:8] for fit in fits])
    stated = np.sqrt(np.diag(fits[0].covariance))
    # 400 repeats know a standard deviation to 3.5 %
    assert elements.std(axis=0) / stated == pytest.approx(np.ones(8), abs=0.14)


def test_too_few_points_and_points_on_a_line_are_refused() -> None:
    with pytest.raises(CallError, match="four points of the target or more, has 3"):
        fit_homography(np.eye(3)[:, :2], np.eye(3)[:, :2])
    line = np.array([[0.0, 0.0], [1.0, 1.0], [2.0, 2.0], [3.0, 3.0]])
    with pytest.raises(CallError, match="lie on a line"):
        fit_homography(line, line)
