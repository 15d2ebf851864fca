"""Pictures of clay with grooves in it, from a relief and a lamp; where each groove runs is known exactly.

Nothing here knows how grooves are found: a height field is pressed, lit, blurred by a lens and read out by a
sensor. Lengths are pixels; a lamp's azimuth is the direction in which it stands, from +x over +y (down).
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Literal

import cv2
import numpy as np
from numpy.typing import NDArray

Points = NDArray[np.float64]
Field = NDArray[np.float32]
Section = Literal["vee", "round", "bell"]
SECTIONS: tuple[Section, ...] = ("vee", "round", "bell")

TINT = np.array([1.0, 0.84, 0.66], np.float32)
GRAIN_PX = (1.2, 2.5, 5.0, 10.0, 20.0, 60.0)


@dataclass(frozen=True)
class Lamp:
    """A lamp: where it stands, how large it looks (half its angle), and what share of the light comes from all over."""

    azimuth_deg: float = 222.0
    elevation_deg: float = 35.0
    half_size_deg: float = 1.5
    surroundings: float = 0.25


@dataclass(frozen=True, eq=False)
class Ruling:
    """A groove along a dense line (N, 2): full width, depth, section, and how high the clay is pushed up beside it.

    ``pressure`` is how much its depth varies along it (standard deviation, share of the depth).
    """

    line: Points
    width: float
    depth: float
    section: Section = "vee"
    lips: float = 0.08
    pressure: float = 0.15


@dataclass(frozen=True)
class Wedge:
    """An impression of the stylus: the middle of its head, the head's width, its length, and where its tail points."""

    at: tuple[float, float]
    width: float
    length: float
    turn_deg: float = 90.0
    slope: float = 0.8


def smooth_noise(shape: tuple[int, int], length: float, rng: np.random.Generator) -> Field:
    """Return noise of unit variance that changes over ``length`` px."""
    factor = max(1, int(length / 3))
    rows, columns = (side // factor + 8 for side in shape)
    coarse = rng.standard_normal((rows, columns), np.float32)
    coarse = np.asarray(cv2.GaussianBlur(coarse, (0, 0), max(length / factor, 0.3)), np.float32)
    size = (columns * factor, rows * factor)
    fine = cv2.resize(coarse, size, interpolation=cv2.INTER_CUBIC) if factor > 1 else coarse
    fine = np.asarray(fine[: shape[0], : shape[1]], np.float32)
    return np.asarray(fine / fine.std(), np.float32)


def hand_drawn(
    start: tuple[float, float],
    end: tuple[float, float],
    rng: np.random.Generator,
    *,
    stray: float = 2.0,
    over: float = 150.0,
) -> Points:
    """Return a dense line (N, 2) that strays from the straight one by about ``stray`` px and bends over ``over`` px."""
    first, last = np.array(start, float), np.array(end, float)
    length = float(np.hypot(*(last - first)))
    at = np.arange(0.0, length + 1)
    places = np.arange(-3 * over, length + 3 * over, over / 2)
    kernel = np.exp(-0.5 * ((at[:, None] - places) / (over / 2)) ** 2)
    course = (
        stray * (kernel / np.sqrt((kernel**2).sum(axis=1, keepdims=True))) @ rng.standard_normal(len(places))
    )
    along = (last - first) / length
    return first + np.outer(at, along) + np.outer(course, [-along[1], along[0]])


def section_of(kind: Section, share: Field) -> Field:
    """Return the depth, 1 at the bottom, of a groove at a share of its half width from its centre."""
    inside = np.clip(1 - np.abs(share), 0, None)
    if kind == "vee":
        # its bottom is as blunt as the stylus's edge
        blunt = 0.06
        fall = (np.hypot(share, blunt) - blunt) / (np.hypot(1, blunt) - blunt)
        return np.asarray(np.clip(1 - fall, 0, None), np.float32)
    if kind == "round":
        return np.asarray(np.clip(1 - share**2, 0, None), np.float32)
    return np.asarray(0.5 - 0.5 * np.cos(np.pi * inside), np.float32)


def distances(shape: tuple[int, int], line: Points) -> tuple[Field, Field]:
    """Return how far each pixel lies beside a line, and how far along it, by the line's own straight run."""
    along = line[-1] - line[0]
    length = float(np.hypot(*along))
    along = along / length
    y, x = np.mgrid[: shape[0], : shape[1]].astype(float)
    run = (x - line[0, 0]) * along[0] + (y - line[0, 1]) * along[1]
    side = (y - line[0, 1]) * along[0] - (x - line[0, 0]) * along[1]
    places = (line - line[0]) @ along
    course = (line - line[0]) @ np.array([-along[1], along[0]])
    turn = np.gradient(course, places)
    beside = (side - np.interp(run, places, course)) / np.hypot(1, np.interp(run, places, turn))
    return beside.astype(np.float32), run.astype(np.float32)


def press_ruling(shape: tuple[int, int], ruling: Ruling, rng: np.random.Generator) -> Field:
    """Return the height that a ruling adds: below zero in the groove, above it on its lips."""
    beside, run = distances(shape, ruling.line)
    half = ruling.width / 2
    length = float(np.hypot(*(ruling.line[-1] - ruling.line[0])))
    places = np.linspace(0, length, max(4, int(length / (4 * ruling.width))))
    drawn = np.clip(1 + ruling.pressure * rng.standard_normal(len(places)), 0.4, 1.6)
    pressure = np.interp(run, places, drawn) * np.clip(np.minimum(run, length - run) / half + 1, 0, 1)
    groove = section_of(ruling.section, beside / half)
    lips = np.exp(-0.5 * ((np.abs(beside) - 1.25 * half) / (0.22 * half)) ** 2) * (
        np.abs(beside) > 0.9 * half
    )
    return np.asarray(ruling.depth * pressure * (ruling.lips * lips - groove), np.float32)


def press_wedge(height: Field, wedge: Wedge) -> None:
    """Press a wedge into a height field, in place: a three-sided pit for its head, and a narrow one for its tail."""
    reach = 1.2 * max(wedge.width, wedge.length) + 2
    rows, columns = (
        slice(max(0, int(at - reach)), max(0, min(size, int(at + reach) + 2)))
        for at, size in zip(wedge.at[::-1], height.shape, strict=True)
    )
    y, x = np.mgrid[rows, columns].astype(np.float32)
    turn = np.radians(wedge.turn_deg)
    down = (x - wedge.at[0]) * np.cos(turn) + (y - wedge.at[1]) * np.sin(turn)
    side = (y - wedge.at[1]) * np.cos(turn) - (x - wedge.at[0]) * np.sin(turn)
    deep = np.zeros(x.shape, np.float32)
    for width, length in ((wedge.width, 1.1 * wedge.width), (0.45 * wedge.width, wedge.length)):
        flank = np.arctan2(width / 2, length)
        # the distance from the nearest side of the triangle
        sides = (length - down) * np.sin(flank) - np.abs(side) * np.cos(flank)
        deep = np.maximum(deep, wedge.slope * np.minimum(sides, down))
    height[rows, columns] = np.minimum(height[rows, columns], -deep)


def grain(shape: tuple[int, int], roughness: float, rng: np.random.Generator) -> Field:
    """Return the relief of bare clay: dents of many sizes, the wide ones flatter since a hand smoothed them."""
    relief = np.zeros(shape, np.float32)
    for length in GRAIN_PX:
        slope = roughness * (length / GRAIN_PX[0]) ** -0.3
        relief += np.float32(slope * length) * smooth_noise(shape, length, rng)
    return relief


def horizon_tangent(height: Field, azimuth_deg: float, reaches: Iterable[float]) -> Field:
    """Return the tangent of the elevation up to which the relief hides the sky in one direction."""
    east, south = np.cos(np.radians(azimuth_deg)), np.sin(np.radians(azimuth_deg))
    horizon = np.full(height.shape, -9.0, np.float32)
    for reach in reaches:
        shift = np.array([[1, 0, reach * east], [0, 1, reach * south]])
        flags = cv2.INTER_LINEAR | cv2.WARP_INVERSE_MAP
        there = cv2.warpAffine(
            height, shift, height.shape[::-1], flags=flags, borderMode=cv2.BORDER_REPLICATE
        )
        np.maximum(horizon, (there - height) / np.float32(reach), out=horizon)
    return horizon


def light_up(height: Field, lamp: Lamp) -> Field:
    """Return the light that the relief sends upwards, 1 on a level place: Lambert's law and cast shadows."""
    slope_y, slope_x = np.gradient(height)
    azimuth, elevation = np.radians([lamp.azimuth_deg, lamp.elevation_deg])
    uphill = slope_x * np.cos(azimuth) + slope_y * np.sin(azimuth)
    facing = np.sin(elevation) - uphill * np.cos(elevation)
    facing = np.clip(facing, 0, None) / np.sqrt(1 + slope_x**2 + slope_y**2) / np.sin(elevation)
    far = float(np.ptp(height)) / np.tan(np.radians(max(lamp.elevation_deg - lamp.half_size_deg, 3.0)))
    shade = horizon_tangent(height, lamp.azimuth_deg, np.arange(1.0, max(far, 3.0), 1.0))
    seen = (lamp.elevation_deg - np.degrees(np.arctan(shade))) / lamp.half_size_deg
    lit = facing * np.clip(0.5 + 0.5 * seen, 0, 1)
    sky = np.zeros(height.shape, np.float32)
    for turn in range(0, 360, 45):
        # a uniform sky that is hidden up to an elevation e still gives cos^2 e of its light
        hidden = np.clip(horizon_tangent(height, turn, (1, 2, 3, 5, 8, 13, 20, 32)), 0, None)
        sky += 1 / (1 + hidden**2) / 8
    return np.asarray((1 - lamp.surroundings) * lit + lamp.surroundings * sky, np.float32)


def photograph(
    shape: tuple[int, int],
    rulings: Sequence[Ruling],
    lamp: Lamp,
    rng: np.random.Generator,
    *,
    wedges: Sequence[Wedge] = (),
    roughness: float = 0.045,
) -> NDArray[np.uint8]:
    """Return the picture (rows, columns, 3) of a piece of clay."""
    height = grain(shape, roughness, rng)
    hollows = np.zeros(shape, np.float32)
    for pressed in (press_ruling(shape, ruling, rng) for ruling in rulings):
        height += np.maximum(pressed, 0)
        hollows = np.minimum(hollows, pressed)
    for wedge in wedges:
        press_wedge(hollows, wedge)
    height += hollows
    height = np.asarray(cv2.GaussianBlur(height, (0, 0), 0.5), np.float32)
    blotches = 1 + 0.05 * smooth_noise(shape, 70.0, rng) + 0.04 * smooth_noise(shape, 15.0, rng)
    light = 0.36 * light_up(height, lamp) * np.clip(blotches + 0.03 * smooth_noise(shape, 2.0, rng), 0.5, 1.5)
    seen = np.asarray(cv2.GaussianBlur(light, (0, 0), 0.8), np.float32)[..., None] * TINT
    seen = seen + np.float32(0.004) * rng.standard_normal(seen.shape, np.float32)
    linear = np.clip(seen, 0.0, 1.0)
    encoded = np.where(
        linear <= 0.0031308, 12.92 * linear, 1.055 * np.clip(linear, 1e-6, 1) ** (1 / 2.4) - 0.055
    )
    return np.asarray(np.round(255 * encoded), np.uint8)
