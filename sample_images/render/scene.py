"""What lies before the camera: tablet, bar and ground as one height field with its colours."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import cv2
import numpy as np
import shapely

from sample_images.render import noise
from sample_images.render.bar import Bar, print_bar
from sample_images.render.clay import colour_of, cracks, fracture, grain
from sample_images.render.grid import Field, Grid, Mask, Points, blur, resample
from sample_images.render.shape import whole_face
from sample_images.render.tablet import FAR, Side, Tablet
from sample_images.render.wedges import groove, press, relief

Ground = Literal["black", "grey", "none"]

BOARD = 0.035
RULING_WIDTH, RULING_DEPTH = 0.58, 0.19


@dataclass(frozen=True, eq=False)
class Scene:
    """Heights (mm) and linear colours on a lattice; ``thing`` is where something lies on the ground."""

    grid: Grid
    heights: Field
    colour: Field
    thing: Mask


def lay_out(tablet: Tablet, side: Side, grid: Grid, ground: Ground, bars: tuple[Bar, ...] = ()) -> Scene:
    """Return one face of a tablet on its ground, with bars beside it."""
    rng = np.random.default_rng([tablet.spec.seed, 11 if side.face == "obverse" else 12])
    heights, here, broken, hollow = fragment_relief(tablet, side, grid, rng)
    colour = colour_of(grid, tablet.spec.clay, hollow, broken, rng)
    table = table_height(side)
    base, base_colour = _ground(grid, ground, rng)
    heights = np.where(here, np.maximum(heights, table), base + np.float32(table))
    colour = np.where(here[..., None], colour, base_colour)
    thing = here
    for bar in bars:
        thing = thing | _place_bar(bar, grid, heights, colour, rng)
    return Scene(grid, heights, colour, thing)


def table_height(side: Side) -> float:
    """Return the height of the table on which the tablet lies."""
    return 2 / 3 * side.body.convexities[0] - side.body.thickness


@dataclass(frozen=True, eq=False)
class Solid:
    """A fragment from one side.

    ``face`` and ``bottom`` are the heights of front and back as they were made, ``fracture`` that of the
    break; ``here`` is where the fragment is.
    """

    face: Field
    bottom: Field
    fracture: Field
    here: Mask


def fragment_solid(tablet: Tablet, side: Side, grid: Grid, rng: np.random.Generator) -> Solid:
    """Return a fragment's form without the texture of its faces."""
    inward = resample(side.inward, side.grid, grid)
    face = whole_face(side.body, inward, grid)
    other = tablet.reverse if side.face == "obverse" else tablet.obverse
    bottom = back_of(other, grid, side)
    beyond = -distance_to(side.lost, grid)
    behind = -distance_to(tuple(polygon * [1, -1] for polygon in other.lost), grid)
    broken = fracture(grid, beyond, behind, face, bottom, rng)
    here = (inward > 0) & ((beyond <= 0) | (behind < 0))
    return Solid(face, bottom, np.maximum(broken, bottom + np.float32(0.5)), here)


def fragment_relief(
    tablet: Tablet, side: Side, grid: Grid, rng: np.random.Generator
) -> tuple[Field, Mask, Field, Field]:
    """Return height, presence, how much of it is break, and depth of impressions, on a lattice."""
    solid = fragment_solid(tablet, side, grid, rng)
    hollow = impressions(side, grid, rng)
    face = solid.face + grain(grid, rng) + relief(hollow, grid)
    face -= cracks(grid, _crack_starts(tablet, side, rng), rng)
    heights = np.minimum(face, solid.fracture)
    is_break = ((solid.fracture < face - 0.02) & solid.here).astype(np.float32)
    return heights, solid.here, blur(is_break, 0.08 * grid.px_per_mm + 0.3), hollow


def impressions(side: Side, grid: Grid, rng: np.random.Generator) -> Field:
    """Return the depth of rulings and wedges."""
    depth = np.zeros(grid.shape, np.float32)
    for line in side.lines:
        if line.kind != "writing":
            groove(depth, grid, line.points, RULING_WIDTH, RULING_DEPTH)
    # the stylus is pressed now harder, now more lightly
    depth *= np.clip(0.85 + 0.28 * noise.over(grid, 3.5, rng) + 0.12 * noise.over(grid, 0.6, rng), 0.15, 1.4)
    for entry in side.entries:
        for wedge in entry.wedges:
            press(depth, grid, wedge)
    return depth


def distance_to(polygons: tuple[Points, ...], grid: Grid) -> Field:
    """Return the distance to the nearest lost polygon, mm: positive outside, negative within."""
    lost = np.zeros(grid.shape, np.uint8)
    for polygon in polygons:
        lost |= grid.fill(polygon).astype(np.uint8)
    outside = cv2.distanceTransform(1 - lost, cv2.DIST_L2, 5)
    within = cv2.distanceTransform(lost, cv2.DIST_L2, 5)
    # a crop may hold nothing of the break; then the transform has no nearest place
    return np.asarray(np.clip((outside - within) / np.float32(grid.px_per_mm), -FAR, FAR), np.float32)


def back_of(other: Side, grid: Grid, side: Side) -> Field:
    """Return the height of the face behind, in the frame of the face in front."""
    flipped = Grid(
        grid.left, -grid.upper - (grid.height - 1) / grid.px_per_mm, grid.width, grid.height, grid.px_per_mm
    )
    seen = resample(other.surface, other.grid, flipped)[::-1]
    return np.asarray(side.body.back - seen, np.float32)


def _crack_starts(tablet: Tablet, side: Side, rng: np.random.Generator) -> Points:
    """Return where cracks begin: most of them at the break."""
    edge = np.vstack([points[:, :2] for name, points in side.outline if name == "break"])
    starts = edge[rng.integers(0, len(edge), tablet.spec.clay.cracks)]
    inner = shapely.get_coordinates(side.remains().centroid) + rng.normal(0, 22, (2, 2))
    return np.vstack([starts, inner])


def _ground(grid: Grid, ground: Ground, rng: np.random.Generator) -> tuple[Field, Field]:
    """Return relief and colour of the ground: black cloth or grey paper."""
    if ground == "grey":
        relief_of = noise.layered(grid, {0.5: 0.004, 0.15: 0.004}, rng)
        tone = 0.27 * (1 + noise.layered(grid, {40.0: 0.02, 0.3: 0.012, 0.08: 0.015}, rng))
        return relief_of, np.asarray(tone[..., None] * np.array([0.98, 1.0, 1.03], np.float32), np.float32)
    relief_of = noise.layered(grid, {9.0: 0.06, 0.35: 0.02}, rng)
    tone = 0.0042 * (1 + noise.layered(grid, {25.0: 0.15, 0.4: 0.14, 0.12: 0.22}, rng))
    tone = np.clip(tone, 0.001, 1) + 0.03 * _lint(grid, rng) * (ground == "black")
    return relief_of, np.asarray(tone[..., None] * np.array([1.0, 0.98, 1.04], np.float32), np.float32)


def _lint(grid: Grid, rng: np.random.Generator) -> Field:
    """Return a few fibres and crumbs on the cloth."""
    canvas = np.zeros(grid.shape, np.uint8)
    for _ in range(int(0.004 * grid.width * grid.height / grid.px_per_mm**2)):
        at = rng.uniform((0, 0), (grid.width, grid.height))
        size = np.maximum(grid.px_per_mm * rng.uniform(0.05, 0.2) * np.array([rng.uniform(1, 5), 0.8]), 1)
        cv2.ellipse(
            canvas,
            (tuple(at), tuple(size), rng.uniform(0, 180)),
            (int(rng.uniform(60, 255)),),
            -1,
            cv2.LINE_AA,
        )
    return np.asarray(canvas / np.float32(255), np.float32)


def _place_bar(bar: Bar, grid: Grid, heights: Field, colour: Field, rng: np.random.Generator) -> Mask:
    """Set a printed card on its block into the scene, in place; return where it is."""
    card, first = print_bar(bar, grid.px_per_mm)
    corner = bar.place(first[None, :1].ravel(), first[None, 1:].ravel())[0, :2]
    column, row = grid.index(corner[None])[0]
    angle = np.radians(bar.turn_deg)
    turn = np.array([[np.cos(angle), -np.sin(angle), column], [np.sin(angle), np.cos(angle), row]])
    size = (grid.width, grid.height)
    printed = cv2.warpAffine(card, turn, size, flags=cv2.INTER_CUBIC, borderMode=cv2.BORDER_REPLICATE)
    inside = grid.fill(bar.corners())
    paper = 1 + noise.layered(grid, {12.0: 0.012, 0.2: 0.012}, rng)
    tint = np.array([1.0, 0.985, 0.94], np.float32)
    heights[inside] = bar.z
    # the sides of the block are dark board: a ray that ends there meets a place on the card's very edge
    thing = inside.astype(np.uint8)
    kernel = np.ones((3, 3), np.uint8)
    rim = (cv2.dilate(thing, kernel, iterations=3) > 0) & (cv2.erode(thing, kernel, iterations=2) == 0)
    colour[inside] = (printed * paper)[inside][:, None] * tint
    colour[rim] = BOARD
    return inside
