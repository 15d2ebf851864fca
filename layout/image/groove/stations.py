"""Stations along a groove: their mean profile, each one's own centre, and the line through them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.lib.stride_tricks import sliding_window_view

from layout.image.groove.course import unlevelled
from layout.image.groove.hollow import Hollow
from layout.image.groove.smoothing import SmoothLine, smooth_line
from layout.image.groove.strip import Strip
from layout.image.sampling import Brightness
from layout.quantity import Floats

ROUNDS = 3
ROUNDED = 0.002
"""A mean of many is not better than this share of the brightness: eight bits are round."""
OUTER = 0.15
"""The face is what the outer parts of a profile show, so much of it on either side."""
OF_PLACE, OF_SLOPE, OF_WIDTH, OF_LEVEL, OF_GRADIENT = 0.4, 0.3, 0.12, 0.3, 0.2
"""How much stations differ (standard deviations): place in half widths, log slope, log width, level and gradient."""
ALIKE_ACROSS, UNALIKE = 0.3, 0.05
"""Over how many half widths the clay's own marks are alike, and which share of their variance is not."""
ALIKE_ALONG = 0.25
"""Stations err alike over so many widths along the groove."""
SHORTEST = 3.0
"""The line does not wave over less than so many widths."""
STRETCH = 9
UNLIKE, LEAST_WEIGHT = 3.0, 0.03
"""A station so many times less like the groove than most counts half; one that counts less than this does not."""


def against_face(rows: Brightness) -> Floats:
    """Return profiles as contrast against the face on both sides: a shadow may fill more than half of the middle."""
    many = int(OUTER * rows.shape[1])
    face = np.concatenate([rows[:, :many], rows[:, -many:]], axis=1)
    level = np.maximum(np.median(face, axis=1, keepdims=True), 1e-3)
    return np.asarray(rows / level - 1, float)


def mean_profile(rows: Floats, spacing_px: float, width_px: float) -> tuple[Floats, Floats]:
    """Return the mean of profiles (S, U) without what crosses some of them, and its standard uncertainty."""
    middle = np.median(rows, axis=0)
    scatter = 1.4826 * np.median(np.abs(rows - middle), axis=0) + 1e-4
    mean = np.clip(rows, middle - 2.5 * scatter, middle + 2.5 * scatter).mean(axis=0)
    # what marks the clay is as long as the groove is wide: several stations show it
    alike = min(1 + 1.5 * width_px / spacing_px, len(rows) / 4)
    return mean, np.hypot(scatter * np.sqrt(alike / len(rows)), ROUNDED)


@dataclass(frozen=True, eq=False)
class Stations:
    """Each station by the fitted section.

    Parameters
    ----------
    places_px
        How far from the fitted centre the station has its own, shape (S,).
    agreement
        How well the station correlates with the groove there, -1 to 1, shape (S,).
    depth
        How much deeper it is than the fitted one (log), shape (S,).
    rows
        Profiles brought to one place and level, shape (S, U).
    """

    places_px: Floats
    agreement: Floats
    depth: Floats
    rows: Floats


def fit_stations(rows: Floats, axis_px: Floats, hollow: Hollow, reach_px: float) -> Stations:
    """Fit to each station the place, depth and width of its groove, and the level and gradient of its face.

    Generalised least squares about the fitted profile, for noise that is alike across part of the groove, with
    priors on how much stations differ; repeated from the place that it led to.

    Parameters
    ----------
    rows, axis_px
        Contrast (S, U) on an even axis (U,).
    hollow
        The groove of the mean profile.
    reach_px
        How far from its centre the profiles are used.
    """
    near = np.abs(axis_px - hollow.centre_px) < reach_px
    shown = hollow.contrast(axis_px)
    design = np.column_stack([*hollow.modes(axis_px), np.ones_like(axis_px), axis_px / axis_px[-1]])
    gain = _gain(design[near], axis_px[near], rows[:, near] - shown[near], hollow.half_px)
    furthest = 0.6 * hollow.half_px + 1
    places = np.zeros(len(rows))
    for _ in range(ROUNDS):
        change = (_moved(rows, axis_px, places) - shown)[:, near] @ gain[0]
        places = np.clip(places + change, -furthest, furthest)
    there = _moved(rows, axis_px, places)
    agreement = _agreement(there[:, near], shown[near])
    own = (there - shown)[:, near] @ gain.T
    return Stations(places, agreement, own[:, 1], there - own[:, 3:] @ design[:, 3:].T)


def _gain(design: Floats, axis_px: Floats, rest: Floats, half_px: float) -> Floats:
    """Return what turns a station's deviations (U,) into place, log slope, log width, level and gradient, (5, U)."""
    noise = 1.4826 * np.median(np.abs(rest)) + 0.01
    apart = np.abs(axis_px[:, None] - axis_px) / (ALIKE_ACROSS * half_px + 1)
    certain = np.linalg.inv(noise**2 * (np.exp(-apart) + UNALIKE * np.eye(len(axis_px))))
    prior = np.array([OF_PLACE * half_px + 0.5, OF_SLOPE, OF_WIDTH, OF_LEVEL, OF_GRADIENT])
    normal = design.T @ certain @ design + np.diag(prior**-2.0)
    return np.asarray(np.linalg.solve(normal, design.T @ certain), float)


def _moved(rows: Floats, axis_px: Floats, by_px: Floats) -> Floats:
    """Return rows (S, U), each read so far (S,) to the right, linearly."""
    place = np.arange(rows.shape[1]) + by_px[:, None] / (axis_px[1] - axis_px[0])
    left = np.clip(np.floor(place).astype(np.intp), 0, rows.shape[1] - 2)
    here = np.take_along_axis(rows, left, axis=1)
    beyond = np.take_along_axis(rows, left + 1, axis=1)
    return np.asarray(here + (beyond - here) * np.clip(place - left, 0, 1))


def _agreement(rows: Floats, shown: Floats) -> Floats:
    """Return the correlation of each row with a profile, whatever their levels and gradients."""
    there, groove = unlevelled(rows), unlevelled(shown[None])[0]
    size = np.linalg.norm(there, axis=1) * np.linalg.norm(groove) + 1e-9
    return np.asarray(there @ groove / size, float)


def weights_of(agreement: Floats, least: float) -> Floats:
    """Return how much each station counts, 0 to 1, by its agreement with the groove.

    What crosses the groove at a station shows: it looks less like the groove than most. Where a whole stretch of
    stations agrees less than ``least``, none counts: single ones agree by chance.
    """
    unlike = np.maximum(1 - agreement, 0.003)
    around = sliding_window_view(np.pad(agreement, STRETCH // 2, mode="reflect"), STRETCH)
    seen = np.clip((np.median(around, axis=1) - least) / 0.25, 0, 1) * np.clip(agreement, 0, 1) ** 2
    weights = seen / (1 + (unlike / (UNLIKE * np.median(unlike))) ** 2)
    return np.where(weights > LEAST_WEIGHT, weights, 0.0)


def line_through(strip: Strip, centres_px: Floats, weights: Floats, width_px: float) -> SmoothLine:
    """Return a smooth line through the centres of a groove of a width."""
    shortest = max(SHORTEST * width_px, 3 * strip.spacing_px)
    alike = max(1.0, ALIKE_ALONG * width_px / strip.spacing_px)
    return smooth_line(
        strip.along_px, centres_px, weights, length=strip.length_px, shortest=shortest, alike=alike
    )
