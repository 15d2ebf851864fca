"""A pinhole camera over a table: the bar lies on the table, the face and the girth above it.

The scene frame is in mm, x to the right and y down in the table's plane, its origin where the optical axis
meets the table; heights are counted from the table towards the lens.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Camera:
    """A camera whose optical axis meets the photograph's centre.

    Parameters
    ----------
    distance
        From the lens to the plane of the table, at right angles to it, mm.
    focal_px
        Focal length in pixels.
    rotation
        Shape (3, 3): from the table's axes to the camera's.
    size
        Width and height of the photograph, px.
    """

    distance: float
    focal_px: float
    rotation: Floats
    size: tuple[int, int]

    def homography(self, height: float) -> Floats:
        """Return the map from a plane at this height, mm, to the photograph, px; shape (3, 3)."""
        depth = self.distance / self.rotation[2, 2]
        plane = np.column_stack(
            [
                self.rotation[:, 0],
                self.rotation[:, 1],
                np.array([0.0, 0.0, depth]) - height * self.rotation[:, 2],
            ]
        )
        x, y = (np.array(self.size) - 1) / 2
        inner = np.array([[self.focal_px, 0.0, x], [0.0, self.focal_px, y], [0.0, 0.0, 1.0]])
        return np.asarray(inner @ plane)

    def project(self, points: Floats, height: float) -> Floats:
        """Return where points (P, 2) at one height, mm, are seen, px."""
        return apply(self.homography(height), points)

    def mm_per_px(self, at_px: Floats, height: float) -> float:
        """Return the scale at one pixel: the geometric mean of the two local principal scales."""
        inverse = np.linalg.inv(self.homography(height))
        # determinant of the derivative of a homography: det H / (third coordinate)^3
        third = inverse[2] @ np.append(at_px, 1.0)
        return float(np.sqrt(np.abs(np.linalg.det(inverse) / third**3)))


def apply(homography: Floats, points: Floats) -> Floats:
    """Map points (P, 2) by a homography."""
    mapped = np.column_stack([points, np.ones(len(points))]) @ homography.T
    return np.asarray(mapped[:, :2] / mapped[:, 2:])


def tilted(about_x_deg: float, about_y_deg: float) -> Floats:
    """Return the rotation of a table that is tilted about both axes of the photograph."""
    a, b = np.radians([about_x_deg, about_y_deg])
    about_x = np.array([[1, 0, 0], [0, np.cos(a), -np.sin(a)], [0, np.sin(a), np.cos(a)]])
    about_y = np.array([[np.cos(b), 0, np.sin(b)], [0, 1, 0], [-np.sin(b), 0, np.cos(b)]])
    return np.asarray(about_x @ about_y)


def turned(angle_deg: float) -> Floats:
    """Return the rotation of the plane by an angle from x towards y; shape (2, 2)."""
    c, s = np.cos(np.radians(angle_deg)), np.sin(np.radians(angle_deg))
    return np.array([[c, -s], [s, c]])
