"""Edges in profile, and the plate on which all six faces stand together."""

from __future__ import annotations

from typing import Literal

import cv2
import numpy as np

from sample_images.render import noise
from sample_images.render.clay import colour_of, grain
from sample_images.render.grid import Field, Grid, Mask, Points, blur, grid_over, resample
from sample_images.render.scene import Scene, fragment_solid, table_height
from sample_images.render.tablet import Tablet

EdgeFace = Literal["upper edge", "lower edge", "left edge", "right edge"]

SOLID_PX_PER_MM = 12.0
ABYSS = -40.0


def edge_scene(tablet: Tablet, face: EdgeFace, px_per_mm: float) -> Scene:
    """Return an edge seen square from outside: the obverse adjoins it as on the plate."""
    rng = np.random.default_rng([tablet.spec.seed, 31, len(face), ord(face[0])])
    far, broken, grid = _profile(tablet, face)
    fine = grid_over(
        grid.left,
        grid.upper,
        grid.left + (grid.width - 1) / grid.px_per_mm,
        grid.upper + (grid.height - 1) / grid.px_per_mm,
        px_per_mm,
    )
    there = np.isfinite(far)
    level = np.where(there, far, np.nanmin(np.where(there, far, np.nan)))
    # levels are a twelfth of a millimetre apart: smoothed, or they would show as steps
    weight = blur(there.astype(np.float32), 3.0)
    smooth = blur(np.where(there, level, 0).astype(np.float32), 3.0) / np.maximum(weight, 1e-3)
    heights = resample(np.where(there, smooth, level).astype(np.float32), grid, fine)
    here = resample(blur(there.astype(np.float32), 2.5), grid, fine) > 0.5
    rough = np.clip(resample(blur(broken.astype(np.float32), 1.5), grid, fine), 0, 1)
    heights += grain(fine, rng) * (1 - 0.5 * rough)
    heights += rough * noise.layered(fine, {3.0: 0.3, 1.4: 0.2, 0.6: 0.13, 0.28: 0.07, 0.13: 0.04}, rng)
    top = float(np.percentile(heights[here], 99.5))
    colour = colour_of(fine, tablet.spec.clay, np.zeros(fine.shape, np.float32), rough, rng)
    colour = np.where(here[..., None], colour, np.float32(0.0))
    placed = np.where(here, np.maximum(heights - top, ABYSS + 1), ABYSS)
    return Scene(fine, placed.astype(np.float32), colour.astype(np.float32), here)


def _profile(tablet: Tablet, face: EdgeFace) -> tuple[Field, Mask, Grid]:
    """Return how far the solid reaches outwards (nan: nothing), where it is broken, and the lattice."""
    side = tablet.obverse
    low = side.grid
    grid = grid_over(
        low.left,
        low.upper,
        low.left + (low.width - 1) / low.px_per_mm,
        low.upper + (low.height - 1) / low.px_per_mm,
        SOLID_PX_PER_MM,
    )
    solid = fragment_solid(tablet, side, grid, np.random.default_rng([tablet.spec.seed, 11]))
    heights = np.minimum(solid.face, solid.fracture)
    broken = solid.fracture < solid.face - 0.02
    levels = np.arange(table_height(side) - 2, side.body.convexities[0] + 2, 1 / SOLID_PX_PER_MM)
    turned = face in ("upper edge", "lower edge")
    fields = [np.asarray(f.T if turned else f) for f in (heights, solid.here, broken, solid.bottom)]
    outward = face in ("right edge", "lower edge")
    start = grid.upper if turned else grid.left
    reach, flags = _farthest(fields, levels, outward, start)
    # rows and columns as the plate shows them: the face in front lies towards the obverse
    towards_front = face in ("left edge", "upper edge")
    reach, flags = (reach, flags) if towards_front else (reach[::-1], flags[::-1])
    first = levels[0] if towards_front else -levels[-1]
    if turned:
        return reach, flags, Grid(grid.left, float(first), reach.shape[1], reach.shape[0], SOLID_PX_PER_MM)
    return reach.T, flags.T, Grid(float(first), grid.upper, reach.shape[0], reach.shape[1], SOLID_PX_PER_MM)


def _farthest(fields: list[Field], levels: Points, outward: bool, start: float) -> tuple[Field, Mask]:
    """Return, level by level, the farthest solid point of each row, and whether it is broken."""
    heights, here, broken, bottom = fields
    rows, columns = heights.shape
    reach = np.full((len(levels), rows), np.nan, np.float32)
    flags = np.zeros((len(levels), rows), bool)
    for number, level in enumerate(levels):
        solid = here.astype(bool) & (heights >= level) & (bottom <= level)
        found = solid.any(axis=1)
        place = columns - 1 - np.argmax(solid[:, ::-1], axis=1) if outward else np.argmax(solid, axis=1)
        distance = start + place / SOLID_PX_PER_MM
        reach[number, found] = (distance if outward else -distance)[found]
        flags[number] = found & (broken[np.arange(rows), place].astype(bool))
    return reach, flags


def paste(plate: Field, picture: Field, seen: Mask, corner: tuple[int, int]) -> None:
    """Put a cut-out face on the black plate, in place, with a soft edge."""
    rows, columns = seen.shape
    soft = np.asarray(cv2.GaussianBlur(seen.astype(np.float32), (0, 0), 1.0))[..., None]
    area = plate[corner[1] : corner[1] + rows, corner[0] : corner[0] + columns]
    area[:] = area * (1 - soft) + picture * soft
