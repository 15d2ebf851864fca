"""A fragment as it is made: body, girth, breaks and layout of both faces, in the frame of each view."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
import shapely

from sample_images.render.clay import Clay
from sample_images.render.grid import Field, Grid, Points, grid_over
from sample_images.render.scribe import (
    Entry,
    Hand,
    Line,
    column_widths,
    draw_horizontals,
    draw_verticals,
    write_entry,
)
from sample_images.render.shape import (
    Body,
    Contour,
    break_path,
    cut_contour,
    inward_distance,
    make_contour,
    whole_face,
)
from sample_images.render.tables import Column

Face = Literal["obverse", "reverse"]

FAR = 300.0
COARSE_PX_PER_MM = 5.0


@dataclass(frozen=True)
class Fault:
    """One break: the column it runs through or the corner it took.

    ``through`` is the column (from 0) and the share of its width at which the break runs, at the upper end,
    the middle and the lower end; ``corner`` the mm that are lost along the right and the lower edge;
    ``run`` how far the broken face reaches out below the inscribed one, mm.
    """

    through: tuple[int, tuple[float, float, float]] | None = None
    corner: tuple[float, float] | None = None
    run: float = 7.0


@dataclass(frozen=True)
class Spec:
    """What is decided about a fragment; everything else follows from it and its seed."""

    stem: str
    name: str
    seed: int
    columns: tuple[Column, ...]
    obverse_lines: int
    lost_side: Literal["left", "right"]
    lost_columns: int
    hand: Hand
    thickness: float
    margin: float
    clay: Clay
    faults: tuple[Fault, ...]
    exponents: tuple[float, float] = (4.6, 5.2)
    head_and_foot: tuple[float, float] = (8.0, 9.0)


@dataclass(frozen=True, eq=False)
class Side:
    """One inscribed face in the frame of its view: x to the right, y down, z towards the lens, mm.

    ``outline`` are the pieces of the fragment's outline (N, 3): original edge at the girth, breaks along the
    edge of the face; ``lost`` the polygons that are gone at the face; ``surface`` the height of the unbroken
    face on a coarse lattice; ``boundaries`` the x of the column boundaries at y = 0.
    """

    face: Face
    body: Body
    contour: Contour
    outline: tuple[tuple[str, Points], ...]
    lost: tuple[Points, ...]
    lines: tuple[Line, ...]
    entries: tuple[Entry, ...]
    boundaries: tuple[float, ...]
    grid: Grid
    surface: Field
    inward: Field

    def on_face(self, points: Points) -> Points:
        """Return points (N, 3) on the unbroken face above places (N, 2)."""
        column, row = self.grid.index(points).T
        left = np.clip(np.floor(column).astype(int), 0, self.grid.width - 2)
        upper = np.clip(np.floor(row).astype(int), 0, self.grid.height - 2)
        right, low = np.clip(column - left, 0, 1), np.clip(row - upper, 0, 1)
        near = (1 - right) * self.surface[upper, left] + right * self.surface[upper, left + 1]
        below = (1 - right) * self.surface[upper + 1, left] + right * self.surface[upper + 1, left + 1]
        return np.column_stack([points, (1 - low) * near + low * below])

    def remains(self) -> shapely.Polygon:
        """Return the outline of what survives, (x, y)."""
        return shapely.Polygon(np.vstack([points[:, :2] for _, points in self.outline])).buffer(0)


@dataclass(frozen=True, eq=False)
class Tablet:
    """The whole tablet of a fragment, with both faces."""

    spec: Spec
    obverse: Side
    reverse: Side
    widths: tuple[float, ...]

    @property
    def lost_space(self) -> float:
        """Width of the writing surface beyond the surviving boundary nearest to the break, mm."""
        count = self.spec.lost_columns
        lost = self.widths[:count] if self.spec.lost_side == "left" else self.widths[-count:]
        return float(sum(lost))


def make_tablet(spec: Spec) -> Tablet:
    """Return the tablet that a specification and its seed make."""
    rng = np.random.default_rng([spec.seed, 1])
    widths = column_widths(spec.columns, spec.hand, rng)
    whole = sum(widths) + 2 * spec.margin
    uneven = 0.01 * rng.standard_normal(2)
    half_widths = (whole / 2 * (1 - uneven[0] / 2), whole / 2 * (1 + uneven[0] / 2))
    height = spec.obverse_lines * spec.hand.pitch + sum(spec.head_and_foot)
    half_heights = (height / 2 * (1 - uneven[1] / 2), height / 2 * (1 + uneven[1] / 2))
    body = Body(half_widths, half_heights, spec.exponents, spec.thickness, spec.thickness / 2)
    contour = make_contour(body, rng)
    boundaries = tuple(np.cumsum([spec.margin - half_widths[0], *widths]).round(4).tolist())
    obverse = _side(spec, "obverse", body, contour, boundaries)
    reverse = _side(spec, "reverse", body.turned(), contour.turned(), boundaries)
    return Tablet(spec, obverse, reverse, widths)


def _side(spec: Spec, face: Face, body: Body, contour: Contour, boundaries: tuple[float, ...]) -> Side:
    """Return one face with what was written on it and what survives."""
    rng = np.random.default_rng([spec.seed, 2 if face == "obverse" else 3])
    courses, lost = [], []
    for fault in spec.faults:
        corners, around = _fault(fault, body, boundaries, spec.lost_side, face)
        course = break_path(corners, rng)
        courses.append(course)
        lost.append(np.vstack([course, around]))
    pieces = cut_contour(contour, courses, lost)
    grid = grid_over(
        -body.half_widths[0] - 6,
        -body.half_heights[0] - 6,
        body.half_widths[1] + 6,
        body.half_heights[1] + 6,
        COARSE_PX_PER_MM,
    )
    inward = inward_distance(contour, grid)
    surface = whole_face(body, inward, grid)
    lines, entries = _write(spec, face, body, boundaries, rng)
    bare = Side(
        face, body, contour, (), tuple(lost), tuple(lines), tuple(entries), boundaries, grid, surface, inward
    )
    outline = []
    for edge, points in pieces:
        placed = bare.on_face(points)
        if edge != "break":
            placed[:, 2] = -body.girth_depth
        else:
            placed[[0, -1], 2] = -body.girth_depth
        outline.append((edge, placed))
    return replace(bare, outline=tuple(outline))


def _fault(
    fault: Fault, body: Body, boundaries: tuple[float, ...], side: str, face: Face
) -> tuple[Points, Points]:
    """Return the corners of a break's course and points around what it took, in the frame of a view."""
    outward = -1 if side == "left" else 1
    reach = 0.0 if face == "obverse" else fault.run
    top, foot = -body.half_heights[0] - 8, body.half_heights[1] + 8
    if fault.through is not None:
        column, shares = fault.through
        left, right = boundaries[column : column + 2]
        x = left + np.array(shares if face == "obverse" else shares[::-1]) * (right - left) + outward * reach
        corners = np.array([[x[0], top], [x[1], 0.12 * foot], [x[2], foot]])
        return corners, np.array([[outward * FAR, FAR], [outward * FAR, -FAR]])
    right, lower = fault.corner or (0.0, 0.0)
    edge, low = body.half_widths[1], (body.half_heights[1] if face == "obverse" else body.half_heights[0])
    start = np.array([edge + 6, low - right + reach - 3.5])
    middle = np.array([edge - 0.42 * lower + 0.7 * reach, low - 0.42 * right + 0.7 * reach])
    end = np.array([edge - lower + reach - 2.0, low + 6])
    corners = np.array([start, middle, end])
    around = np.array([[FAR, FAR]])
    return (corners, around) if face == "obverse" else (corners * [1, -1], around * [1, -1])


def _write(
    spec: Spec, face: Face, body: Body, boundaries: tuple[float, ...], rng: np.random.Generator
) -> tuple[list[Line], list[Entry]]:
    """Return rulings and entries of one whole face."""
    hand, count = spec.hand, spec.obverse_lines
    lines_here = range(count) if face == "obverse" else range(count, len(spec.columns[0].entries))
    top = -body.half_heights[0] + spec.head_and_foot[0]
    foot = body.half_heights[1] - 4.0
    verticals = draw_verticals(list(boundaries), (top - 2.5, foot), rng)
    ends = (boundaries[0] - 1.0, boundaries[-1] + 1.0)
    shift = 0.0 if hand.ruled_lines else 0.80 * hand.pitch
    number = len(lines_here) + (1 if hand.ruled_lines else 0)
    horizontals = draw_horizontals(top + shift, number, hand, ends, rng)
    entries = []
    for row, line in enumerate(lines_here):
        for column, content in enumerate(spec.columns):
            left, right = boundaries[column : column + 2]
            y = _height_at(horizontals, row, (left + right) / 2, hand)
            x = float(np.interp(y, verticals[column].points[:, 1], verticals[column].points[:, 0]))
            x += 0.06 * (right - left) + abs(rng.normal(0, 0.25))
            start = np.array([x, y + rng.normal(0, 0.12)])
            entries.append(write_entry(content.entries[line], (column, row), start, hand, rng))
    return verticals + horizontals, entries


def _height_at(lines: list[Line], row: int, x: float, hand: Hand) -> float:
    """Return the middle of a line of writing at x: halfway between its rulings, or above where it stands."""
    at = [float(np.interp(x, line.points[:, 0], line.points[:, 1])) for line in lines[row : row + 2]]
    if hand.ruled_lines:
        return (at[0] + at[1]) / 2
    return at[0] - 0.30 * hand.pitch
