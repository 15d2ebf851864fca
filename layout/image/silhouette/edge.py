"""A ring drawn to the step of brightness or colour across it: the second and third step of ``contour``."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import NDArray

from layout.image.photograph import Pixels
from layout.image.sampling import Brightness, Crop, linear_light
from layout.image.silhouette.ground import DAMPING, TINT_NOISE, shrunk
from layout.image.silhouette.ring import evenly, normals_of, running_median, smoothed
from layout.quantity import Floats

STEP_PX = 2.0
"""Spacing of the points of a contour."""
FAINT = 0.2
"""A step of brightness (logarithm) that is hardly one: the shading of the clay has steps as high."""
CLEAR = 12.0
"""Evidence, half a squared number of standard deviations, from which a step is clear."""
FLOOR_PX = 0.1
"""What no fit sees: the camera's tone curve and sharpening, compression (standard uncertainty)."""
FAINT_PX = 0.6
"""How far off a contour may be where brightness has hardly a step: colour is stored at half the resolution."""


def approach(pixels: Pixels, ring: Floats, px_per_cell: float) -> Floats:
    """Draw the ring to the best step across it, on pictures three times finer each time."""
    margin = 16 * px_per_cell
    low = np.maximum(np.floor(ring.min(axis=0) - margin), 0).astype(int)
    high = np.ceil(ring.max(axis=0) + margin).astype(int) + 1
    piece = pixels[low[1] : high[1], low[0] : high[0]]
    reach, factor = 6.0, px_per_cell
    while True:
        size = (max(1, round(piece.shape[1] / factor)), max(1, round(piece.shape[0] / factor)))
        picture = shrunk(piece, size)
        scale = np.array(piece.shape[1::-1]) / picture.shape[1::-1]
        ring = (_settle(picture, (ring - low + 0.5) / scale - 0.5, reach) + 0.5) * scale - 0.5 + low
        if factor == 1 and reach < 6:
            return ring
        reach, factor = 4.0, max(1.0, factor / 3)


def _settle(picture: Pixels, ring: Floats, reach: float) -> Floats:
    """Return the ring after one move of up to ``reach`` px along its normals."""
    ring = evenly(ring, STEP_PX)
    inwards = normals_of(ring, 3.0)
    across = _Across(reach + 6, reach, 0.5)
    light = _profiles(picture, ring, inwards, across.at)
    rigid = _steps(across, 1.2, slopes=False, width=math.inf)
    by_brightness, _ = _misfit(
        np.log(light + DAMPING).mean(axis=0), _steps(across, 1.2, slopes=True, width=math.inf), least=1e-5
    )
    by_colour, tinted = _misfit(_warmth(light, 0.0), rigid, least=1e-4)
    damped, clear = _misfit(_warmth(light, 0.25), rigid, least=1e-4)
    share, _ = _share_of_colour(light, across, by_colour, tinted)
    # the sharp rim of a shadow is the stronger step in brightness, but none in colour: colour decides where it is clear
    cost = (1 - 0.8 * share) * _bounded(by_brightness, 20) + share * _bounded(by_colour, 40)
    cost += (1 - share) * _bounded(damped, min(40.0, 0.04 * float(np.median(clear.max(axis=1)))))
    return ring + across.places[_smoothest(cost, 0.6 / across.pitch)][:, None] * inwards


def sharpen(pixels: Pixels, ring: Floats) -> tuple[Floats, float, float]:
    """Return the ring at the half-way point of a blurred step in linear light, its sd, and the plain share.

    Where the brightness hardly changes across the contour, the colour says where it is.
    """
    ring = evenly(smoothed(ring, 0.6), STEP_PX)
    inwards = normals_of(ring, 2.0)
    across = _Across(8.0, 1.5, 0.125)
    light = _profiles(pixels, ring, inwards, across.at)
    by_brightness, stepped = _best_misfit(light.mean(axis=0), across, slopes=True)
    by_colour, tinted = _best_misfit(_warmth(light, 0.0), across, slopes=False)
    share, faint = _share_of_colour(light, across, by_colour, tinted)
    cost = (1 - 0.8 * share) * _bounded(by_brightness, 20) + share * _bounded(by_colour, 20)
    chosen = np.clip(_smoothest(cost, 0.5 / across.pitch), 1, len(across.places) - 2)
    off, variance = _lowest(cost, chosen)
    point = np.arange(len(ring)), chosen
    # a faint step of brightness may be one of the shading, however clear it is
    evidence = np.maximum(np.where(faint < 0.25, stepped[point], 0), share[:, 0] * tinted[point])
    near = np.sum([np.roll(np.minimum(evidence, CLEAR), by) for by in range(-2, 3)], axis=0)
    variance = across.pitch**2 * variance + (FAINT_PX * np.maximum(share[:, 0], faint)) ** 2
    sd_px = math.sqrt(float(variance.mean()) + FLOOR_PX**2)
    moved_px = across.places[chosen] + across.pitch * off
    return ring + moved_px[:, None] * inwards, sd_px, float(np.mean(near > CLEAR))


@dataclass(frozen=True)
class _Across:
    """Where profiles are sampled, each px up to ``half``, and where steps are tried, up to ``reach``; inwards is up."""

    half: float
    reach: float
    pitch: float

    @property
    def at(self) -> Floats:
        """Where profiles are sampled, px."""
        return np.arange(-self.half, self.half + 0.5)

    @property
    def places(self) -> Floats:
        """Where steps are tried, px."""
        return np.arange(-self.reach, self.reach + self.pitch / 2, self.pitch)


@dataclass(frozen=True, eq=False)
class _Steps:
    """Models of a profile, one for each place of a step: weighted orthonormal bases, (places, samples, terms).

    The step is the last term; ``unit`` is what a step of height 1 has of it.
    """

    bases: Floats
    unit: Floats
    weights: Floats


@cache
def _steps(across: _Across, blur: float, *, slopes: bool, width: float) -> _Steps:
    """Return a level and a blurred step; with ``slopes`` also the slopes on both sides; near samples count more."""
    weights = np.exp(-0.5 * (across.at / width) ** 2)
    bases, unit = [], []
    for place in across.places:
        away = (across.at - place) / blur
        step = np.array([0.5 * (1 + math.erf(z / math.sqrt(2))) for z in away])
        ramp = blur * (away * step + np.exp(-0.5 * away**2) / math.sqrt(2 * math.pi))
        level = np.ones_like(away)
        columns = [level, blur * away - ramp, ramp, step] if slopes else [level, step]
        base, shares = np.linalg.qr(np.column_stack(columns) * weights[:, None])
        bases.append(base)
        unit.append(shares[-1, -1])
    return _Steps(np.array(bases), np.array(unit), weights)


def _misfit(profiles: Brightness, steps: _Steps, *, least: float) -> tuple[Floats, Floats]:
    """Return half the squared misfit of each step, shape (points, places), and half what the step itself explains.

    Both are in units of the variance that remains: the least misfit, as the median over some neighbours, which is
    noise, texture, and what the model lacks.
    """
    total, explained = _explained(profiles, steps)
    misfit = np.maximum(total[:, None] - explained.sum(axis=2), 0)
    variance = 2 * (running_median(misfit.min(axis=1) / float(np.sum(steps.weights**2)), 17) + least)[:, None]
    return misfit / variance, explained[:, :, -1] / variance


def _explained(profiles: Brightness, steps: _Steps) -> tuple[Floats, Floats]:
    """Return the weighted sum of squares of each profile, and what each term at each place explains of it."""
    level = (profiles - profiles.mean(axis=1, keepdims=True)) * steps.weights
    parts = np.einsum("pn,jnk->pjk", level, steps.bases, optimize=True)
    return np.asarray((level**2).sum(axis=1)), np.asarray(parts**2)


def _best_misfit(profiles: Brightness, across: _Across, *, slopes: bool) -> tuple[Floats, Floats]:
    """Return the misfit and the evidence of steps of that blur which suits the whole contour best."""
    # brightness is sharp and bends within the clay; colour is stored more coarsely, and does not change with shade
    blurs, width, least = ((0.7, 1.0, 1.5, 2.2), 3.0, 1e-7) if slopes else ((1.0, 1.6, 2.4, 3.4), 5.0, 1e-4)
    some = profiles[:: max(1, len(profiles) // 300)]
    rest = []
    for blur in blurs:
        total, explained = _explained(some, _steps(across, blur, slopes=slopes, width=width))
        rest.append(np.median(1 - explained.sum(axis=2).max(axis=1) / np.maximum(total, 1e-12)))
    best = blurs[int(np.argmin(rest))]
    return _misfit(profiles, _steps(across, best, slopes=slopes, width=width), least=least)


def _share_of_colour(
    light: Brightness, across: _Across, by_colour: Floats, tinted: Floats
) -> tuple[Floats, Floats]:
    """Return how far colour decides, shape (points, 1), and how faint the step of brightness is: both from 0 to 1.

    Colour decides the more, the less the brightness steps beside it. Both are compared across where the contour stands
    by its colour, if that is clear, else where it is now. On clay that turns away from the lamp brightness is steep
    but has no step: the lesser of two measures of it counts.
    """
    seen = np.where(tinted.max(axis=1) > CLEAR, by_colour.argmin(axis=1), len(across.places) // 2)
    place = np.round(running_median(seen, 9)).astype(int)
    away = across.at - across.places[place][:, None]
    logs = np.log(light.mean(axis=0) + DAMPING)
    steps = _steps(across, 1.2, slopes=True, width=3.0)
    level = (logs - logs.mean(axis=1, keepdims=True)) * steps.weights
    height = (level * steps.bases[place, :, -1]).sum(axis=1) / steps.unit[place]
    contrast = np.minimum(np.abs(height), np.abs(_contrast(logs, away)))
    # in the dark colour is noise
    near = np.abs(away) <= 4
    blind = TINT_NOISE * np.exp(-(logs * near).sum(axis=1) / near.sum(axis=1))
    tint = np.maximum(np.abs(_contrast(_warmth(light, 0.0), away)) - blind, 0.01)
    return np.exp(-((contrast / (0.7 * tint)) ** 2))[:, None], np.exp(-((contrast / FAINT) ** 2))


def _contrast(profiles: Brightness, away: Floats) -> Floats:
    """Return the mean from 1 to 4 px inside less that outside."""
    inside, outside = (np.abs(side * away - 2.5) <= 1.5 for side in (1, -1))
    within, without = ((profiles * where).sum(axis=1) / where.sum(axis=1) for where in (inside, outside))
    return np.asarray(within - without)


def _warmth(light: Brightness, share: float) -> Brightness:
    """Return the logarithm of red over blue, damped by a share of the most light near the middle of each profile.

    The colour of clay does not depend on its shading. But next to bright clay its blur would tint a black ground:
    the damping keeps the step of colour where the step of light is.
    """
    middle = light.shape[2] // 2
    damping = np.maximum(DAMPING, share * light[:, :, middle - 4 : middle + 5].max(axis=(0, 2)))[:, None]
    return np.asarray(np.log(light[0] + damping) - np.log(light[2] + damping), np.float32)


def _lowest(cost: Floats, chosen: NDArray[np.int64]) -> tuple[Floats, Floats]:
    """Return where parabolas through three costs are lowest, in places from the chosen one, and their variances."""
    before, here, after = (cost[np.arange(len(cost)), chosen + side] for side in (-1, 0, 1))
    bend = np.maximum(before - 2 * here + after, 0.007)
    return np.clip((before - after) / (2 * bend), -0.5, 0.5), 1 / bend


def _profiles(picture: Pixels, ring: Floats, inwards: Floats, at: Floats) -> Brightness:
    """Return linear red, green and blue across a ring, shape (3, points, places), piece by piece of the picture."""
    height, width = picture.shape[:2]
    found = []
    for start in range(0, len(ring), 200):
        points = ring[start : start + 200, None] + at[:, None] * inwards[start : start + 200, None]
        low = np.clip(np.floor(points.min(axis=(0, 1))), 0, [width - 1, height - 1]).astype(int)
        high = np.clip(np.ceil(points.max(axis=(0, 1))), 0, [width - 1, height - 1]).astype(int)
        channels = linear_light(picture[low[1] : high[1] + 1, low[0] : high[0] + 1])
        found.append(np.stack([Crop(channels[..., c], low.astype(float)).sample(points) for c in range(3)]))
    return np.concatenate(found, axis=1)


def _bounded(cost: Floats, most: float) -> Floats:
    """Return costs above each point's least, bounded, so that no scratch or crumb outvotes its neighbours."""
    return np.asarray(np.minimum(cost - cost.min(axis=1, keepdims=True), most))


def _smoothest(cost: Floats, stiffness: float) -> NDArray[np.int64]:
    """Return the place of each point of a ring so that costs and jumps together are least (Viterbi 1967).

    ``stiffness`` is the standard deviation of a jump between neighbours, in places.
    """
    points, places = cost.shape
    number = np.arange(places)
    jump = 0.5 * ((number[:, None] - number) / stiffness) ** 2
    # the ring is entered and left with a lead of neighbours, which closes it
    lead = min(150, points // 2)
    order = np.concatenate([np.arange(points - lead, points), np.arange(points), np.arange(lead)])
    total, back = cost[order[0]], np.zeros((len(order), places), np.int64)
    for turn, point in enumerate(order[1:], 1):
        ways = total[:, None] + jump
        back[turn] = ways.argmin(axis=0)
        total = ways[back[turn], number] + cost[point]
    path = np.zeros(len(order), np.int64)
    path[-1] = total.argmin()
    for turn in range(len(order) - 1, 0, -1):
        path[turn - 1] = back[turn, path[turn]]
    return path[lead : lead + points]
