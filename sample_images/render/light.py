"""Raking light from the upper left: shading, cast shadows, and the light that hollows lack."""

from __future__ import annotations

from dataclasses import dataclass

import cv2
import numpy as np

from sample_images.render.grid import Field, Grid, blur

NEAR_MM = 2.5
FAR_MM = 60.0


@dataclass(frozen=True)
class Lamp:
    """A wide lamp: ``azimuth_deg`` from which it shines (180 = left, 270 = above), its elevation and size."""

    azimuth_deg: float = 222.0
    elevation_deg: float = 34.0
    half_size_deg: float = 5.0
    key: float = 1.0
    fill: float = 0.21
    sky: float = 0.17

    @property
    def towards(self) -> tuple[float, float, float]:
        """Unit vector to the lamp; y runs down the picture."""
        azimuth, elevation = np.radians([self.azimuth_deg, self.elevation_deg])
        flat = np.cos(elevation)
        return float(flat * np.cos(azimuth)), float(flat * np.sin(azimuth)), float(np.sin(elevation))


def light_on(heights: Field, grid: Grid, lamp: Lamp) -> tuple[Field, Field]:
    """Return the warm light of the lamp and the cool light of its surroundings, 1 on a level free place."""
    slope_x = np.gradient(heights, axis=1) * grid.px_per_mm
    slope_y = np.gradient(heights, axis=0) * grid.px_per_mm
    steep = 1 / np.sqrt(1 + slope_x**2 + slope_y**2)
    east, south, up = lamp.towards
    facing = np.clip((up - east * slope_x - south * slope_y) * steep, 0, None) / up
    # clay is rough: the side that faces the lamp squarely is less bright than Lambert's law says
    facing = 1.25 * facing / (1 + 0.25 * facing)
    back_x, back_y, back_up = -0.95 * east, -0.95 * south, 0.55
    # a white card on the other side of the tablet
    fill = np.clip((back_up - back_x * slope_x - back_y * slope_y) * steep, 0, None) / back_up
    fill = np.minimum(fill, 1.6)
    sky = 0.5 + 0.5 * steep
    openness = open_sky(heights, grid)
    key = lamp.key * facing * unshadowed(heights, grid, lamp)
    return np.asarray(key, np.float32), np.asarray((lamp.fill * fill + lamp.sky * sky) * openness, np.float32)


def unshadowed(heights: Field, grid: Grid, lamp: Lamp) -> Field:
    """Return the part of the lamp that each point sees."""
    near = horizon_tangent(heights, grid, lamp.azimuth_deg, (1.0, NEAR_MM * grid.px_per_mm))
    factor = 3
    size = (grid.width // factor, grid.height // factor)
    small = np.asarray(cv2.resize(heights, size, interpolation=cv2.INTER_AREA), np.float32)
    coarse = Grid(grid.left, grid.upper, *size, grid.px_per_mm / factor)
    far = horizon_tangent(small, coarse, lamp.azimuth_deg, (1.5, FAR_MM * coarse.px_per_mm))
    far = np.asarray(cv2.resize(far, (grid.width, grid.height), interpolation=cv2.INTER_LINEAR), np.float32)
    horizon_deg = np.degrees(np.arctan(np.maximum(near, far)))
    share = (lamp.elevation_deg + lamp.half_size_deg - horizon_deg) / (2 * lamp.half_size_deg)
    share = np.clip(share, 0, 1)
    return np.asarray(share * share * (3 - 2 * share), np.float32)


def horizon_tangent(heights: Field, grid: Grid, azimuth_deg: float, reach_px: tuple[float, float]) -> Field:
    """Return the tangent of the horizon's elevation in one direction, looked for from near to far."""
    east, south = np.cos(np.radians(azimuth_deg)), np.sin(np.radians(azimuth_deg))
    horizon = np.full(heights.shape, -10.0, np.float32)
    reach, last = reach_px
    relief = float(heights.max() - heights.min())
    rows, columns = heights.shape
    while reach < last:
        shift = np.array([[1, 0, reach * east], [0, 1, reach * south]])
        moved = cv2.warpAffine(
            heights,
            shift,
            (columns, rows),
            flags=cv2.INTER_LINEAR | cv2.WARP_INVERSE_MAP,
            borderMode=cv2.BORDER_REPLICATE,
        )
        np.maximum(horizon, (moved - heights) * np.float32(grid.px_per_mm / reach), out=horizon)
        # far away a shadow's edge is soft, and nothing higher than the relief throws it
        if relief * grid.px_per_mm / reach < np.tan(np.radians(10)):
            break
        reach += max(1.0, 0.008 * reach)
    return horizon


def open_sky(heights: Field, grid: Grid) -> Field:
    """Return how much of the sky each point sees: hollows of every size are darker."""
    openness = np.ones(heights.shape, np.float32)
    for length_mm, strength in ((0.25, 0.45), (0.8, 0.40), (2.5, 0.30)):
        sigma = length_mm * grid.px_per_mm
        if sigma < 0.7:
            continue
        depth = np.clip(blur(heights, sigma) - heights, 0, None) / np.float32(length_mm)
        openness *= np.exp(-np.float32(strength) * np.minimum(depth, 3))
    return openness * _wide_sky(heights, grid)


def _wide_sky(heights: Field, grid: Grid) -> Field:
    """Return the part of the sky that large forms leave free: the tablet darkens the table beside it."""
    factor = max(1.0, grid.px_per_mm / 3.0)
    size = (max(8, round(grid.width / factor)), max(8, round(grid.height / factor)))
    small = np.asarray(cv2.resize(heights, size, interpolation=cv2.INTER_AREA), np.float32)
    coarse = Grid(grid.left, grid.upper, *size, grid.px_per_mm * size[0] / grid.width)
    free = np.zeros(small.shape, np.float32)
    directions = range(0, 360, 30)
    for azimuth in directions:
        tangent = np.maximum(horizon_tangent(small, coarse, azimuth, (1.0, 35 * coarse.px_per_mm)), 0)
        # a point whose horizon stands at elevation e sees cos^2 e of a uniform sky's light
        free += 1 / (1 + tangent**2)
    free /= len(directions)
    wide = cv2.resize(free, (grid.width, grid.height), interpolation=cv2.INTER_CUBIC)
    return np.asarray(np.clip(wide, 0, 1), np.float32)
