"""Finding the scale card in a photograph, without any pointing.

OpenCV finds the markers (Garrido-Jurado et al. 2014) in a reduced picture; where they stand exactly is measured
here, on the photograph itself. Ink that ran, and bright paper that floods the black, move all edges of a marker
towards the white or all towards the black. The edges within a marker, black to white and white to black, tell that
growth from its size, so that the corners are where the printer was told to set them.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from layout.errors import CallError
from layout.homography import apply
from layout.image.card import CARD, CELLS, CHECK_MM, HEIGHT, marker_cells
from layout.image.photograph import Pixels
from layout.image.sampling import Crop, crop_around, grey
from layout.quantity import Floats

SEARCHES_PX = (2000, 6000)
"""The longer side of the reduced pictures that are searched, one after the other, until all markers are found."""
WORST_PRINT = 0.03
ROUNDS = 6
ALONG = np.linspace(0.25, 0.75, 15)
"""Where an edge of a cell is crossed, in cells along it: away from the corners, which blur into it."""
ACROSS = np.linspace(-0.5, 0.5, 61)
SMALLEST_CELL_PX = 2.5
LEAST_CONTRAST = 0.02
FEWEST_EDGES = 24
LARGEST_SCATTER = 0.12
"""In cells: edges that scatter more are no print of this marker, or are too blurred to be measured."""
OUT_OF_PLACE = 0.15
"""Corners that no flat card puts nearer, in sides of a marker: twice what the strongest barrel distortion does."""
LEAST_SD_PX = 0.02
"""What the model of an edge leaves out: no corner is claimed to be known better."""


@dataclass(frozen=True)
class FoundMark:
    """A corner of a marker: where it is seen, px; where it is on the card, mm; its marker; its uncertainty, px."""

    at_px: tuple[float, float]
    mm: tuple[float, float]
    marker: int
    sd_px: float


@dataclass(frozen=True, eq=False)
class _Edges:
    """The edges between black and white cells of a marker: middles (E, 2) and normals (E, 2) towards the white."""

    middles: Floats
    normals: Floats


def find_card(pixels: Pixels, *, printed_mm: tuple[float, float] = (CHECK_MM, HEIGHT)) -> list[FoundMark]:
    """Find the scale card.

    The assumption: the card is flat and printed true to scale, or as ``printed_mm`` says.

    Parameters
    ----------
    pixels
        The photograph, upright, shape (height, width, 3).
    printed_mm
        What a ruler says of the printed card: the length of the check line, and the height of the card.

    Returns
    -------
    list of FoundMark
        Four corners of each marker that is seen and sharp enough; empty without a card.

    Raises
    ------
    CallError
        If the picture shows more than one card, or if ``printed_mm`` is no print of this card.
    """
    stretch = np.divide(printed_mm, (CHECK_MM, HEIGHT))
    if not (np.abs(stretch - 1) <= WORST_PRINT).all():
        text = (
            f"needs a check line of about {CHECK_MM:.0f} mm and a height of about {HEIGHT:.0f} mm, "
            f"has {printed_mm[0]!r} and {printed_mm[1]!r}; print the card again at 100 %"
        )
        raise CallError(text)
    found: list[FoundMark] = []
    for number, corners in sorted(_detect(pixels).items()):
        measured = _measure(pixels, number, corners)
        if measured is None:
            continue
        for at, sd, mm in zip(*measured, CARD[number] * stretch, strict=True):
            found.append(
                FoundMark((float(at[0]), float(at[1])), (float(mm[0]), float(mm[1])), number, float(sd))
            )
    _need_one_card(found)
    return found


def _detect(pixels: Pixels) -> dict[int, Floats]:
    """Find the card's markers roughly: the corners (4, 2) of each, px."""
    import cv2

    family = cv2.aruco.getPredefinedDictionary(cv2.aruco.DICT_APRILTAG_36h11)
    ways = cv2.aruco.DetectorParameters()
    # cells that are blurred into each other still show their own brightness in the middle
    ways.perspectiveRemovePixelPerCell = 8
    ways.perspectiveRemoveIgnoredMarginPerCell = 0.25
    detector = cv2.aruco.ArucoDetector(family, ways)
    seen: dict[int, Floats] = {}
    longest = max(pixels.shape[:2])
    for search_px in SEARCHES_PX:
        factor = min(1.0, search_px / longest)
        corners, numbers, _ = detector.detectMarkers(_reduced_grey(pixels, factor))
        here: dict[int, Floats] = {}
        for number, quad in zip([] if numbers is None else np.ravel(numbers).tolist(), corners, strict=True):
            if number in CARD:
                _need_new(number, here)
                # pixel centres stand on whole numbers in the reduced picture too
                here[number] = (np.asarray(quad, float).reshape(4, 2) + 0.5) / factor - 0.5
        seen |= here
        if factor == 1 or len(seen) == len(CARD):
            break
    return seen


def _reduced_grey(pixels: Pixels, factor: float) -> Any:  # noqa: ANN401 - OpenCV's arrays have no better type
    """Return the picture in grey, reduced."""
    import cv2

    small: Any = pixels
    if factor < 1:
        small = cv2.resize(pixels, None, fx=factor, fy=factor, interpolation=cv2.INTER_AREA)
    return grey(small)


def _measure(pixels: Pixels, number: int, corners_px: Floats) -> tuple[Floats, Floats] | None:
    """Measure the corners of a marker, px, and their standard uncertainties; None where it is too small or blurred."""
    import cv2

    square = np.array([[0, 0], [CELLS, 0], [CELLS, CELLS], [0, CELLS]], float)
    sides = np.linalg.norm(np.roll(corners_px, -1, axis=0) - corners_px, axis=1)
    if sides.min() < CELLS * SMALLEST_CELL_PX:
        return None
    crop = crop_around(pixels, corners_px, sides.max() / CELLS)
    edges = _edges(number)
    start: Any = cv2.getPerspectiveTransform(square.astype(np.float32), corners_px.astype(np.float32))
    to_px: Floats = np.asarray(start, float)
    for _ in range(ROUNDS):
        offsets, clear = _offsets(crop, to_px, edges)
        fit = _fit(edges, offsets, clear)
        if fit is None:
            return None
        shift, covariance, scatter = fit
        to_px = to_px @ _small_map(shift)
    if scatter > LARGEST_SCATTER:
        return None
    at = apply(to_px, square)
    return at, np.array([_corner_sd(to_px, corner, covariance) for corner in square])


def _edges(number: int) -> _Edges:
    """List the edges between black and white cells, in cells from the upper left corner of the black border."""
    white = np.pad(marker_cells(number), 1, constant_values=True).astype(int)
    middles, normals = [], []
    for axis in (0, 1):
        step = np.diff(white, axis=axis)
        for row, column in np.argwhere(step != 0).tolist():
            # the padding shifts all by one; along its own direction an edge has its middle at half a cell
            middle = (column - 0.5, row) if axis == 0 else (column, row - 0.5)
            sign = step[row, column]
            middles.append(middle)
            normals.append((0, sign) if axis == 0 else (sign, 0))
    return _Edges(np.array(middles, float), np.array(normals, float))


def _offsets(crop: Crop, to_px: Floats, edges: _Edges) -> tuple[Floats, Any]:
    """Measure how far towards the white each edge stands from where the map puts it, in cells; and which are clear."""
    along = edges.normals[:, ::-1]
    places = (
        edges.middles[:, None, None]
        + (ALONG - 0.5)[:, None, None] * along[:, None, None]
        + ACROSS[:, None] * edges.normals[:, None, None]
    )
    at_px = apply(to_px, places)
    profiles = crop.sample(at_px).mean(axis=1)
    black, white = profiles[:, :5].mean(axis=1), profiles[:, -5:].mean(axis=1)
    level = (profiles - black[:, None]) / np.maximum(white - black, 1e-9)[:, None] - 0.5
    clear = (white - black > LEAST_CONTRAST) & crop.holds(at_px).all(axis=(1, 2))
    # of several crossings of the half level the one nearest to the middle
    rises = (level[:, :-1] < 0) & (level[:, 1:] >= 0)
    distance = np.where(rises, np.abs(ACROSS[:-1]), np.inf)
    first = distance.argmin(axis=1)
    rows = np.arange(len(level))
    low, high = level[rows, first], level[rows, first + 1]
    share = np.divide(-low, high - low, out=np.full_like(low, 0.5), where=high > low)
    return ACROSS[first] + share * (ACROSS[1] - ACROSS[0]), clear & np.isfinite(distance.min(axis=1))


def _fit(edges: _Edges, offsets: Floats, clear: Any) -> tuple[Floats, Floats, float] | None:  # noqa: ANN401
    """Fit a small map of the plane (8 numbers) and the growth in both directions to the offsets of the edges."""
    design = np.column_stack([_normal_shift(edges.middles, edges.normals), np.abs(edges.normals)])
    keep = clear.copy()
    for _ in range(3):
        if keep.sum() < FEWEST_EDGES:
            return None
        solution = np.linalg.lstsq(design[keep], offsets[keep], rcond=None)[0]
        left = offsets - design @ solution
        # 1.4826: from the median of the absolute values to the sd of a normal distribution
        spread = max(1.4826 * float(np.median(np.abs(left[keep]))), 0.002)
        keep = clear & (np.abs(left) < 4 * spread)
    used = design[keep]
    scatter = float(np.sqrt((left[keep] ** 2).sum() / max(keep.sum() - used.shape[1], 1)))
    covariance = scatter**2 * np.linalg.pinv(used.T @ used)
    return solution[:8], covariance[:8, :8], scatter


def _normal_shift(at: Floats, normals: Floats) -> Floats:
    """Return what each number of a small map shifts points along their normals, shape (N, 8)."""
    x, y = at.T
    u, v = normals.T
    # to first order of (x + a x + b y + c) / (1 - g x - h y), and of the same for y
    return np.column_stack([u * x, u * y, u, v * x, v * y, v, x * (u * x + v * y), y * (u * x + v * y)])


def _small_map(shift: Floats) -> Floats:
    """Return the map of the plane that the eight numbers stand for, shape (3, 3)."""
    a, b, c, d, e, f, g, h = shift
    return np.array([[1 + a, b, c], [d, 1 + e, f], [-g, -h, 1.0]])


def _corner_sd(to_px: Floats, corner: Floats, covariance: Floats) -> float:
    """Return the standard uncertainty of a corner in each direction, px."""
    twice = np.array([corner, corner])
    in_cells = _normal_shift(twice, np.eye(2))
    third = to_px[2] @ [*corner, 1.0]
    scale = np.sqrt(abs(np.linalg.det(to_px) / third**3))
    spread = np.trace(in_cells @ covariance @ in_cells.T) / 2
    return float(np.hypot(scale * np.sqrt(spread), LEAST_SD_PX))


def _need_new(number: int, seen: dict[int, Floats]) -> None:
    """Refuse a marker that is seen twice."""
    if number in seen:
        text = f"shows the marker {number} twice; keep one scale card in the picture"
        raise CallError(text)


def _need_one_card(found: list[FoundMark]) -> None:
    """Refuse markers that cannot be of one flat card: one map of the plane must put them all about right."""
    import cv2

    if len(found) <= 4:
        return
    mm, px = (np.array([getattr(mark, name) for mark in found]) for name in ("mm", "at_px"))
    to_px, _ = cv2.findHomography(mm, px)
    away = np.linalg.norm(apply(np.asarray(to_px), mm) - px, axis=1)
    sides = np.linalg.norm(px[1::4] - px[::4], axis=1)
    if away.max() > OUT_OF_PLACE * sides.min():
        text = "shows markers of more than one scale card, or a bent one; keep one flat card in the picture"
        raise CallError(text)
