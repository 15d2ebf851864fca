"""The faces of fragments on one plate, told apart, and whether two pictures of one fragment have one scale.

A plate shows several faces on one plain ground, often put together from several pictures that were resized and
turned. What stands out from the ground is traced, and what is printed is left out. Which face is which stays a
person's decision: the cross in which faces are often laid out is a custom, not a fact about the fragment.
"""

from __future__ import annotations

import contextlib
import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from layout.errors import CallError
from layout.image.contour import Contour, moved, trace
from layout.image.photograph import Pixels
from layout.image.silhouette.edge import STEP_PX
from layout.image.silhouette.ground import Plate, part_ground
from layout.image.silhouette.ring import evenly, turn_deg
from layout.quantity import Floats

Ring = NDArray[np.complex128]
Similarity = tuple[complex, complex]
"""Factor and shift: scale and turn are the factor's amount and angle."""

SMALLEST_SHARE = 0.02
"""A face has at least this share of the largest face's area: an edge of a thin fragment has more, a digit less."""
SMALLEST_CELLS = 150
PICTURE_SHARE = 0.1
"""What a picture of its own shows fills at least this share of it: print on a card fills less."""
MARGIN = 0.04
STRAIGHT = 0.0015
"""A ruler-straight piece strays from its line by less than this share of its length, or by half a pixel (RMS)."""
UNLIKE = 0.03
"""Silhouettes that differ by more than this share of their size (RMS) are not of one fragment."""


@dataclass(frozen=True, eq=False)
class FoundFace:
    """One face on a plate.

    Attributes
    ----------
    region
        x, y, width, height, px: an upright rectangle that holds this face, with a margin as far as no other object
        reaches into it. Where faces stand so close that even the tight rectangle meets a neighbour, a part of the
        neighbour stays in it.
    contour
        The contour of the face, on the whole photograph.
    """

    region: tuple[int, int, int, int]
    contour: Contour


def find_faces(pixels: Pixels) -> list[FoundFace]:
    """Find all faces of fragments on a plain ground, the largest first.

    What is printed is told from clay by its shape: sharp square corners, three or more, between ruler-straight sides;
    or straight sides, or five times more length than width, with a hue unlike that of the largest face; or a ground
    that shows through. Clay is assumed to be none of these. Left out as well is what runs over the rim, what cannot
    be told from the ground along its contour, and what is small beside the largest face: digits, crumbs.

    Parameters
    ----------
    pixels
        Shape (height, width, 3), sRGB of 8 or 16 bits.

    Raises
    ------
    CallError
        If the ground is not plain, or no face is found.
    """
    faces = _faces_of(pixels)
    if not faces:
        text = "faces need clay that stands out from a plain ground, nothing of that kind was found"
        message = f"{text}; trace by hand, or photograph on plain black, grey or white"
        raise CallError(message)
    faces.sort(key=lambda face: -_area(face.contour.points_px))
    least = SMALLEST_SHARE * _area(faces[0].contour.points_px)
    return [face for face in faces if _area(face.contour.points_px) >= least]


def _faces_of(pixels: Pixels) -> list[FoundFace]:
    """Return the faces on a plate, and those on pictures pasted on it that bring a ground of their own."""
    plate = part_ground(pixels)
    traced, faces = [], []
    for thing, cells in enumerate(np.bincount(plate.things.ravel())[1:], 1):
        if cells < SMALLEST_CELLS:
            break
        inner = _faces_within(pixels, plate, thing)
        faces += inner
        with contextlib.suppress(CallError):
            if not inner:
                traced.append((thing, trace(pixels, plate, thing)))
    clay = [one for one in traced if not _is_card(plate, *one)]
    if clay:
        hue = plate.hue_of(max(clay, key=lambda one: _area(one[1].points_px))[0])
        for thing, contour in clay:
            unlike = abs(plate.hue_of(thing) - hue) > abs(hue) / 2
            if not (unlike and (_straight(contour) > 0.5 or _slenderness(contour) > 5)):
                faces.append(FoundFace(_region(plate, thing, contour, pixels.shape), contour))
    return faces


def _is_card(plate: Plate, thing: int, contour: Contour) -> bool:
    """Say whether a thing is cut square, or mostly the ground itself with something printed on it."""
    if plate.blank[plate.things == thing].mean() > 0.5:
        return True
    return _straight(contour) > 0.3 and _square_corners(contour) > 2


def _faces_within(pixels: Pixels, plate: Plate, thing: int) -> list[FoundFace]:
    """Return the faces on a thing that is itself a picture, none if it is not."""
    picture = plate.picture_at(thing)
    if picture is None:
        return []
    try:
        faces = _faces_of(pixels[picture])
    except CallError:
        return []
    rows, columns = picture
    if sum(_area(face.contour.points_px) for face in faces) < PICTURE_SHARE * pixels[picture][..., 0].size:
        return []
    left, top = int(columns.start), int(rows.start)
    by = np.array([left, top], float)
    regions = [(x + left, y + top, width, height) for x, y, width, height in (face.region for face in faces)]
    return [FoundFace(region, moved(face.contour, by)) for region, face in zip(regions, faces, strict=True)]


def _area(ring: Floats) -> float:
    """Return the area within a ring."""
    x, y = ring.T
    return float(abs(np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y)) / 2)


def _straight(contour: Contour) -> float:
    """Return which share of a contour is ruler-straight."""
    return sum(len(piece) for piece in contour.pieces if _is_straight(piece)) / len(contour.points_px)


def _slenderness(contour: Contour) -> float:
    """Return how many times longer than wide a contour is."""
    import cv2

    _, (width, height), _ = cv2.minAreaRect(contour.points_px.astype(np.float32))
    return float(max(width, height) / max(min(width, height), 1e-9))


def _square_corners(contour: Contour) -> int:
    """Return how many corners of a contour are sharp and square."""
    ring = contour.points_px
    # longer than the blur of the lens, shorter than the round corners that fingers make
    reach = max(4, round(0.01 * len(ring)))
    starts = np.cumsum([0, *(len(piece) for piece in contour.pieces[:-1])])
    turns = [
        turn_deg(ring, reach)[np.arange(start - reach, start + reach + 1) % len(ring)].max()
        for start in starts
    ]
    return int(np.sum(np.abs(np.array(turns) - 90) < 15))


def _is_straight(piece: Floats) -> bool:
    """Say whether the middle of a piece of a contour is as straight as if it were ruled."""
    middle = piece[len(piece) // 10 : len(piece) - len(piece) // 10]
    if len(middle) < 4:
        return False
    off = np.linalg.svd(middle - middle.mean(axis=0), compute_uv=False)[1] / math.sqrt(len(middle))
    return bool(off < max(0.5, STRAIGHT * STEP_PX * len(piece)))


def _region(plate: Plate, thing: int, contour: Contour, shape: tuple[int, ...]) -> tuple[int, int, int, int]:
    """Return the rectangle around a face with the widest margin that keeps other things out."""
    low, high = contour.points_px.min(axis=0), contour.points_px.max(axis=0)
    widest = max(10.0, MARGIN * float((high - low).max()))
    last = np.array([shape[1], shape[0]])
    for margin in widest * np.array([1, 0.75, 0.5, 0.25, 0]):
        first = np.clip(np.floor(low - margin), 0, last).astype(int)
        end = np.clip(np.ceil(high + margin) + 1, 0, last).astype(int)
        cells = [
            np.floor(first / plate.px_per_cell).astype(int),
            np.ceil(end / plate.px_per_cell).astype(int),
        ]
        inside = plate.things[cells[0][1] : cells[1][1], cells[0][0] : cells[1][0]]
        if ((inside == 0) | (inside == thing)).all():
            break
    return int(first[0]), int(first[1]), int(end[0] - first[0]), int(end[1] - first[1])


# --- Two pictures of one fragment ----------------------------------------------------------------------------------


@dataclass(frozen=True)
class Match:
    """How the second of two silhouettes lies on the first.

    Attributes
    ----------
    ratio, ratio_sd
        How many pixels of the first one pixel of the second is, and its standard uncertainty.
    turn_deg
        By how much the second is turned, clockwise as seen, once it is mirrored left to right (if ``mirrored``).
    mirrored
        Whether it had to be mirrored: obverse and reverse are, two pictures of one face are not.
    rms_px
        How far the silhouettes then are from each other, px of the first.
    """

    ratio: float
    ratio_sd: float
    turn_deg: float
    mirrored: bool
    rms_px: float


def match_silhouettes(first: Contour, second: Contour) -> Match:
    """Find how one silhouette of a fragment lies on another: whether two pictures have one scale.

    The silhouette of the reverse is the mirror image of that of the obverse, whichever way the fragment was turned
    over. Assumed is that both were seen square and from far off. From a distance D what lies h lower is seen smaller
    by h / D, and a break that slopes to its foot changes sides with the fragment: so near a camera obverse and reverse
    of a thick fragment differ by a percent, and more than ``ratio_sd`` says, though their pictures have one scale.

    Returns
    -------
    Match
        ``ratio_sd`` is what the misfit of the silhouettes allows, with its correlation along them. For a silhouette
        that is symmetric itself ``turn_deg`` and ``mirrored`` are one of several equal answers.

    Raises
    ------
    CallError
        If the silhouettes differ by more than 3 % of their size: they are not of one fragment.
    """
    target = _complex(first.points_px)
    found = []
    for mirrored in (False, True):
        moving = _complex(second.points_px)
        # mirrored left to right; turned round, to run clockwise again
        moving = -moving[::-1].conj() if mirrored else moving
        found += [
            (*_register(target, moving, start, samples=100), mirrored) for start in _starts(target, moving)
        ]
    fit, _, _, mirrored = min(found, key=lambda one: one[1])
    moving = -_complex(second.points_px)[::-1].conj() if mirrored else _complex(second.points_px)
    fit, rms_px, sd = _register(target, moving, fit, samples=400)
    size = math.sqrt(_area(first.points_px))
    if rms_px > UNLIKE * size:
        text = (
            f"needs two silhouettes of one fragment, these differ by {rms_px:.1f} px (RMS) on {size:.0f} px"
        )
        message = f"{text}; compare obverse and reverse, or two pictures of one face"
        raise CallError(message)
    return Match(abs(fit[0]), sd, math.degrees(np.angle(fit[0])), mirrored, rms_px)


def _complex(ring: Floats) -> Ring:
    """Return a ring as complex numbers: a similarity is then a factor and a sum."""
    return np.asarray(ring[:, 0] + 1j * ring[:, 1])


def _resampled(ring: Ring, count: int) -> Ring:
    """Return a ring of so many points, evenly spaced."""
    points = np.column_stack([ring.real, ring.imag])
    length = float(np.abs(np.diff(np.append(ring, ring[0]))).sum())
    return _complex(evenly(points, length / count))


def _starts(target: Ring, moving: Ring) -> list[Similarity]:
    """Return the similarities under which two rings, run through evenly, agree best, for each of the best starts."""
    count = 256
    a, b = _resampled(target, count), _resampled(moving, count)
    agree = np.fft.ifft(np.fft.fft(a - a.mean()) * np.fft.fft(b - b.mean()).conj())
    height, starts = np.abs(agree), []
    for _ in range(4):
        at = int(height.argmax())
        factor = complex(agree[at] / np.sum(np.abs(b - b.mean()) ** 2))
        starts.append((factor, complex(a.mean() - factor * b.mean())))
        height[np.arange(at - count // 16, at + count // 16 + 1) % count] = 0
    return starts


def _register(
    target: Ring, moving: Ring, start: Similarity, *, samples: int
) -> tuple[Similarity, float, float]:
    """Return the similarity that lays one ring on another, the RMS distance left, and the sd of its scale.

    Each point of one ring is drawn to the tangent at the nearest point of the other, again and again (Chen and
    Medioni 1992); large distances count less (Huber 1964).
    """
    onto, points = _resampled(target, 4 * samples), _resampled(moving, samples)
    middle = points.mean()
    points = points - middle
    normals = np.roll(onto, -1) - np.roll(onto, 1)
    normals = 1j * normals / np.abs(normals)
    factor, shift = start[0], start[1] + start[0] * middle
    for _ in range(15):
        nearest = np.abs((factor * points + shift)[:, None] - onto).argmin(axis=1)
        across = normals[nearest].conj()
        design = np.column_stack(
            [(across * term).real for term in (points, 1j * points, 1 + 0 * points, 1j + 0 * points)]
        )
        wanted = (across * onto[nearest]).real
        off = design @ [factor.real, factor.imag, shift.real, shift.imag] - wanted
        weights = 1 / np.maximum(1, np.abs(off) / (2 * 1.4826 * np.median(np.abs(off)) + 1e-9))
        root = np.sqrt(weights)
        u, v, x, y = np.linalg.lstsq(design * root[:, None], wanted * root, rcond=None)[0]
        factor, shift = complex(u, v), complex(x, y)
    off = design @ [u, v, x, y] - wanted
    along = np.array([u, v, 0, 0]) / abs(factor)
    inverse = np.linalg.inv((design * weights[:, None]).T @ design)
    variance = float(np.mean(weights * off**2)) * _correlation(off) * float(along @ inverse @ along)
    return (factor, shift - factor * middle), float(np.sqrt(np.mean(off**2))), math.sqrt(variance)


def _correlation(off: Floats) -> float:
    """Return how many neighbours on a ring count as one: the sum of the correlations up to the first that is none."""
    power = np.abs(np.fft.fft(off - off.mean())) ** 2
    correlation = np.fft.ifft(power).real / max(float(power.mean()), 1e-30)
    half = correlation[1 : len(off) // 2]
    ends = np.flatnonzero(half <= 0)
    return 1 + 2 * float(half[: ends[0] if len(ends) else len(half)].sum())
