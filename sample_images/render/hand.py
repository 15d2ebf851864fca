"""A simulated hand that traces points on a photograph: pointing noise, and a wobble along what it follows."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sample_images.render import noise
from sample_images.render.camera import Camera
from sample_images.render.grid import Points
from sample_images.render.shape import evenly

WOBBLE_MM, WOBBLE_LENGTH_MM = 0.07, 6.0


@dataclass(frozen=True, eq=False)
class Tracer:
    """A person at a screen: camera of the view, where its picture lies on the photograph, pointing error."""

    camera: Camera
    offset_px: tuple[float, float]
    pointing_px: float
    rng: np.random.Generator

    def point(self, places: Points) -> list[list[float]]:
        """Return clicks (N, 2) on places (N, 3): pixels to a tenth."""
        pixels = self.camera.project(places)
        return self._clicked(pixels)

    def _clicked(self, pixels: Points) -> list[list[float]]:
        noisy = pixels + self.rng.normal(0, self.pointing_px, pixels.shape) + np.array(self.offset_px)
        return [[round(float(x), 1), round(float(y), 1)] for x, y in noisy]

    def follow(self, line: Points, count: int) -> list[list[float]]:
        """Return ``count`` clicks along a line (N, 3), from its start to its end."""
        pixels = self.camera.project(line)
        return self._clicked(evenly(pixels, _length(pixels) / (count - 1)))

    def follow_edge(self, edge: Points, spacing_mm: float) -> list[list[float]]:
        """Return clicks along a contour (N, 3): the hand strays from it and returns."""
        pixels = self.camera.project(edge)
        mm_per_px = self.camera.local_mm_per_px(edge[len(edge) // 2])
        count = max(3, round(_length(pixels) * mm_per_px / spacing_mm) + 1)
        places = evenly(pixels, _length(pixels) / (count - 1))
        at = spacing_mm * np.arange(len(places), dtype=float)
        strays = [noise.along(at, WOBBLE_LENGTH_MM, self.rng) for _ in range(2)]
        return self._clicked(places + WOBBLE_MM / mm_per_px * np.column_stack(strays))

    def trace_outline(self, pieces: tuple[tuple[str, Points], ...]) -> list[tuple[str, list[list[float]]]]:
        """Return the traced pieces of an outline; each begins where the one before it ends."""
        traced = [(edge, self.follow_edge(points, self.rng.uniform(1.5, 2.0))) for edge, points in pieces]
        for (_, before), (_, after) in zip(traced[-1:] + traced[:-1], traced, strict=True):
            after[0] = before[-1]
        return traced


def _length(points: Points) -> float:
    """Return the length of a line (N, 2)."""
    return float(np.hypot(*np.diff(points, axis=0).T).sum())
