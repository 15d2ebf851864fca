"""Impressions of the stylus: upright wedges for units, corner wedges for tens, rulings drawn with its edge.

An impression is the print of a corner of the stylus: facets that meet at the deepest point and rise to the
face. Each is the smallest of three planes, of which every one is zero along one side of a triangle.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import cv2
import numpy as np

from sample_images.render.grid import Field, Grid, Points, blur

Triangle = tuple[tuple[float, float], tuple[float, float], tuple[float, float]]


@dataclass(frozen=True)
class Wedge:
    """One impression: ``at`` is the middle of its head, ``width`` of the head and ``length`` in mm."""

    kind: Literal["unit", "ten"]
    at: tuple[float, float]
    width: float
    length: float
    depth: float
    turn_deg: float = 0.0


def press(depth: Field, grid: Grid, wedge: Wedge) -> None:
    """Press one wedge into a field of depths, in place."""
    reach = 1.15 * max(wedge.width, wedge.length) + 0.2
    column, row = grid.index(np.array([wedge.at]))[0]
    half = reach * grid.px_per_mm
    columns = slice(max(0, int(column - half)), min(grid.width, int(column + half) + 2))
    rows = slice(max(0, int(row - half)), min(grid.height, int(row + half) + 2))
    if columns.start >= columns.stop or rows.start >= rows.stop:
        return
    x, y = grid.x[:, columns] - wedge.at[0], grid.y[rows] - wedge.at[1]
    angle = np.radians(wedge.turn_deg)
    along, down = np.cos(angle) * x + np.sin(angle) * y, np.cos(angle) * y - np.sin(angle) * x
    impression = _unit(along, down, wedge) if wedge.kind == "unit" else _ten(along, down, wedge)
    patch = depth[rows, columns]
    np.maximum(patch, impression, out=patch)


def _pit(x: Field, y: Field, triangle: Triangle, deepest: tuple[float, float], depth: float) -> Field:
    """Return the depth of a three-sided pit; zero outside its triangle."""
    planes = []
    for (ax, ay), (bx, by) in zip(triangle, triangle[1:] + triangle[:1], strict=True):
        side = (bx - ax) * (y - ay) - (by - ay) * (x - ax)
        planes.append(side / ((bx - ax) * (deepest[1] - ay) - (by - ay) * (deepest[0] - ax)))
    lowest = np.minimum(np.minimum(planes[0], planes[1]), planes[2])
    return np.asarray(depth * np.clip(lowest, 0, 1), np.float32)


def _unit(x: Field, y: Field, wedge: Wedge) -> Field:
    """Return an upright wedge: a triangular head, and a narrow tail that runs out downwards."""
    width, length, depth = wedge.width, wedge.length, wedge.depth
    shoulder = min(0.62 * length, 0.95 * width)
    head: Triangle = ((-width / 2, -0.06 * width), (width / 2, 0.06 * width), (0.0, shoulder))
    tail: Triangle = ((-0.26 * width, 0.1 * width), (0.26 * width, 0.1 * width), (0.02 * width, length))
    # the facets meet left of the middle: the stylus is held aslant in the right hand
    print_of_head = _pit(x, y, head, (-0.06 * width, 0.24 * width), depth)
    print_of_tail = _pit(x, y, tail, (-0.03 * width, 0.3 * width), 0.9 * depth)
    return np.maximum(print_of_head, print_of_tail)


def _ten(x: Field, y: Field, wedge: Wedge) -> Field:
    """Return a corner wedge: a deep corner on the left from which two arms open to the right."""
    width, length, depth = wedge.width, wedge.length, wedge.depth
    tip, notch, deepest = (-0.5 * width, 0.0), (0.16 * width, 0.02 * length), (-0.14 * width, 0.0)
    upper: Triangle = (tip, (0.5 * width, -0.5 * length), notch)
    lower: Triangle = (tip, notch, (0.5 * width, 0.5 * length))
    core: Triangle = (tip, (0.12 * width, -0.27 * length), (0.12 * width, 0.27 * length))
    arms = np.maximum(
        _pit(x, y, upper, (deepest[0] + 0.08 * width, -0.09 * length), 0.75 * depth),
        _pit(x, y, lower, (deepest[0] + 0.08 * width, 0.09 * length), 0.75 * depth),
    )
    return np.maximum(arms, _pit(x, y, core, deepest, depth))


def groove(depth: Field, grid: Grid, line: Points, width: float, deep: float) -> None:
    """Draw a groove along a dense line (N, 2) into a field of depths, in place."""
    fine = 4
    canvas = np.full(grid.shape, 255, np.uint8)
    fixed = np.round(grid.index(line) * 16).astype(np.int32)
    cv2.polylines(canvas, [fixed.reshape(-1, 1, 2)], False, (0,), 1, cv2.LINE_8, fine)
    margin = int(width * grid.px_per_mm) + 3
    low = np.maximum(fixed.min(axis=0) // 16 - margin, 0)
    high = fixed.max(axis=0) // 16 + margin + 1
    rows, columns = slice(int(low[1]), int(high[1])), slice(int(low[0]), int(high[0]))
    if canvas[rows, columns].size == 0:
        return
    away = cv2.distanceTransform(canvas[rows, columns], cv2.DIST_L2, 5) / grid.px_per_mm
    profile = deep * (1 - np.clip(away / (width / 2), 0, 1) ** 1.4)
    np.maximum(depth[rows, columns], profile.astype(np.float32), out=depth[rows, columns])


def relief(depth: Field, grid: Grid) -> Field:
    """Return the relief of all impressions: pits with soft lips where the clay was pushed aside."""
    soft = blur(depth, max(0.045 * grid.px_per_mm, 0.3))
    pushed = blur(depth, max(0.22 * grid.px_per_mm, 0.3))
    lips = 0.30 * np.clip(pushed - soft, 0, None)
    return np.asarray(lips - soft, np.float32)
