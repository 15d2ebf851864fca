"""Clay: its grain, pits, cracks and stains, and the crumbled surface of a break."""

from __future__ import annotations

from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray

from sample_images.render import noise
from sample_images.render.grid import Field, Grid, Points, blur

Colour = tuple[float, float, float]


@dataclass(frozen=True)
class Clay:
    """Colours (linear red, green, blue) of the surface, its darker blotches, the core, and salts."""

    surface: Colour
    blotch: Colour
    core: Colour
    salt: Colour = (0.62, 0.57, 0.48)
    salts: float = 0.5
    cracks: int = 5


def grain(grid: Grid, rng: np.random.Generator) -> Field:
    """Return the relief of an old clay surface in mm: dents, wiping marks, grains and pits."""
    rms = {18.0: 0.10, 6.0: 0.045, 2.5: 0.028, 1.0: 0.014, 0.4: 0.009, 0.16: 0.006, 0.07: 0.0035}
    relief = noise.layered(grid, rms, rng)
    wiped = noise.over(grid, 0.5, rng)
    length = max(3, int(2.4 * grid.px_per_mm))
    wiped = np.asarray(cv2.blur(wiped, (length, 1)), np.float32)
    patchy = np.clip(noise.over(grid, 9.0, rng) + 0.3, 0, 1.5)
    relief += 0.012 * wiped / max(float(wiped.std()), 1e-6) * patchy
    return relief - pits(grid, rng)


def pits(grid: Grid, rng: np.random.Generator) -> Field:
    """Return the depth of small pits, lost grains and the prints of chaff; their rims are ragged."""
    depth = np.zeros(grid.shape, np.uint8)
    area = grid.width * grid.height / grid.px_per_mm**2
    for _ in range(int(0.13 * area)):
        radius = 0.05 * float(np.exp(rng.normal(0.15, 0.65)))
        x, y = rng.uniform(0, grid.width), rng.uniform(0, grid.height)
        long = radius * (rng.uniform(4, 14) if rng.random() < 0.06 else rng.uniform(1.0, 1.8))
        axes = np.maximum(np.array([min(long, 1.4), radius]) * grid.px_per_mm, 0.5)
        deep = int(255 * min(1.0, 0.25 + 1.2 * radius))
        cv2.ellipse(
            depth, ((x, y), (2 * axes[0], 2 * axes[1]), rng.uniform(0, 180)), (deep,), -1, cv2.LINE_AA
        )
    soft = blur(_share(depth), max(0.06 * grid.px_per_mm, 0.3))
    ragged = soft * (1 + 0.5 * noise.over(grid, 0.2, rng)) - 0.12
    return np.asarray(0.20 * np.clip(ragged, 0, 1.2), np.float32)


def cracks(grid: Grid, starts: Points, rng: np.random.Generator) -> Field:
    """Return the depth of hairline cracks that run, bent at every grain, from given places (N, 2) in mm."""
    canvas = np.zeros(grid.shape, np.uint8)
    for start in starts:
        course = rng.uniform(0, 2 * np.pi)
        at = np.array(start, float)
        steps = int(rng.integers(12, 60))
        for number in range(steps):
            course += rng.normal(0, 0.10)
            heading = course + rng.normal(0, 0.5)
            step = rng.uniform(0.15, 0.7) * np.array([np.cos(heading), np.sin(heading)])
            ends = np.round(grid.index(np.array([at, at + step])) * 16).astype(np.int32)
            strength = int(230 * min(1.0, 1.6 * (1 - number / steps)) * rng.uniform(0.6, 1))
            thick = 2 if grid.px_per_mm > 24 and number < 0.5 * steps else 1
            first, last = tuple(map(int, ends[0])), tuple(map(int, ends[1]))
            cv2.line(canvas, first, last, (strength,), thick, cv2.LINE_AA, 4)
            at = at + step
    soft = blur(_share(canvas), max(0.02 * grid.px_per_mm, 0.3))
    return np.asarray(0.20 * soft, np.float32)


def fracture(
    grid: Grid, beyond: Field, behind: Field, face: Field, back: Field, rng: np.random.Generator
) -> Field:
    """Return the height of a broken surface, which runs from the face in front to the one at the back.

    ``beyond`` is how far a point lies past the edge in front, ``behind`` past the edge at the back, mm;
    ``face`` and ``back`` the heights of both faces. It falls away in ledges and crumbles; on the face's side
    of the edge it stands above everything, except where flakes were lost.
    """
    past, left = np.clip(beyond, 0, None), np.clip(-behind, 0, None)
    share = past / np.maximum(past + left, 1e-3)
    steps = 0.14 * noise.over(grid, 8.0, rng) + 0.08 * noise.over(grid, 3.0, rng)
    ends = 4 * share * (1 - share)
    share = np.clip(share + steps * ends, 0, 1) ** 0.85
    rough = noise.layered(grid, {2.2: 0.36, 1.1: 0.24, 0.55: 0.15, 0.28: 0.09, 0.13: 0.05}, rng)
    # the break leaves a step at its foot, so that no thin shell stands there
    drop = 0.72 * share * (face - back) - rough * (1 - np.exp(-past / 0.25))
    # flakes that went from the edge of the face: thin, with a ragged bed
    flaked = np.clip(noise.layered(grid, {5.0: 0.5, 1.5: 0.25, 0.5: 0.1}, rng) - 0.35, 0, None)
    near = np.exp(-((np.clip(-beyond, 0, None) / 1.2) ** 2))
    chipped = 0.9 * flaked * near
    bed = np.where(chipped > 0.03, face - chipped + 0.4 * rough * np.minimum(chipped / 0.2, 1), face + 50)
    return np.where(beyond > 0, face - drop - chipped, bed).astype(np.float32)


def colour_of(grid: Grid, clay: Clay, hollow: Field, broken: Field, rng: np.random.Generator) -> Field:
    """Return the colour (rows, columns, 3) of the clay.

    ``hollow`` is the depth of impressions in mm, where dust and salts stay; ``broken`` is 1 on the break.
    """
    surface, blotch, core = (np.array(c, np.float32) for c in (clay.surface, clay.blotch, clay.core))
    clouds = noise.layered(grid, {30.0: 0.55, 11.0: 0.4, 4.0: 0.25, 1.5: 0.12}, rng)
    share = (1 / (1 + np.exp(-2.2 * clouds + 0.9)))[..., None]
    colour = surface * (1 - share) + blotch * share
    inner = (1 / (1 + np.exp(-1.8 * noise.layered(grid, {9.0: 0.8, 2.5: 0.4}, rng))))[..., None]
    inside = core * (1 - 0.45 * inner) + surface * 0.45 * inner
    colour = colour * (1 - broken[..., None]) + inside * broken[..., None]
    tone = 1 + noise.layered(grid, {2.2: 0.028, 0.7: 0.03, 0.25: 0.035, 0.09: 0.035}, rng) * (
        1 + 1.8 * broken
    )
    colour *= np.clip(tone, 0.6, 1.4)[..., None]
    warmth = 0.03 * noise.layered(grid, {16.0: 1.0, 3.0: 0.5}, rng)[..., None]
    colour *= 1 + warmth * np.array([1.0, 0.0, -1.2], np.float32)
    colour *= 1 - 0.45 * _specks(grid, 0.05, (0.05, 0.16), rng)[..., None]
    light = _specks(grid, 0.03, (0.05, 0.2), rng)[..., None]
    colour += (np.array(clay.salt, np.float32) - colour) * 0.55 * light
    dust = np.clip(hollow / 0.5, 0, 1) * np.clip(0.25 + 0.35 * noise.over(grid, 8.0, rng), 0, 0.6)
    colour += (np.array(clay.salt, np.float32) * 0.75 - colour) * dust[..., None] * 0.5
    crust = noise.layered(grid, {14.0: 0.8, 4.0: 0.5, 1.0: 0.35, 0.3: 0.3}, rng)
    stain = np.clip((crust - 1.9 + 0.9 * clay.salts) / 0.9, 0, 1) * 0.6
    colour += (np.array(clay.salt, np.float32) - colour) * stain[..., None]
    return np.asarray(np.clip(colour, 0.01, 0.95), np.float32)


def _specks(grid: Grid, per_mm2: float, radii: tuple[float, float], rng: np.random.Generator) -> Field:
    """Return a mask of small grains of another mineral."""
    canvas = np.zeros(grid.shape, np.uint8)
    for _ in range(int(per_mm2 * grid.width * grid.height / grid.px_per_mm**2)):
        at = (rng.uniform(0, grid.width), rng.uniform(0, grid.height))
        size = 2 * rng.uniform(*radii) * grid.px_per_mm
        box = (at, (max(size, 1.0), max(size * rng.uniform(0.5, 1), 1.0)), rng.uniform(0, 180))
        cv2.ellipse(canvas, box, (int(rng.uniform(60, 255)),), -1, cv2.LINE_AA)
    return _share(canvas)


def _share(canvas: NDArray[np.uint8]) -> Field:
    """Return a drawing of 0 to 255 as 0 to 1."""
    return np.asarray(canvas / np.float32(255), np.float32)
