"""The wobble of a hand-made edge: a stationary Gaussian process along the outline, periodic round it.

Correlation functions as in Rasmussen and Williams 2006, section 4.2 (formulae from memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

KINDS = ("squared exponential", "Matern 5/2", "Matern 3/2", "rational quadratic")


def correlation(kind: str, distance: Floats, length: float) -> Floats:
    """Return the correlation at a distance, both in mm."""
    r = np.abs(distance) / length
    if kind == "squared exponential":
        return np.asarray(np.exp(-(r**2) / 2))
    if kind == "Matern 5/2":
        return np.asarray((1 + np.sqrt(5) * r + 5 * r**2 / 3) * np.exp(-np.sqrt(5) * r))
    if kind == "Matern 3/2":
        return np.asarray((1 + np.sqrt(3) * r) * np.exp(-np.sqrt(3) * r))
    if kind == "rational quadratic":
        return np.asarray((1 + r**2 / 4) ** -2.0)
    message = f"needs a kind among {KINDS}, has {kind!r}"
    raise ValueError(message)


def around(kind: str, distance: Floats, length: float, perimeter: float) -> Floats:
    """Return the correlation between two points of a closed outline, along both ways round it."""
    turns = np.array([-1.0, 0.0, 1.0]) * perimeter
    total = correlation(kind, distance[..., None] + turns, length).sum(axis=-1)
    return np.asarray(total / correlation(kind, turns, length).sum())


def sample_around(rng: np.random.Generator, kind: str, length: float, perimeter: float, count: int) -> Floats:
    """Return one wobble of unit variance at ``count`` even steps round the outline."""
    row = around(kind, np.linspace(0.0, perimeter, count, endpoint=False), length, perimeter)
    # the even part: the row of a circulant matrix, whose eigenvalues are its Fourier transform
    row = (row + np.roll(row[::-1], 1)) / 2
    power = np.clip(np.fft.fft(row).real, 0.0, None)
    return np.asarray(np.fft.ifft(np.sqrt(power) * np.fft.fft(rng.standard_normal(count))).real)


def sample_at(rng: np.random.Generator, places: Floats, length: float) -> Floats:
    """Return one smooth wobble of unit variance at places along a ruling, mm."""
    matrix = correlation("squared exponential", places[:, None] - places, length)
    return np.asarray(
        np.linalg.cholesky(matrix + 1e-8 * np.eye(len(places))) @ rng.standard_normal(len(places))
    )
