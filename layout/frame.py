"""Pixels to millimetres: the scale with its joint draws, and the face frame of a view.

A photograph is a central projection. Its optical axis meets the picture at the centre, the bar lies in a
plane at the distance D from the lens, and a point at height h above that plane is seen further from the
centre, by D / (D - h): the face is nearer to the lens than the bar, the outline of a pillow-shaped tablet
half its thickness further away than the face. The camera is square to the scene but for a tilt. With

    t = (pixel - centre) * mm_per_px,   k = 1 / D,   n = the scene's normal seen from the camera

the point of the plane at height h that a pixel shows lies at s t across and (s - 1) / k along the optical
axis, where s = (n_z - h k) / (n_z + k n.t); k = 0 is a flatbed scanner.

Where targets show that the camera stood aslant, points are first levelled: moved to where a camera at the same
place, but square to the scene, would have seen them. Shapes are fitted there, and draws stay small maps.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from layout.homography import apply, inverse
from layout.lens import Lens, distort, undistort
from layout.quantity import Floats, Quantity


@dataclass(frozen=True, eq=False)
class Plane:
    """A plane of the scene, parallel to that of the bar: how points map to it, draw by draw.

    Parameters
    ----------
    homography
        Shape (3, 3, N): from pixels, or from mm of a frame, to mm from the foot of the optical axis, x right, y down.
    nominal_mm_per_px
        The scale at which shapes in this plane are fitted.
    """

    homography: Floats
    nominal_mm_per_px: float

    def map(self, points: Floats) -> Floats:
        """Map points, shape (P, 2), or (N, P, 2) with draws of their own, to mm of the plane, (N, P, 2)."""
        x, y = points[..., 0], points[..., 1]
        mapped = (by_x[:, None] * x + by_y[:, None] * y + at[:, None] for by_x, by_y, at in self.homography)
        mm_x, mm_y, w = mapped
        return np.stack([mm_x / w, mm_y / w], axis=-1)

    def local(self, at: Floats) -> Floats:
        """Return how many mm a unit is around one point, (N,): the geometric mean of all directions."""
        by_x, by_y, alone = self.homography[2]
        # a homography's Jacobian has the determinant det H / w^3
        return np.asarray(np.sqrt(np.abs(self._determinant / (by_x * at[0] + by_y * at[1] + alone) ** 3)))

    def seen_from(self, affine: Floats) -> Plane:
        """Return the map from other coordinates that a (3, 3) matrix turns into those of this one."""
        return Plane(np.einsum("ijn,jk->ikn", self.homography, affine), self.nominal_mm_per_px)

    @cached_property
    def _determinant(self) -> Floats:
        one, other, third = self.homography
        return np.asarray((one * np.cross(other, third, axis=0)).sum(axis=0))


@dataclass(frozen=True, eq=False)
class Scale:
    """Joint draws of what turns pixels into millimetres.

    Parameters
    ----------
    centre_px
        Where the optical axis meets the photograph, shape (2,).
    mm_per_px
        In the plane of the bar, on the optical axis, shape (N,).
    face, outline
        The planes of the inscribed face and of the outline, as levelled pixels show them.
    model
        What kind of map the marks asked for: ``"similarity"``, ``"perspective"``, or ``"none"`` where nothing gives
        a scale and lengths have no unit.
    levelling
        The homography (3, 3) from pixels freed of the lens's distortion to levelled ones.
    lens
        The distortion that was removed before, if any.
    """

    centre_px: Floats
    mm_per_px: Floats
    face: Plane
    outline: Plane
    model: str
    levelling: Floats
    lens: Lens | None = None

    @property
    def known(self) -> bool:
        """Whether anything gives a scale; without one only ratios of lengths mean something."""
        return self.model != "none"

    def level(self, points_px: Floats) -> Floats:
        """Return points (..., 2), freed of the lens's distortion, as levelled pixels."""
        return apply(self.levelling, points_px)

    def from_photograph(self, points_px: Floats) -> Floats:
        """Return pixels (..., 2) of the photograph as levelled ones."""
        return self.level(points_px if self.lens is None else undistort(self.lens, points_px))

    def to_photograph(self, points_px: Floats) -> Floats:
        """Return levelled pixels (..., 2) as those of the photograph, the lens's distortion included."""
        straight = apply(inverse(self.levelling), points_px)
        return straight if self.lens is None else distort(self.lens, straight)


def find_homography(mm_per_px: Floats, tilt: Floats, nearness: Floats, height: Floats) -> Floats:
    """Return the map from pixels from the centre to the plane at a height: the equations at the top of this module.

    Parameters
    ----------
    mm_per_px, nearness, height
        In the plane of the bar; one over the lens's distance from it; above it in mm; each (N,).
    tilt
        The two components of the scene's normal, as sines, shape (N, 2).

    Returns
    -------
    Floats
        Shape (3, 3, N); the plane's own axes are e1 = (n_z, 0, -n_x) / r and n x e1.
    """
    a, b = tilt.T
    c, r = np.sqrt(1 - a**2 - b**2), np.sqrt(1 - b**2)
    near = c - height * nearness
    return np.array(
        [
            [mm_per_px * (c * near + a**2), mm_per_px * a * b, a * height],
            [
                mm_per_px * a * b * height * nearness,
                mm_per_px * (r**2 * near + b**2 * c),
                b * c * height,
            ],
            [mm_per_px * nearness * r * a, mm_per_px * nearness * r * b, r * c],
        ]
    )


@dataclass(frozen=True, eq=False)
class Frame:
    """The face frame of a view at the nominal scale: millimetres, x right, y down.

    Parameters
    ----------
    centre_px
        The photograph's centre, shape (2,).
    origin_mm
        The frame's origin from that centre, in the outline's plane, shape (2,).
    turn
        Angle in radians by which the frame is turned against the photograph, positive from x to y.
    """

    centre_px: Floats
    origin_mm: Floats
    turn: float

    def to_mm(self, points_px: Floats, mm_per_px: float) -> Floats:
        """Return pixels, shape (..., 2), in this frame, at the nominal scale of their plane."""
        return np.asarray(((points_px - self.centre_px) * mm_per_px - self.origin_mm) @ turned(-self.turn))

    def to_px(self, points_mm: Floats, mm_per_px: float) -> Floats:
        """Return points of this frame, shape (..., 2), as pixels: the inverse of ``to_mm``."""
        return np.asarray(
            (points_mm @ turned(self.turn) + self.origin_mm) / mm_per_px + self.centre_px,
        )

    def of_plane(self, plane: Plane) -> Plane:
        """Return the map from this frame at a plane's nominal scale: ``to_px`` and then the plane's."""
        px_per_mm = 1 / plane.nominal_mm_per_px
        affine = shifted(self.centre_px + self.origin_mm * px_per_mm)
        affine[:2, :2] = turned(self.turn).T * px_per_mm
        return plane.seen_from(affine)


def shifted(by: Floats) -> Floats:
    """Return the (3, 3) matrix that shifts points (2,)."""
    return np.array([[1.0, 0.0, by[0]], [0.0, 1.0, by[1]], [0.0, 0.0, 1.0]])


def turned(angle: float) -> Floats:
    """Return the matrix that turns row vectors by an angle, from x to y."""
    return np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])


def measure_scale(scale: Scale, at_px: Floats) -> Quantity:
    """Return the millimetres per pixel of the photograph at the face, around one levelled point."""
    seen_px = apply(inverse(scale.levelling), at_px)
    return Quantity("mm/px", scale.face.seen_from(scale.levelling).local(seen_px))
