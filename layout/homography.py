"""The map from a plane to its picture, from points that are known in both."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.errors import CallError
from layout.least_squares import fit_least_squares
from layout.quantity import Floats


@dataclass(frozen=True, eq=False)
class Homography:
    """A homography between two planes.

    Parameters
    ----------
    matrix
        Shape (3, 3), from the plane to the picture, its last element 1.
    covariance
        Of its first eight elements, row by row, shape (8, 8).
    rms_px
        Root mean square distance between seen and computed points.
    """

    matrix: Floats
    covariance: Floats
    rms_px: float


def apply(matrix: Floats, points: Floats) -> Floats:
    """Map points (..., 2) by a homography (3, 3)."""
    mapped = points @ matrix[:, :2].T + matrix[:, 2]
    return np.asarray(mapped[..., :2] / mapped[..., 2:])


def inverse(matrix: Floats) -> Floats:
    """Return the homography (3, 3) the other way."""
    return np.asarray(np.linalg.inv(matrix), float)


def fit_homography(plane: Floats, seen_px: Floats, sd_px: float = 1.0) -> Homography:
    """Fit a homography: the normalised direct linear transform, then least squares on the reprojection error.

    Hartley 1997, "In defense of the eight-point algorithm", is the source of the normalisation; Hartley and
    Zisserman 2004, chapter 4, of both steps (neither was opened here: from memory).

    Parameters
    ----------
    plane, seen_px
        Four points or more, no three of four on a line; each of shape (P, 2).
    sd_px
        Standard uncertainty of one coordinate in the picture.

    Raises
    ------
    CallError
        If there are too few points, or they do not span the plane.

    Examples
    --------
    >>> square = np.array([[0.0, 0.0], [1.0, 0.0], [1.0, 1.0], [0.0, 1.0]])
    >>> apply(fit_homography(square, 3 * square + 5).matrix, np.array([[0.5, 0.5]])).round(9)
    array([[6.5, 6.5]])
    """
    if len(plane) < 4:
        message = f"needs four points of the target or more, has {len(plane)}"
        raise CallError(message)
    start = _direct(plane, seen_px)

    def residuals(elements: Floats) -> Floats:
        return np.asarray((apply(_matrix(elements), plane) - seen_px).ravel() / sd_px)

    first = start.ravel()[:8]
    fitted = fit_least_squares(residuals, first, 1e-6 * np.maximum(np.abs(first), 1e-6))
    rms = float(np.sqrt(fitted.chi2 * sd_px**2 / len(plane)))
    return Homography(_matrix(fitted.parameters), fitted.covariance, rms)


def _matrix(elements: Floats) -> Floats:
    """Return the matrix with eight elements."""
    return np.append(elements, 1.0).reshape(3, 3)


def _direct(plane: Floats, seen: Floats) -> Floats:
    """Return the homography that solves the linear equations best, coordinates brought to unit spread first."""
    to_plane, to_seen = _normalising(plane), _normalising(seen)
    x, y = apply(to_plane, plane).T
    u, v = apply(to_seen, seen).T
    zero, one = np.zeros_like(x), np.ones_like(x)
    rows = np.concatenate(
        [
            np.stack([x, y, one, zero, zero, zero, -u * x, -u * y, -u], axis=1),
            np.stack([zero, zero, zero, x, y, one, -v * x, -v * y, -v], axis=1),
        ]
    )
    _, sizes, directions = np.linalg.svd(rows)
    if len(sizes) < 8 or sizes[7] < 1e-9 * sizes[0]:
        message = "the points of the target lie on a line; give four that span it"
        raise CallError(message)
    matrix = np.linalg.inv(to_seen) @ directions[-1].reshape(3, 3) @ to_plane
    return np.asarray(matrix / matrix[2, 2])


def _normalising(points: Floats) -> Floats:
    """Return the similarity (3, 3) that brings points about the origin, root two away on average."""
    middle = points.mean(axis=0)
    size = float(np.hypot(*(points - middle).T).mean()) / np.sqrt(2)
    size = size if size > 0 else 1.0
    return np.array([[1 / size, 0, -middle[0] / size], [0, 1 / size, -middle[1] / size], [0, 0, 1.0]])
