"""A camera that stood aslant: its tilt and distance from flat targets, or from bars at right angles.

The simpler model, a camera square to the plane of the bar, wins unless the marks ask for more: Akaike's criterion
with the correction for few data (Hurvich and Tsai 1989; from memory) decides, the stated pointing error counting as
ten degrees of freedom. A plane seen with little perspective looks alike tilted one way or the other: all tilts that
explain the marks are kept, each with its weight.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from layout.errors import CallError
from layout.frame import find_homography
from layout.homography import apply, fit_homography
from layout.least_squares import Fitted, fit_least_squares
from layout.quantity import Floats
from layout.sources import ASSUMED_BAR_SD, POINTING_DOF, Flat, Focal, fit_similarity

WIDEST_TILT_SD = float(np.sin(np.radians(25.0)))
"""Of a camera of which nothing is known: the sine of the tilt about each axis."""
STEEPEST = 0.9
LEAST_ANGLE_DEG = 30.0
DISTANCES = (np.log(20.0), np.log(1e6))
"""Logarithms of mm, from a loupe to a telescope."""
STARTS = ((0.0, 0.0), (0.25, 0.25), (0.25, -0.25), (-0.25, 0.25), (-0.25, -0.25))
KEPT_CHI2 = 16.0
FARFETCHED_CHI2 = 14.0
"""A tilt and a distance less likely than this beforehand, by three standard deviations or so, explain nothing."""
SHARPEST = 1e-4
"""No logarithm of a distance is taken to be known better."""
SCENE, POSE = 4, 3
"""How many parameters: log mm per px, two tilts, log distance; and, for each flat, turn and shift in the plane."""


@dataclass(frozen=True, eq=False)
class Aslant:
    """What the marks say of the scene, one of perhaps several ways to explain them.

    ``mean`` and ``covariance`` are of (log mm per px, tilt, tilt, log distance); ``weight`` is this way's share.
    """

    mean: Floats
    covariance: Floats
    weight: float


def can_tell_tilt(flats: list[Flat]) -> bool:
    """Say whether marks could show that the camera stood aslant: a flat target, or bars at an angle."""
    if any(flat.spans_a_plane for flat in flats):
        return True
    directions = [flat.direction for flat in flats if len(flat.mm) > 2]
    least = np.cos(np.radians(LEAST_ANGLE_DEG))
    return any(abs(one @ other) < least for one in directions for other in directions)


def fit_aslant(
    flats: list[Flat], distance: tuple[float, float], focal: Focal | None, centre_px: Floats
) -> list[Aslant]:
    """Find out from the marks how the camera stood; an empty list where a square camera explains them.

    Parameters
    ----------
    flats
        That lie in one plane.
    distance
        Mean and standard deviation of the logarithm of the distance beforehand.
    focal
        Of the camera, if it is known.
    centre_px
        Where the optical axis meets the photograph.
    """
    flats = [_upright(flat) for flat in flats]
    square = _fit_square(flats, distance[0], centre_px)
    fits = [
        _fit_from(start, flats, distance, focal, centre_px)
        for start in _starts(flats, distance[0], centre_px)
    ]
    best = min(fits, key=lambda one: one.chi2)
    count = 2 * sum(len(flat.mm) for flat in flats)
    of_marks = _marks_chi2(best.parameters, flats, centre_px)
    rich, plain = len(best.parameters), len(square.parameters)
    likely = best.chi2 - of_marks < FARFETCHED_CHI2 and _explained(of_marks, count - rich, flats)
    if len(flats) > 1 and not likely:
        return []  # a misread bar could pass for a slanting one, seen from far away
    variance = (POINTING_DOF + of_marks) / (POINTING_DOF + max(count - rich, 0))
    data = count + POINTING_DOF
    if square.chi2 / variance + _penalty(plain, data) <= best.chi2 / variance + _penalty(rich, data):
        return []
    ways: list[tuple[float, Fitted]] = []
    for fit in sorted(fits, key=lambda one: one.chi2):
        excess = (fit.chi2 - best.chi2) / variance
        known = any(
            np.allclose(fit.parameters[:SCENE], other.parameters[:SCENE], atol=0.01) for _, other in ways
        )
        if excess < KEPT_CHI2 and not known:
            ways.append((excess, fit))
    # Laplace's approximation: the height of a peak times its width
    weights = [np.exp(-excess / 2) * np.sqrt(np.linalg.det(_scene_covariance(fit))) for excess, fit in ways]
    shared = np.zeros((SCENE, SCENE))
    shared[0, 0] = ASSUMED_BAR_SD**2 if all(flat.found for flat in flats) else 0.0
    return [
        Aslant(
            fit.parameters[:SCENE], variance * _scene_covariance(fit) + shared, float(weight / sum(weights))
        )
        for (_, fit), weight in zip(ways, weights, strict=True)
    ]


def _upright(flat: Flat) -> Flat:
    """Return a flat whose Y runs as y does in the picture."""
    return replace(flat, mm=flat.mm * [1, -1]) if fit_similarity(flat).mirrored else flat


def _explained(chi2: float, dof: int, flats: list[Flat]) -> bool:
    """Say whether the marks lie where a slanting camera sees them: within their errors, or within half a pixel."""
    points = sum(len(flat.mm) for flat in flats)
    sd_px = np.sqrt(sum(len(flat.mm) * flat.sd_px**2 for flat in flats) / points)
    return dof < 1 or chi2 / dof < 2.5 or np.sqrt(chi2 / (2 * points)) * sd_px < 0.5


def _penalty(parameters: int, data: float) -> float:
    """Return what Akaike's corrected criterion charges for parameters."""
    return 2 * parameters + 2 * parameters * (parameters + 1) / max(data - parameters - 1, 1.0)


def _scene_covariance(fit: Fitted) -> Floats:
    """Return the covariance of the scene's own parameters."""
    return fit.covariance[:SCENE, :SCENE]


def _fit_square(flats: list[Flat], log_distance: float, centre_px: Floats) -> Fitted:
    """Fit the scale and the flats' poses under a camera that is square to them."""
    start = _start(flats, np.zeros(2), log_distance, centre_px)
    fixed = [1, 2, 3]

    def residuals(free: Floats) -> Floats:
        return _misfits(np.insert(free, 1, start[fixed]), flats, centre_px)

    return fit_least_squares(residuals, np.delete(start, fixed), np.delete(_steps(len(flats)), fixed))


def _fit_from(
    start: Floats, flats: list[Flat], distance: tuple[float, float], focal: Focal | None, centre_px: Floats
) -> Fitted:
    """Fit scale, tilt, distance and poses together, beginning somewhere."""

    def residuals(values: Floats) -> Floats:
        log_mm_per_px, a, b, log_distance = values[:SCENE]
        beforehand = [
            a / WIDEST_TILT_SD,
            b / WIDEST_TILT_SD,
            (log_distance - distance[0]) / max(distance[1], SHARPEST),
        ]
        if focal is not None:
            beforehand.append((log_distance - log_mm_per_px - np.log(focal.px)) / focal.log_sd)
        return np.concatenate([_misfits(values, flats, centre_px), beforehand])

    return fit_least_squares(residuals, start, _steps(len(flats)))


def _marks_chi2(values: Floats, flats: list[Flat], centre_px: Floats) -> float:
    """Return the sum of squared misfits of the marks alone."""
    rest = _misfits(values, flats, centre_px)
    return float(rest @ rest)


def _misfits(values: Floats, flats: list[Flat], centre_px: Floats) -> Floats:
    """Return how far marks are seen from where they should be, in their standard uncertainties."""
    rests = []
    for flat, pose in zip(flats, values[SCENE:].reshape(-1, POSE), strict=True):
        rests.append(((_project(values[:SCENE], flat, pose, centre_px) - flat.at_px) / flat.sd_px).ravel())
    return np.concatenate(rests)


def _project(scene: Floats, flat: Flat, pose: Floats, centre_px: Floats) -> Floats:
    """Return where the marks of a flat are seen: the equations of ``frame`` the other way round."""
    log_mm_per_px, a, b, log_distance = scene
    steep = np.hypot(a, b)
    if steep > STEEPEST:  # no camera looks along the plane; keeps the steps of a fit in bounds
        a, b = a * STEEPEST / steep, b * STEEPEST / steep
    distance = np.exp(np.clip(log_distance, *DISTANCES))
    c, r = np.sqrt(1 - a * a - b * b), np.sqrt(1 - b * b)
    e1, e2 = np.array([c, 0.0, -a]) / r, np.array([-a * b / r, r, -b * c / r])
    turn, shift_x, shift_y = pose
    x, y = flat.mm.T
    x, y = np.cos(turn) * x - np.sin(turn) * y + shift_x, np.sin(turn) * x + np.cos(turn) * y + shift_y
    points = x[:, None] * e1 + y[:, None] * e2 + [0.0, 0.0, distance]
    depth = np.maximum(points[:, 2:], 1e-3 * distance)
    return np.asarray(centre_px + points[:, :2] / depth * distance * np.exp(-log_mm_per_px))


def _starts(flats: list[Flat], log_distance: float, centre_px: Floats) -> list[Floats]:
    """Return where fits begin: several tilts, and the one that a target's homography shows."""
    tilts = [np.array(tilt) for tilt in STARTS]
    tilts += [
        tilt for flat in flats if flat.spans_a_plane for tilt in _tilts_of(flat, log_distance, centre_px)
    ]
    return [_start(flats, tilt, log_distance, centre_px) for tilt in tilts]


def _tilts_of(flat: Flat, log_distance: float, centre_px: Floats) -> list[Floats]:
    """Return the tilt at which the perspective of a target's homography would be seen from a distance."""
    try:
        matrix = fit_homography(flat.mm, flat.at_px, flat.sd_px).matrix
    except CallError:
        return []
    middle = flat.mm.mean(axis=0)
    local = apply(matrix, middle + np.array([[-1.0, 0.0], [1.0, 0.0], [0.0, -1.0], [0.0, 1.0]]))
    jacobian = np.stack([local[1] - local[0], local[3] - local[2]], axis=1) / 2
    # the gradient of the scale, by px: a plane tilted by sin t recedes by sin t for each mm
    weight = matrix[2, :2] / (matrix[2, :2] @ middle + matrix[2, 2])
    gradient = (
        np.linalg.solve(jacobian.T, weight) * np.sqrt(abs(np.linalg.det(jacobian))) * np.exp(log_distance)
    )
    size = float(np.hypot(*gradient))
    return [gradient * min(1.0, 0.7 / size)] if size > 0 else []


def _start(flats: list[Flat], tilt: Floats, log_distance: float, centre_px: Floats) -> Floats:
    """Return parameters at a tilt: the scale of the first flat, and each flat laid where its marks are seen."""
    log_mm_per_px = -np.log(abs(fit_similarity(flats[0]).turned))
    one = np.ones(1)
    homography = find_homography(
        np.exp(log_mm_per_px) * one, tilt[None], np.exp(-log_distance) * one, 0 * one
    )
    poses = []
    for flat in flats:
        seen = apply(homography[..., 0], flat.at_px - centre_px) @ [1, 1j]
        mm = flat.mm @ [1, 1j]
        away = mm - mm.mean()
        turned = (away.conj() * (seen - seen.mean())).sum()
        turned = turned / abs(turned)
        shift = seen.mean() - turned * mm.mean()
        poses.append([np.angle(turned), shift.real, shift.imag])
    return np.concatenate([[log_mm_per_px, *tilt, log_distance], np.ravel(poses)])


def _steps(flats: int) -> Floats:
    """Return how far apart parameters are taken for derivatives."""
    return np.array([1e-5, 1e-4, 1e-4, 1e-3, *[1e-5, 1e-3, 1e-3] * flats])
