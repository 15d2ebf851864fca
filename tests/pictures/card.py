"""Photographs of flat patterns with known truth: the scale card as its SVG draws it, and a chessboard.

Nothing of the package is used: the SVG is read here, and the camera, the lens, the print and the light are written
down once more. Light is added up in linear luminance, on a grid finer than the photograph's, and then encoded.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Plane = NDArray[np.float32]

DOTS = 20
"""Dots of a printed pattern in a millimetre."""
FINE = 3
"""Points of the finer grid in a pixel, each way."""
CLAY, PAPER, INK = 0.22, 0.80, 0.04


@dataclass(frozen=True, eq=False)
class Pinhole:
    """A camera with a lens; ``turn`` (3, 3) and ``shift`` (3,) take mm of the pattern's plane to the camera's frame.

    ``lens`` is (k1, k2, p1, p2, k3).
    """

    focal_px: float
    centre_px: tuple[float, float]
    turn: Floats
    shift: Floats
    lens: tuple[float, ...] = (0.0, 0.0, 0.0, 0.0, 0.0)

    def see(self, mm: Floats) -> Floats:
        """Return where points (..., 2) of the pattern are seen, px."""
        solid = mm @ self.turn[:, :2].T + self.shift
        return self.bend(solid[..., :2] / solid[..., 2:]) * self.focal_px + self.centre_px

    def bend(self, ideal: Floats) -> Floats:
        """Distort directions (..., 2)."""
        k1, k2, p1, p2, k3 = self.lens
        x, y = ideal[..., 0], ideal[..., 1]
        r2 = x**2 + y**2
        factor = 1 + k1 * r2 + k2 * r2**2 + k3 * r2**3
        across = 2 * p1 * x * y + p2 * (r2 + 2 * x**2)
        down = p1 * (r2 + 2 * y**2) + 2 * p2 * x * y
        return np.stack([x * factor + across, y * factor + down], axis=-1)

    def trace(self, x_px: Floats, y_px: Floats) -> tuple[Floats, Floats]:
        """Return the x and the y of what is seen at pixels, mm of the pattern; a row and a column give a grid."""
        x, y = (x_px - self.centre_px[0]) / self.focal_px, (y_px - self.centre_px[1]) / self.focal_px
        if any(self.lens):
            seen = np.stack(np.broadcast_arrays(x, y), axis=-1)
            ideal = seen
            for _ in range(12):
                ideal = ideal + seen - self.bend(ideal)
            x, y = ideal[..., 0], ideal[..., 1]
        a, b, c = np.linalg.inv(np.column_stack([self.turn[:, 0], self.turn[:, 1], self.shift]))
        depth = c[0] * x + c[1] * y + c[2]
        return (a[0] * x + a[1] * y + a[2]) / depth, (b[0] * x + b[1] * y + b[2]) / depth


def facing(
    size: tuple[int, int], mm: tuple[float, float], px_per_mm: float, *, tilts_deg: tuple[float, float, float]
) -> Pinhole:
    """Return a camera that sees a point of the pattern in the middle of the picture, tilted about x, y and z."""
    a, b, c = np.radians(tilts_deg)
    about_x = np.array([[1, 0, 0], [0, np.cos(a), -np.sin(a)], [0, np.sin(a), np.cos(a)]])
    about_y = np.array([[np.cos(b), 0, np.sin(b)], [0, 1, 0], [-np.sin(b), 0, np.cos(b)]])
    about_z = np.array([[np.cos(c), -np.sin(c), 0], [np.sin(c), np.cos(c), 0], [0, 0, 1]])
    turn = about_x @ about_y @ about_z
    focal = 1.6 * max(size)
    shift = np.array([0, 0, focal / px_per_mm]) - turn[:, :2] @ mm
    return Pinhole(focal, ((size[0] - 1) / 2, (size[1] - 1) / 2), turn, shift)


@dataclass(frozen=True)
class Print:
    """What the printer and the light do to a pattern.

    ``gain_dots`` is how far ink runs over the edges of what is black (below zero: how far white floods it),
    ``blur_px`` the blur of the lens, ``halation`` the share of light that is thrown far around, ``slope`` how much
    darker one side of the picture is lit, ``noise`` the sd of a pixel in linear light at full white.
    """

    gain_dots: int = 0
    blur_px: float = 0.8
    halation: float = 0.0
    slope: float = 0.0
    noise: float = 0.0
    exposure: float = 1.0


def printed_card(svg: str, gain_dots: int = 0) -> Plane:
    """Return the reflectance of the card as its SVG draws it, ``DOTS`` to a mm; texts are grey strips."""
    width, height = (round(float(v) * DOTS) for v in re.findall(r'viewBox="0 0 (\S+) (\S+)"', svg)[0])
    black: Any = np.zeros((height, width), np.float32)
    for path in re.findall(r'<path d="((?:M[^M]*z)+)"/>', svg):
        for x, y, w, h in re.findall(r"M(\S+) (\S+)h(\S+?)v(\S+?)h\S+?z", path):
            columns, across = _covered(float(x), float(w), width)
            rows, down = _covered(float(y), float(h), height)
            black[rows, columns] = np.maximum(black[rows, columns], np.outer(down, across))
    square = np.ones((2 * abs(gain_dots) + 1,) * 2, np.uint8)
    black = cv2.dilate(black, square) if gain_dots > 0 else cv2.erode(black, square)
    for x, y, size, text in re.findall(
        r'<text x="(\S+)" y="(\S+)" font-size="(\S+)"[^>]*>([^<]*)</text>', svg
    ):
        place = round(float(x) * DOTS), round(float(y) * DOTS)
        letters = np.ascontiguousarray((255 * black).astype(np.uint8))
        scale = float(size) * DOTS / 30
        cv2.putText(letters, text, place, cv2.FONT_HERSHEY_SIMPLEX, scale, 255, max(1, round(2 * scale)))
        black = np.maximum(black, letters.astype(np.float32) / 255)
    return np.asarray(PAPER + (INK - PAPER) * black, np.float32)


def printed_board(columns: int, rows: int, square_mm: float) -> Plane:
    """Return the reflectance of a chessboard of so many squares, with a white rim; its first inner corner is (0, 0)."""
    dots = round(square_mm * DOTS)
    y, x = np.mgrid[: rows * dots, : columns * dots] // dots
    return np.pad(np.where((x + y) % 2, PAPER, INK), dots, constant_values=PAPER).astype(np.float32)


def photograph(
    pattern: Plane,
    origin_mm: tuple[float, float],
    camera: Pinhole,
    size: tuple[int, int],
    how: Print,
    seed: int,
) -> NDArray[np.uint8]:
    """Photograph a pattern, whose upper left corner is at ``origin_mm`` of its plane, on clay; (height, width, 3)."""
    rng = np.random.default_rng(seed)
    width, height = size
    x_mm, y_mm = camera.trace(np.arange(float(width))[None, :], np.arange(float(height))[:, None])
    # between pixel centres the map is straight to a ten-thousandth of a pixel
    u, v = (
        cv2.resize(((at - start) * DOTS - 0.5).astype(np.float32), None, fx=FINE, fy=FINE)
        for at, start in zip((x_mm, y_mm), origin_mm, strict=True)
    )
    # as many dots as a point of the fine grid covers are averaged before
    spacing = float(np.median(np.hypot(np.diff(u[::97], axis=1), np.diff(v[::97], axis=1))))
    soft = cv2.GaussianBlur(pattern, (0, 0), 0.3 * spacing) if spacing > 1 else pattern
    grain = rng.normal(CLAY, 0.12 * CLAY, (height // 3 + 2, width // 3 + 2)).astype(np.float32)
    light: Any = cv2.resize(grain, (width * FINE, height * FINE), interpolation=cv2.INTER_LINEAR)
    cv2.remap(soft, u, v, cv2.INTER_LINEAR, dst=light, borderMode=cv2.BORDER_TRANSPARENT)
    light *= np.linspace(1, 1 - how.slope, width * FINE, dtype=np.float32)
    sharp = cv2.GaussianBlur(light, (0, 0), how.blur_px * FINE) if how.blur_px else light
    seen = cv2.resize(sharp, size, interpolation=cv2.INTER_AREA)
    if how.halation:
        seen = (1 - how.halation) * seen + how.halation * cv2.GaussianBlur(seen, (0, 0), 3.0)
    seen = how.exposure * seen
    seen = seen + how.noise * np.sqrt(np.clip(seen, 0.02, None)) * rng.standard_normal(seen.shape)
    return np.repeat(_encode(seen)[..., None], 3, axis=2)


def _covered(start_mm: float, length_mm: float, dots: int) -> tuple[slice, Plane]:
    """Return the dots that a block covers, and how much of each."""
    low, high = np.clip([start_mm * DOTS, (start_mm + length_mm) * DOTS], 0, dots)
    first, last = int(np.floor(low)), int(np.ceil(high))
    edges = np.clip(np.arange(first, last + 1), low, high)
    return slice(first, last), np.diff(edges).astype(np.float32)


def _encode(linear: Floats) -> NDArray[np.uint8]:
    """Encode linear light as sRGB (IEC 61966-2-1) of eight bits."""
    light = np.clip(linear, 0, 1)
    encoded = np.where(light <= 0.0031308, 12.92 * light, 1.055 * light ** (1 / 2.4) - 0.055)
    return np.round(255 * encoded).astype(np.uint8)
