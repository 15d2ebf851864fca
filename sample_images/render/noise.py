"""Correlated noise along a line and over a face: hands and clay are never straight or smooth."""

from __future__ import annotations

from collections.abc import Mapping

import cv2
import numpy as np
from scipy.ndimage import gaussian_filter1d

from sample_images.render.grid import Field, Grid, Points, resample

NODES = 4
"""Nodes of a noise in one of its lengths; the smoothing spans the same number, so that no lattice shows."""


def along(at_mm: Points, length_mm: float, rng: np.random.Generator, *, period_mm: float = 0.0) -> Points:
    """Return noise of unit variance at places (N,) along a line, correlated over about ``length_mm``.

    With a period the noise closes on itself, as a contour must.
    """
    start = 0.0 if period_mm else float(at_mm.min()) - length_mm
    span = period_mm or float(at_mm.max() - at_mm.min()) + 2 * length_mm
    count = max(8, round(NODES * span / length_mm))
    step = span / count
    padding = 0 if period_mm else 3 * NODES
    sigma = NODES / 2
    smooth = gaussian_filter1d(rng.standard_normal(count + 2 * padding), sigma, mode="wrap")
    # white noise smoothed by a Gaussian keeps 1 / (2 sqrt(pi) sigma) of its variance
    smooth = smooth[padding : len(smooth) - padding or None] * np.sqrt(2 * np.sqrt(np.pi) * sigma)
    nodes = start + step * np.arange(count)
    return np.asarray(np.interp(at_mm, nodes, smooth, period=period_mm or None), np.float64)


def over(grid: Grid, length_mm: float, rng: np.random.Generator) -> Field:
    """Return noise of unit variance over a lattice, correlated over about ``length_mm``."""
    sigma_px = length_mm * grid.px_per_mm / 2
    coarse = grid.coarser(max(1.0, sigma_px / 2.0))
    sigma_coarse = length_mm * coarse.px_per_mm / 2
    white = rng.standard_normal(coarse.shape, np.float32)
    if sigma_coarse < 0.3:
        return white
    smooth = cv2.GaussianBlur(white, (0, 0), sigma_coarse)
    field = np.asarray(smooth / max(float(smooth.std()), 1e-6), np.float32)
    return field if coarse == grid else _cubic(field, coarse, grid)


def layered(grid: Grid, rms_by_length: Mapping[float, float], rng: np.random.Generator) -> Field:
    """Return a sum of noises: length in mm to root mean square."""
    total = np.zeros(grid.shape, np.float32)
    for length_mm, rms in rms_by_length.items():
        if length_mm * grid.px_per_mm > 0.4:
            total += np.float32(rms) * over(grid, length_mm, rng)
    return total


def _cubic(field: Field, source: Grid, target: Grid) -> Field:
    """Resample, then smooth over one coarse cell, which hides the lattice of a linear interpolation."""
    fine = resample(field, source, target)
    ratio = target.px_per_mm / source.px_per_mm
    if ratio > 2:
        fine = np.asarray(cv2.blur(fine, (int(ratio) | 1, int(ratio) | 1)), np.float32)
    return fine
