"""The tablet's body: outline, pillow-shaped faces, and the break that went through it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import shapely
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from sample_images.render import noise
from sample_images.render.grid import Field, Grid, Points

Edge = Literal["left", "right", "upper", "lower"]

SPACING = 0.05
"""Distance of neighbouring points of a dense contour, mm."""

ROUNDING = (2.6, 1.9)
"""Exponents of the edge in profile: flat where the face begins, upright at the girth."""


@dataclass(frozen=True)
class Body:
    """A whole tablet about its axis (x = 0) and its middle (y = 0); all in mm.

    ``half_widths`` are those of the left and right half, ``half_heights`` of the upper and lower one,
    ``exponents`` how square the upper and lower corners are; ``thickness`` is that of the thickest place,
    ``convexities`` how far obverse and reverse fall from the middle to an edge, ``rounding`` how wide the
    rounded rim is, ``wobble`` the standard deviation of the hand-made edge about the smooth outline,
    ``girth_depth`` how far the girth lies below the mean plane of the face in front.
    """

    half_widths: tuple[float, float]
    half_heights: tuple[float, float]
    exponents: tuple[float, float]
    thickness: float
    girth_depth: float
    convexities: tuple[float, float] = (0.9, 2.6)
    rounding: float = 6.5
    wobble: float = 0.28

    @property
    def width(self) -> float:
        """Between the tangents of the smooth outline."""
        return sum(self.half_widths)

    @property
    def height(self) -> float:
        """Between the tangents of the smooth outline."""
        return sum(self.half_heights)

    @property
    def back(self) -> float:
        """Height of the mean plane of the reverse in the frame of the obverse."""
        return 2 / 3 * sum(self.convexities) - self.thickness

    def turned(self) -> Body:
        """Return the same tablet turned over its upper edge, so that the reverse is in front."""
        return Body(
            self.half_widths,
            (self.half_heights[1], self.half_heights[0]),
            (self.exponents[1], self.exponents[0]),
            self.thickness,
            -self.back - self.girth_depth,
            (self.convexities[1], self.convexities[0]),
            self.rounding,
            self.wobble,
        )


@dataclass(frozen=True, eq=False)
class Contour:
    """The girth of the whole tablet, clockwise as seen, from the left end of the upper edge.

    ``points`` (N, 2), ``edges`` the edge that each belongs to.
    """

    points: Points
    edges: tuple[Edge, ...]

    def turned(self) -> Contour:
        """Return the girth as the reverse shows it; edges are named as they lie in the view."""
        swap: dict[Edge, Edge] = {"upper": "lower", "lower": "upper", "left": "left", "right": "right"}
        return Contour((self.points * [1, -1])[::-1], tuple(swap[edge] for edge in self.edges[::-1]))


def smooth_outline(body: Body, count: int = 20_000) -> Points:
    """Return the outline without wobble (N, 2), clockwise as seen, from the left end of the upper edge."""
    angle = np.linspace(0, 2 * np.pi, count, endpoint=False) - 0.75 * np.pi
    cosine, sine = np.cos(angle), np.sin(angle)
    exponent = np.where(sine < 0, *body.exponents)
    half_width = np.where(cosine < 0, *body.half_widths)
    half_height = np.where(sine < 0, *body.half_heights)
    x = half_width * np.sign(cosine) * np.abs(cosine) ** (2 / exponent)
    y = half_height * np.sign(sine) * np.abs(sine) ** (2 / exponent)
    return evenly(np.column_stack([x, y]), SPACING, closed=True)


def make_contour(body: Body, rng: np.random.Generator) -> Contour:
    """Return the hand-made girth: the smooth outline with a correlated wobble across it."""
    smooth = smooth_outline(body)
    tangent = np.roll(smooth, -1, axis=0) - np.roll(smooth, 1, axis=0)
    outward = np.column_stack([tangent[:, 1], -tangent[:, 0]])
    outward /= np.hypot(*outward.T)[:, None]
    length = SPACING * len(smooth)
    at = SPACING * np.arange(len(smooth), dtype=np.float64)
    wobble = 0.85 * noise.along(at, 11.0, rng, period_mm=length)
    wobble += 0.5 * noise.along(at, 3.0, rng, period_mm=length)
    return Contour(smooth + body.wobble * wobble[:, None] * outward, _edges(body, smooth))


def _edges(body: Body, points: Points) -> tuple[Edge, ...]:
    """Name the edge of each point: the diagonals of the surrounding rectangle part them."""
    across = points[:, 0] / np.where(points[:, 0] < 0, *body.half_widths)
    down = points[:, 1] / np.where(points[:, 1] < 0, *body.half_heights)
    names: list[Edge] = []
    for right, lower in zip(across, down, strict=True):
        if abs(right) > abs(lower):
            names.append("right" if right > 0 else "left")
        else:
            names.append("lower" if lower > 0 else "upper")
    return tuple(names)


def evenly(points: Points, spacing: float, *, closed: bool = False) -> Points:
    """Return points at even distances along a line (N, 2)."""
    path = np.vstack([points, points[:1]]) if closed else points
    at = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(path, axis=0).T))])
    count = max(2, round(at[-1] / spacing) + (0 if closed else 1))
    where = np.linspace(0, at[-1], count, endpoint=not closed)
    return np.column_stack([np.interp(where, at, path[:, 0]), np.interp(where, at, path[:, 1])])


def break_path(corners: Points, rng: np.random.Generator) -> Points:
    """Return a jagged line (N, 2) along straight pieces, rough at every size."""
    path = evenly(corners, SPACING)
    tangent = np.gradient(path, axis=0)
    across = np.column_stack([tangent[:, 1], -tangent[:, 0]]) / np.hypot(*tangent.T)[:, None]
    across = np.column_stack([np.convolve(a, np.ones(161) / 161, "same") for a in across.T])
    at = SPACING * np.arange(len(path), dtype=np.float64)
    offset = np.zeros(len(path))
    for length_mm, rms in ((28.0, 1.8), (9.0, 0.8), (3.0, 0.32), (1.0, 0.13), (0.4, 0.05)):
        offset += rms * noise.along(at, length_mm, rng)
    return np.asarray(path + offset[:, None] * across, np.float64)


def cut_contour(contour: Contour, breaks: list[Points], lost: list[Points]) -> list[tuple[str, Points]]:
    """Return the outline of what survives, clockwise: edge and points (N, 2) of each piece.

    ``breaks`` are the jagged lines, ``lost`` the polygons beyond them. Each break takes one run of the
    girth; where it crosses the girth more than once, the outermost crossings count.
    """
    count = len(contour.points)
    owner = np.full(count, -1)
    for number, polygon in enumerate(lost):
        inside = shapely.contains_xy(shapely.Polygon(polygon).buffer(0), contour.points)
        owner[_between(inside)] = number
    start = int(np.flatnonzero((owner >= 0) & (np.roll(owner, -1) < 0))[0]) + 1
    order = (start + np.arange(count)) % count
    pieces: list[tuple[str, list[Points]]] = []
    previous = -1
    for index in order:
        if owner[index] >= 0:
            label = f"break {owner[index]}"
            if not pieces or pieces[-1][0] != label:
                pieces.append((label, []))
            continue
        label = contour.edges[index]
        if not pieces or pieces[-1][0] != label:
            joined = [contour.points[previous]] if pieces and not pieces[-1][0].startswith("break") else []
            pieces.append((label, joined))
        pieces[-1][1].append(contour.points[index])
        previous = int(index)
    return _join(pieces, breaks)


def _between(inside: NDArray[np.bool_]) -> NDArray[np.intp]:
    """Return the one run of ring positions from the first to the last inside, over any gaps in it."""
    hits = np.flatnonzero(inside)
    gaps = np.diff(np.append(hits, hits[0] + len(inside)))
    widest = int(np.argmax(gaps))
    first = hits[(widest + 1) % len(hits)]
    run = len(inside) - int(gaps[widest]) + 1
    return np.asarray((first + np.arange(run)) % len(inside), np.intp)


def _join(pieces: list[tuple[str, list[Points]]], breaks: list[Points]) -> list[tuple[str, Points]]:
    """Put each break's course between the pieces of edge before and after it."""
    joined: list[tuple[str, Points]] = []
    for number, (label, points) in enumerate(pieces):
        if not label.startswith("break"):
            joined.append((label, np.array(points)))
            continue
        course = breaks[int(label.split()[1])]
        before = pieces[number - 1][1][-1]
        after = pieces[(number + 1) % len(pieces)][1][0]
        ends = [int(np.argmin(np.hypot(*(course - end).T))) for end in (before, after)]
        inner = course[min(ends) + 1 : max(ends)]
        inner = inner if ends[0] < ends[1] else inner[::-1]
        joined.append(("break", np.vstack([before, inner, after])))
    return joined


def inward_distance(contour: Contour, grid: Grid) -> Field:
    """Return the distance from the girth at each point of a coarse lattice, positive inside."""
    x, y = np.broadcast_arrays(grid.x, grid.y)
    places = np.column_stack([x.ravel(), y.ravel()])
    distance, _ = cKDTree(contour.points).query(places, distance_upper_bound=9.0)
    inside = grid.fill(contour.points).ravel()
    # at the girth itself the face stands upright, and a wrong sign would show as a step
    near = np.flatnonzero(distance < 1.0)
    girth = shapely.Polygon(contour.points)
    shapely.prepare(girth)
    inside[near] = shapely.contains_xy(girth, places[near])
    signed = np.where(inside, 1.0, -1.0) * np.minimum(distance, 9.0)
    return signed.reshape(grid.shape).astype(np.float32)


def whole_face(body: Body, inward: Field, grid: Grid) -> Field:
    """Return the height of the unbroken face in front, down to the girth; without texture."""
    flat, upright = ROUNDING
    rim = np.clip(1 - inward / body.rounding, 0, 1)
    share = np.clip(1 - rim**flat, 0, 1) ** (1 / upright)
    across = (grid.x / (body.width / 2)) ** 2 + (grid.y / (body.height / 2)) ** 2
    dome = body.convexities[0] * (2 / 3 - across)
    return np.asarray(dome * share - body.girth_depth * (1 - share), np.float32)
