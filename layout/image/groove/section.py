"""How the section of a groove looks under a lamp: brightness across it.

A groove under raking light is dark on the flank next to the lamp and bright on the other; where the light is
low the groove's rim throws a shadow into it, where it is steep both flanks are dark.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from layout.quantity import Floats

Single = NDArray[np.float32]

PRIORS: dict[str, tuple[float, float, float, float]] = {
    # mean, standard deviation, lowest and highest value; centre and width by a scale of the caller's
    "centre": (0.0, 1.0, -1.6, 1.6),
    "log_half": (0.0, 0.6, -1.0, 0.8),
    "log_slope": (float(np.log(0.6)), 0.5, float(np.log(0.1)), float(np.log(2.5))),
    # how much a slope changes the light: cot(elevation) * sin(azimuth off the groove)
    "log_raking": (0.0, 0.9, float(np.log(0.08)), float(np.log(6.0))),
    # of the section 1 - |x|^power: 1 is a V, 2 a parabola
    "power": (1.5, 0.5, 1.0, 2.5),
    # how soft its rim and how blunt its bottom is, in half widths
    "log_rim": (float(np.log(0.15)), 0.6, float(np.log(0.04)), float(np.log(0.6))),
    "log_bottom": (float(np.log(0.12)), 0.6, float(np.log(0.03)), float(np.log(0.6))),
    # slope of the clay pushed up beside the groove, as a share of the flank's
    "lips": (0.08, 0.12, -0.05, 0.6),
    # share of the light that comes from all over, and how far depth hides it
    "surroundings": (0.25, 0.12, 0.0, 0.8),
    "hiding": (1.0, 0.4, 0.0, 2.5),
    # of lens and sensor, px
    "log_blur": (float(np.log(1.1)), 0.25, float(np.log(0.4)), float(np.log(4.0))),
    # of a second groove: how far from its expected place it stands, in half widths, and how much steeper it is
    "astray": (0.0, 0.3, -1.0, 1.0),
    "log_ratio": (0.0, 0.3, -1.5, 1.5),
}
NAMES = tuple(PRIORS)
CENTRE, LOG_HALF, LOG_SLOPE, LOG_RAKING, POWER = range(5)
OF_ONE = NAMES.index("astray")
"""So many parameters describe one groove; two more one beside it."""

SHADOW_EDGE = 0.06
"""Over which share of the groove's depth a shadow begins."""
LIP_AT, LIP_WIDTH = 1.4, 0.3
"""Where the pushed-up clay falls back to the face, in half widths."""


@dataclass(frozen=True)
class Beside:
    """A second groove, alike, ``apart_px`` beside the first; its sign says on which side.

    The centre that counts is ``shared`` of the way from the first to the second: 0 for the first itself, 0.5 for
    the middle of a double ruling.
    """

    apart_px: float
    shared: float


def mirrored_beside(beside: Beside | None, mirrored: bool) -> Beside | None:
    """Return what stands beside a groove on an axis that runs the other way."""
    return replace(beside, apart_px=-beside.apart_px) if beside is not None and mirrored else beside


def contrast_of_sections(
    parameters: Floats,
    across_px: Floats,
    scale_px: float,
    mirrored: NDArray[np.bool_],
    beside: Beside | None = None,
) -> Single:
    """Return the contrast against the level face, shape (B, U), of grooves under a lamp.

    Lambert's law for the lamp, with the shadow that a rim casts; for the light from all over, how much of the sky
    the depth hides; a Gaussian blur.

    Parameters
    ----------
    parameters
        Shape (B, 11), in the order of ``PRIORS``; 13 with a second groove.
    across_px
        Even axis across the groove, symmetric about 0, shape (U,).
    scale_px
        The length by which centre and half width are told.
    mirrored
        Whether the lamp stands on the left instead of the right, shape (B,); centres then count to the left.
    """
    axis = across_px.astype(np.float32)
    step = float(axis[1] - axis[0])
    columns = parameters.astype(np.float32).T[..., None]
    named = dict(zip(NAMES, columns, strict=False))
    half = np.exp(named["log_half"]) * np.float32(scale_px)
    centre = named["centre"] * np.float32(scale_px)
    if beside is None:
        slope = _slope((axis - centre) / half, named)
    else:
        side = np.where(mirrored, -1, 1)[:, None].astype(np.float32)
        apart = side * np.float32(beside.apart_px) + named["astray"] * half
        ratio = np.exp(0.5 * named["log_ratio"])
        slope = _slope((axis - centre + np.float32(beside.shared) * apart) / half, named) / ratio
        slope += _slope((axis - centre - np.float32(1 - beside.shared) * apart) / half, named) * ratio
    height = (np.cumsum(slope, axis=1) - 0.5 * slope) * np.float32(step)
    height -= 0.5 * (height[:, :1] + height[:, -1:])
    seen = _blurred(_lit(slope, height, axis, half, named), step, np.exp(named["log_blur"]))
    seen[mirrored] = seen[mirrored, ::-1]
    return seen


def _slope(x: Single, named: dict[str, Single]) -> Single:
    """Return the slope of the clay at ``x`` half widths from a groove's centre."""
    away = np.abs(x)
    bottom = np.exp(named["log_bottom"])
    flank = x * np.exp((0.5 * named["power"] - 1) * np.log(x * x + bottom * bottom))
    inside = 1 / (1 + np.exp(np.minimum((away - 1) * (2 * np.exp(-named["log_rim"])), 30)))
    lip = np.sign(x) * np.exp(-0.5 * ((away - LIP_AT) / LIP_WIDTH) ** 2)
    return np.asarray(np.exp(named["log_slope"]) * (flank * inside - named["lips"] * lip), np.float32)


def _lit(slope: Single, height: Single, axis: Single, half: Single, named: dict[str, Single]) -> Single:
    """Return the contrast under lamp and surroundings together."""
    raking, surroundings = np.exp(named["log_raking"]), named["surroundings"]
    # along a ray to the lamp height - distance / raking is the same: what has more of it on the right hides it
    ray = height - axis / raking
    hidden = np.maximum.accumulate(ray[:, ::-1], axis=1)[:, ::-1] - ray
    seen = np.clip(1 - hidden / (SHADOW_EDGE * half * np.exp(named["log_slope"])), 0, 1)
    lamp = np.maximum(1 - raking * slope, 0) / np.sqrt(1 + slope * slope) * seen
    depth = np.maximum(-height, 0)
    deepest = depth.max(axis=1, keepdims=True) + np.float32(1e-6)
    # at the bottom of a V of slope s a uniform sky gives 1 / (1 + s^2) of its light
    steep = (deepest / half) ** 2
    sky = np.maximum(1 - named["hiding"] * steep / (1 + steep) * depth / deepest, 0)
    return np.asarray((1 - surroundings) * lamp + surroundings * sky - 1, np.float32)


def _blurred(contrast: Single, step_px: float, blur_px: Single) -> Single:
    """Return profiles (B, U), each blurred by its own Gaussian, their ends continued."""
    many = contrast.shape[1]
    left, right = (np.repeat(contrast[:, at : at + 1], many // 4, axis=1) for at in (0, many - 1))
    padded = np.concatenate([contrast, right, left], axis=1)
    turns = (2 * np.pi * np.fft.rfftfreq(padded.shape[1], step_px)).astype(np.float32)
    seen = np.fft.rfft(padded, axis=1) * np.exp(-0.5 * (blur_px * turns) ** 2)
    return np.asarray(np.fft.irfft(seen, padded.shape[1], axis=1)[:, :many], np.float32)
