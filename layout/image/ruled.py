"""Propose the other rulings of a face from one that is traced in each direction.

What runs as a traced ruling runs and looks as it looks is followed across the face and then drawn to its groove.
Nothing is written to a record.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.lib.stride_tricks import sliding_window_view
from numpy.typing import NDArray

from layout.errors import CallError
from layout.image.groove.course import trace_courses
from layout.image.grooves import find_groove
from layout.image.photograph import Pixels
from layout.image.sampling import Brightness
from layout.image.turned_face import FINE, Face, turn_face
from layout.quantity import Floats

Runs = Literal["vertical", "horizontal"]

APART = 3.0
"""No two rulings are nearer to each other than so many widths."""
STIFFNESS, MOST = 0.02, 60
"""Price of a path's move by a row from block to block; so many paths are followed at most."""

LEAST_SHOWN, SHOWN, STRETCH = 0.5, 0.35, 7
"""What shows less on average is not drawn; where the median of so many blocks shows less, a ruling has ended."""
ALIKE = 1.6
"""A groove this many times as wide as the traced one, or as narrow, is something else."""
CLOSEST, REPEATED, REPEATS = 4.0, 0.3, 0.25
"""The least pitch in widths; what shows less does not count for it; the least autocorrelation that makes one."""
SURELY = 0.75
"""A path that shows so much tells where others are expected."""
CONFIDENCE = (-18.9, 25.0, 6.0, 1.5)
"""Log odds: constant, by how much it shows, how often it is seen, how it fits. A regression on 180 rendered faces gave
steeper ones; photographs are more various."""
LEAST_CONFIDENCE, MOST_CONFIDENCE = 0.5, 0.99


@dataclass(frozen=True, eq=False)
class ProposedRuling:
    """A ruling that nobody traced.

    Parameters
    ----------
    runs
        As in the record.
    points_px
        Along the groove's centre, shape (P, 2), left to right or top to bottom.
    confidence
        How probable it is that a ruling runs there, 0 to 1: of the proposals on rendered faces about this share were
        rulings; what is less probable than not is not proposed. Pictures unlike those (prints, drawings) are not
        covered.
    """

    runs: Runs
    points_px: Floats
    confidence: float


def propose_rulings(
    pixels: Pixels, traces: list[tuple[Runs, Floats]], within: Floats
) -> list[ProposedRuling]:
    """Propose rulings that run and look as the traced ones do.

    The lamp makes all grooves of a direction look alike; so nothing is proposed in a direction in which no traced
    ruling shows a groove. Rulings are taken to be about parallel, and not nearer to each other than three times
    their width. Horizontal ones are more probable where a regular pitch expects them.

    Parameters
    ----------
    pixels
        The photograph, shape (height, width, 3).
    traces
        The rulings traced so far: ``vertical`` or ``horizontal``, and points of shape (P, 2).
    within
        Polygon of the fragment's face, shape (K, 2), px.

    Returns
    -------
    list of ProposedRuling
        The vertical ones from left to right, then the horizontal ones from top to bottom; none that is traced.

    Raises
    ------
    CallError
        If a trace is not two points or more that are apart, or the polygon not three points or more.

    Examples
    --------
    >>> clay = np.full((60, 200, 3), 128, np.uint8)
    >>> face = np.array([[5.0, 5.0], [195.0, 5.0], [195.0, 55.0], [5.0, 55.0]])
    >>> propose_rulings(clay, [("horizontal", np.array([[10.0, 30.0], [190.0, 30.0]]))], face)
    []
    """
    polygon = np.asarray(within, dtype=float)
    if polygon.ndim != 2 or polygon.shape[-1] != 2 or len(polygon) < 3 or not np.isfinite(polygon).all():
        message = (
            f"the face needs an outline of three finite points or more, has shape {polygon.shape!r}; trace it"
        )
        raise CallError(message)
    proposals: list[ProposedRuling] = []
    directions: tuple[Runs, ...] = ("vertical", "horizontal")
    for runs in directions:
        look = _look_of(pixels, [_ordered(points, runs) for each, points in traces if each == runs])
        if look is not None:
            proposals += _propose(pixels, runs, look, polygon)
    return proposals


def _ordered(points: Floats, runs: Runs) -> Floats:
    """Return a trace from left to right, or from top to bottom: then the lamp is on the same side of all."""
    points = np.asarray(points, dtype=float)
    axis = 1 if runs == "vertical" else 0
    return points[::-1] if points.ndim == 2 and len(points) and points[-1, axis] < points[0, axis] else points


@dataclass(frozen=True, eq=False)
class _Look:
    """How the rulings of a direction look, and where the traced ones run.

    ``frame`` holds the unit vectors along the rulings and across them, ``width_px`` the width at which they match
    best, ``groove_px`` that of their grooves.
    """

    frame: Floats
    width_px: float
    groove_px: float
    angle: int
    lines: list[Floats]


def _look_of(pixels: Pixels, traces: list[Floats]) -> _Look | None:
    """Return how the traced rulings of a direction look; None where none shows a groove."""
    found = [find_groove(pixels, points, _reach_of(points)) for points in traces]
    grooves = [one for one in found if one.groove.found]
    if not grooves:
        return None
    best = max(grooves, key=lambda one: one.groove.seen)
    if best.course is None or best.width_px is None:
        return None
    lines = [one.groove.points_px for one in found]
    along = np.sum([line[-1] - line[0] for line in lines], axis=0)
    along = along / np.hypot(*along)
    frame = np.array([along, [-along[1], along[0]]])
    return _Look(frame, best.course.width_px, best.width_px, best.course.angle, lines)


def _reach_of(trace: Floats) -> float:
    """Return how far from a trace its groove may run, px: a two-hundredth of its length, within bounds."""
    return float(np.clip(np.hypot(*np.ptp(trace, axis=0)) / 200, 6, 40)) if len(trace) else 6.0


@dataclass(frozen=True, eq=False)
class _Candidate:
    """A path across a face: its points, how much it shows (-1 to 1), and where across it passes the middle."""

    points_px: Floats
    shown: float
    across_px: float


def _candidates(face: Face, known: list[Floats], apart: float) -> list[_Candidate]:
    """Follow what shows most across a face, again and again, beside what is known already."""
    evidence, rows = face.evidence.copy(), np.arange(len(face.evidence))[:, None]
    for line in known:
        evidence[np.abs(rows - face.rows_of(line)) <= apart] = -1
    found = []
    for _ in range(MOST):
        path = trace_courses(evidence.T[None], np.array([STIFFNESS]), 1)[1][0]
        evidence[np.abs(rows - path) <= apart] = -1
        blocks = np.flatnonzero(face.inside[path, np.arange(len(path))])
        if len(blocks) < STRETCH:
            break
        shown = face.evidence[path[blocks], blocks]
        ruled = _ruled(shown)
        if ruled is not None and shown[ruled].mean() >= LEAST_SHOWN:
            at = blocks[ruled]
            found.append(_Candidate(face.points(path, at), float(shown[ruled].mean()), _middle(face, path)))
        elif shown.mean() < LEAST_SHOWN / 2:
            break
    return found


def _ruled(shown: Brightness) -> slice | None:
    """Return from where to where a path shows a ruling; None where it nowhere does."""
    around = sliding_window_view(np.pad(shown, STRETCH // 2, mode="reflect"), STRETCH)
    seen = np.flatnonzero((np.median(around, axis=1) > SHOWN) & (shown > SHOWN))
    return slice(int(seen[0]), int(seen[-1]) + 1) if len(seen) >= STRETCH else None


def _middle(face: Face, path: Floats | NDArray[np.intp]) -> float:
    """Return where across, px from the face's corner, a path (rows for all blocks) passes the face's middle."""
    return float(path[len(path) // 2] * face.step_px)


def _propose(pixels: Pixels, runs: Runs, look: _Look, polygon: Floats) -> list[ProposedRuling]:
    """Return the rulings of one direction in order."""
    face = turn_face(pixels, polygon, look.frame, look.width_px, look.angle)
    drawn = []
    for candidate in _candidates(face, look.lines, APART * look.width_px / face.step_px):
        found = find_groove(pixels, candidate.points_px, look.groove_px)
        # the limb of a tablet darkens like a flank, but as wide as no groove
        if found.width_px is not None and abs(np.log(found.width_px / look.groove_px)) < np.log(ALIKE):
            drawn.append((candidate, found.groove))
    pitch = _pitch(face, look.width_px) if runs == "horizontal" else None
    places = [_middle(face, face.rows_of(line)) for line in look.lines]
    # those that show best come first: they tell where the others are expected
    places += [candidate.across_px for candidate, _ in drawn if candidate.shown > SURELY]
    proposals = []
    for candidate, groove in sorted(drawn, key=lambda each: each[0].across_px):
        others = [place for place in places if place != candidate.across_px]
        fits = _fits(candidate.across_px, others, pitch)
        confidence = _confidence(candidate.shown, groove.seen, fits)
        if confidence >= LEAST_CONFIDENCE:
            proposals.append(ProposedRuling(runs, groove.points_px, confidence))
    # across the rulings, the turned axis of the vertical ones runs to the left
    return proposals[::-1] if look.frame[1].sum() < 0 else proposals


def _pitch(face: Face, width_px: float) -> float | None:
    """Return at which distance rulings repeat across a face, px; None where they do not.

    Autocorrelation of the evidence across the face, averaged over each distance and its multiples; of the distances
    that do nearly best the smallest, since its multiples do as well.
    """
    import cv2

    blocks = face.inside.sum(axis=1)
    near = cv2.dilate(face.evidence, np.ones((int(FINE) | 1, 1), np.uint8))
    profile = np.where(2 * blocks > blocks.max(), near.sum(axis=1) / np.maximum(blocks, 1), 0)
    profile = np.clip(profile - REPEATED, 0, None)
    many = len(profile)
    alike = np.fft.irfft(np.abs(np.fft.rfft(profile - profile.mean(), 2 * many)) ** 2)[:many]
    alike = alike / np.arange(many, 0, -1) / max(float(alike[0]) / many, 1e-9)
    lags = np.arange(int(CLOSEST * width_px / face.step_px), many // 3)
    if not len(lags):
        return None
    score = np.array([alike[lag : min(2 * many // 3, 4 * lag + 1) : lag].mean() for lag in lags])
    peaks = np.flatnonzero((score >= np.roll(score, 1)) & (score >= np.roll(score, -1)))
    if not len(peaks) or score[peaks].max() < REPEATS:
        return None
    return float(lags[peaks[score[peaks] > 0.8 * score[peaks].max()][0]] * face.step_px)


def _fits(place: float, others: list[float], pitch: float | None) -> float:
    """Return how well a place fits in with the nearest other by the pitch: 1 on it, 0 far off or without a pitch."""
    if pitch is None or not others:
        return 0.0
    nearest = min((abs(place - other) for other in others), default=0.0)
    return float(max(np.cos(2 * np.pi * nearest / pitch), 0.0))


def _confidence(shown: float, seen: float, fits: float) -> float:
    """Return how probable a ruling is; see `CONFIDENCE`."""
    constant, by_shown, by_seen, by_fit = CONFIDENCE
    odds = constant + by_shown * shown + by_seen * seen + by_fit * fits
    return float(min(1 / (1 + np.exp(-odds)), MOST_CONFIDENCE))
