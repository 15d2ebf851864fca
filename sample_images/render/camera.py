"""A pinhole camera above the bar, and the meeting of its rays with the height field."""

from __future__ import annotations

from dataclasses import dataclass, replace

import cv2
import numpy as np

from sample_images.render.grid import Field, Grid, Points

STEP_MM = 0.7
"""Descent of a ray between two looks at the height field; nothing thinner stands upright here."""


@dataclass(frozen=True)
class Camera:
    """A pinhole whose optical axis meets the picture at its centre and the plane of the bar at ``aim``.

    ``distance`` is from the lens to the plane of the bar, mm; ``bar_z`` the height of that plane;
    ``tilt_deg`` how far the camera is turned about the picture's x and y axes away from square.
    """

    size: tuple[int, int]
    mm_per_px: float
    distance: float
    bar_z: float
    aim: tuple[float, float]
    tilt_deg: tuple[float, float] = (0.0, 0.0)

    @property
    def focal_px(self) -> float:
        """Distance from the pinhole to the sensor in pixels: the scale in the plane of the bar."""
        return self.distance / self.mm_per_px

    @property
    def centre_px(self) -> Points:
        """Where the optical axis meets the picture; pixel centres are whole numbers."""
        return (np.array(self.size, float) - 1) / 2

    @property
    def axes(self) -> Points:
        """Rows: the camera's x, y and viewing direction in the frame of the face."""
        about_x, about_y = np.radians(self.tilt_deg)
        turn_x = np.array(
            [[1, 0, 0], [0, np.cos(about_x), -np.sin(about_x)], [0, np.sin(about_x), np.cos(about_x)]]
        )
        turn_y = np.array(
            [[np.cos(about_y), 0, np.sin(about_y)], [0, 1, 0], [-np.sin(about_y), 0, np.cos(about_y)]]
        )
        return np.asarray(turn_y @ turn_x @ np.diag([1.0, 1.0, -1.0]), float)

    @property
    def pinhole(self) -> Points:
        """Place of the pinhole, mm."""
        view = self.axes[2]
        along = self.distance / -view[2]
        return np.asarray(np.array([*self.aim, self.bar_z]) - along * view, np.float64)

    def project(self, points: Points) -> Points:
        """Return the pixels (N, 2) of points (N, 3)."""
        seen = (points - self.pinhole) @ self.axes.T
        return np.asarray(self.centre_px + self.focal_px * seen[:, :2] / seen[:, 2:], np.float64)

    def local_mm_per_px(self, point: Points) -> float:
        """Return the scale at a point (3,) in its horizontal plane: the root of the area of a pixel."""
        around = point + np.array([[-0.5, 0, 0], [0.5, 0, 0], [0, -0.5, 0], [0, 0.5, 0]])
        west, east, north, south = self.project(around)
        return float(1 / np.sqrt(abs(np.linalg.det(np.stack([east - west, south - north])))))

    def scaled(self, factor: float) -> Camera:
        """Return the same camera with a coarser sensor, as for a preview."""
        size = (round(self.size[0] * factor), round(self.size[1] * factor))
        return replace(self, size=size, mm_per_px=self.mm_per_px / factor)

    def slopes(self, window: tuple[int, int, int, int]) -> tuple[Field, Field]:
        """Return dx/dz and dy/dz of the ray of each pixel in a window (x, y, width, height)."""
        left, upper, width, height = window
        u = (np.arange(left, left + width) - self.centre_px[0])[None, :] / self.focal_px
        v = (np.arange(upper, upper + height) - self.centre_px[1])[:, None] / self.focal_px
        x_axis, y_axis, view = self.axes
        down = x_axis[2] * u + y_axis[2] * v + view[2]
        slope_x = (x_axis[0] * u + y_axis[0] * v + view[0]) / down
        slope_y = (x_axis[1] * u + y_axis[1] * v + view[1]) / down
        return slope_x.astype(np.float32), slope_y.astype(np.float32)


def trace_rays(
    camera: Camera, window: tuple[int, int, int, int], heights: Field, grid: Grid
) -> tuple[Field, Field, Field]:
    """Return the lattice's column and row that each pixel sees, and the height there.

    Rays descend in steps until the field stands above them; the last step is then halved until it is fine.
    """
    slope_x, slope_y = camera.slopes(window)
    x0, y0, z0 = camera.pinhole

    def place(z: Field) -> tuple[Field, Field]:
        column = (x0 + slope_x * (z - z0) - grid.left) * grid.px_per_mm
        row = (y0 + slope_y * (z - z0) - grid.upper) * grid.px_per_mm
        return np.asarray(column, np.float32), np.asarray(row, np.float32)

    def ground(z: Field) -> Field:
        return np.asarray(cv2.remap(heights, *place(z), cv2.INTER_LINEAR, borderMode=cv2.BORDER_REPLICATE))

    above = np.full(slope_x.shape, heights.max() + STEP_MM, np.float32)
    free = np.ones(slope_x.shape, bool)
    lowest = float(heights.min())
    z = float(heights.max())
    while z > lowest - STEP_MM and free.any():
        level = np.full(slope_x.shape, z, np.float32)
        free &= ground(level) < level
        above[free] = z
        z -= STEP_MM
    below = above - np.float32(STEP_MM)
    for _ in range(6):
        middle = np.asarray((above + below) / 2, np.float32)
        hit = ground(middle) >= middle
        below = np.where(hit, middle, below)
        above = np.where(hit, above, middle)
    column, row = place(above)
    return column, row, above
