"""Photographs of scale bars with known divisions, drawn without a line of the finder's code.

A bar is printed in millimetres on a raster, seen through a homography, blurred in linear light, made noisy,
encoded. The truth is the homography itself.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

import cv2
import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Style = Literal[
    "ticks", "blocks", "halves", "blocks and patches", "ticks and inches", "fine ticks", "white blocks"
]

FINE = 3
"""Raster pixels in one of the photograph's: what is drawn is averaged over them."""
MARGIN_MM = 7.0


@dataclass(frozen=True)
class Bar:
    """A bar and how it was photographed; lengths in mm on the bar, ``blur_px`` and ``noise`` in the photograph."""

    style: Style = "ticks"
    length: int = 50
    px_per_mm: float = 8.0
    tick: float = 0.2
    paper: float = 0.7
    ink: float = 0.03
    ground: float = 0.2
    growth: float = 0.0
    turn_deg: float = 0.0
    slant: tuple[float, float] = (0.0, 0.0)
    """How far the plane is tilted about the picture's x and y, degrees, seen from 400 mm."""
    blur_px: float = 0.8
    noise: float = 0.01
    figures: bool = True
    across: bool = False
    """Whether the figures stand on the divisions themselves."""
    missing: tuple[int, ...] = ()
    dirt: int = 0
    glare: float = 0.0
    seed: int = 0
    height: float = 14.0


@dataclass(frozen=True, eq=False)
class Picture:
    """A photograph and what is true of it: ``to_px`` maps (mm along, mm down) of the bar, shape (..., 2)."""

    pixels: NDArray[np.uint8]
    homography: Floats
    bar: Bar
    step: float
    """Millimetres between the divisions that the bar has."""
    down: float = field(default=1.0)
    """How far down the bar a person would point, mm."""

    def to_px(self, along_down: Floats) -> Floats:
        """Return where points of the bar are seen."""
        homogeneous = (
            np.concatenate([along_down, np.ones((*along_down.shape[:-1], 1))], axis=-1) @ self.homography.T
        )
        return np.asarray(homogeneous[..., :2] / homogeneous[..., 2:])

    def readings(self) -> Floats:
        """Return all divisions in mm that are printed."""
        count = round(self.bar.length / self.step)
        if "ticks" not in self.bar.style:
            count -= 1 - count % 2  # the last block printed is dark
        return np.array([n * self.step for n in range(count + 1) if n * self.step not in self.bar.missing])


def photograph(bar: Bar) -> Picture:
    """Print a bar and take its photograph."""
    rng = np.random.default_rng(bar.seed)
    scale = bar.px_per_mm * FINE
    printed = _print(bar, scale, rng)
    to_photo, size = _look(bar)
    raster_to_mm = np.array([[1 / scale, 0, -MARGIN_MM], [0, 1 / scale, -MARGIN_MM], [0, 0, 1]])
    # the middle of a raster pixel, and of an averaged one, lies at half its own width
    half = np.array([[1, 0, 0.5], [0, 1, 0.5], [0, 0, 1.0]])
    finer = np.diag([FINE, FINE, 1.0])
    whole = np.linalg.inv(half) @ finer @ half @ to_photo @ raster_to_mm @ half
    seen = cv2.warpPerspective(
        printed,
        whole,
        (size[0] * FINE, size[1] * FINE),
        flags=cv2.INTER_LINEAR,
        borderMode=cv2.BORDER_CONSTANT,
        borderValue=(bar.ground,) * 3,
    )
    seen = cv2.GaussianBlur(seen, (0, 0), bar.blur_px * FINE) if bar.blur_px else seen
    seen = cv2.resize(seen, size, interpolation=cv2.INTER_AREA)
    if bar.glare:
        x, y = np.meshgrid(np.linspace(-1, 1, size[0]), np.linspace(-1, 1, size[1]))
        seen = seen * (1 + bar.glare * (0.6 * x + 0.4 * y)[..., None].astype(np.float32))
    seen = seen + bar.noise * rng.standard_normal(seen.shape, np.float32) * np.sqrt(np.clip(seen, 0.02, 1))
    linear = np.clip(seen, 0, 1)
    encoded = np.where(linear <= 0.0031308, 12.92 * linear, 1.055 * linear ** (1 / 2.4) - 0.055)
    pixels = np.round(encoded * 255).astype(np.uint8)
    _, jpeg = cv2.imencode(".jpg", pixels[..., ::-1], [cv2.IMWRITE_JPEG_QUALITY, 92])
    decoded = cv2.cvtColor(np.asarray(cv2.imdecode(jpeg, cv2.IMREAD_COLOR)), cv2.COLOR_BGR2RGB)
    step, down = STEPS[bar.style]
    return Picture(np.ascontiguousarray(decoded, np.uint8), to_photo, bar, step, down)


STEPS: dict[Style, tuple[float, float]] = {
    "ticks": (1.0, 1.0),
    "fine ticks": (1.0, 1.2),
    "ticks and inches": (1.0, 1.0),
    "blocks": (10.0, 3.0),
    "white blocks": (10.0, 3.0),
    "blocks and patches": (10.0, 3.0),
    "halves": (5.0, 3.0),
}


def _look(bar: Bar) -> tuple[Floats, tuple[int, int]]:
    """Return the map from mm of the bar to the photograph, and the photograph's size."""
    about_x, about_y = np.radians(bar.slant)
    turn = np.radians(bar.turn_deg)
    plane = np.array([[np.cos(turn), -np.sin(turn)], [np.sin(turn), np.cos(turn)], [0, 0]])
    tilt = np.array(
        [[np.cos(about_y), 0, np.sin(about_y)], [0, 1, 0], [-np.sin(about_y), 0, np.cos(about_y)]]
    ) @ (np.array([[1, 0, 0], [0, np.cos(about_x), -np.sin(about_x)], [0, np.sin(about_x), np.cos(about_x)]]))
    distance = 400.0
    middle = np.array([bar.length / 2, bar.height / 2])
    axes = tilt @ plane
    origin = np.array([0, 0, distance]) - axes @ middle
    focal = bar.px_per_mm * distance
    seen = np.diag([focal, focal, 1.0]) @ np.column_stack([axes, origin])
    rim = np.array(
        [
            [x, y, 1]
            for x in (-MARGIN_MM, bar.length + MARGIN_MM)
            for y in (-MARGIN_MM, bar.height + MARGIN_MM)
        ]
    )
    corners = rim @ seen.T
    corners = corners[:, :2] / corners[:, 2:]
    low, high = corners.min(axis=0), corners.max(axis=0)
    shift = np.array([[1, 0, -low[0]], [0, 1, -low[1]], [0, 0, 1.0]])
    width, height = np.ceil(high - low).astype(int)
    return shift @ seen, (int(width), int(height))


def _print(bar: Bar, scale: float, rng: np.random.Generator) -> NDArray[np.float32]:
    """Return the raster (rows, columns, 3) of the bar, linear light, its ground around it."""
    width, height = bar.length + 2 * MARGIN_MM, bar.height + 2 * MARGIN_MM
    raster = np.full((round(height * scale), round(width * scale), 3), bar.ground, np.float32)
    if bar.style != "white blocks":
        _box(
            raster,
            scale,
            (-4.0, 0.0 if "ticks" in bar.style else -1.0, bar.length + 4.0, bar.height),
            bar.paper,
        )
    for box in _boxes(bar):
        _box(raster, scale, box[:4], bar.paper if bar.style == "white blocks" else bar.ink)
    if bar.style == "blocks and patches":
        _patches(raster, scale, bar)
    if bar.figures:
        _figures(raster, scale, bar)
    for _ in range(bar.dirt):
        at = (rng.uniform(0, bar.length), rng.uniform(0, 4.0))
        middle = (round((at[0] + MARGIN_MM) * scale), round((at[1] + MARGIN_MM) * scale))
        axes = (round(rng.uniform(0.2, 1.1) * scale), round(rng.uniform(0.2, 1.1) * scale))
        tone = float(rng.uniform(0.02, 0.5))
        cv2.ellipse(raster, middle, axes, rng.uniform(0, 180), 0, 360, (tone, tone * 0.9, tone * 0.7), -1)
    return raster


def _boxes(bar: Bar) -> list[tuple[float, float, float, float]]:
    """Return what is printed: left, upper, right, lower in mm."""
    half = bar.growth / 2
    if "ticks" in bar.style:
        fine = bar.style == "fine ticks"
        count = bar.length * (2 if fine else 1)
        long = {0: 5.0, 5: 3.6}
        boxes = []
        for n in range(count + 1):
            mm = n / 2 if fine else float(n)
            down = long.get(int(mm) % 10, 2.6) if mm == int(mm) else 1.5
            if mm not in bar.missing:
                boxes.append((mm - bar.tick / 2 - half, 0.0, mm + bar.tick / 2 + half, down))
        if bar.style == "ticks and inches":
            for n in range(int(bar.length / 25.4 * 16) + 1):
                mm = n * 25.4 / 16
                up = {0: 5.0, 8: 4.0, 4: 3.2, 12: 3.2}.get(n % 16, 2.4 if n % 2 == 0 else 1.7)
                boxes.append((mm - bar.tick / 2, bar.height - up, mm + bar.tick / 2, bar.height))
        return boxes
    size = 5.0 if bar.style == "halves" else 10.0
    return [
        (n * size - half, 0.0 - half, (n + 1) * size + half, 5.0 + half)
        for n in range(0, round(bar.length / size), 2)
    ]


def _box(raster: NDArray[np.float32], scale: float, box: tuple[float, ...], tone: float) -> None:
    """Fill a box with the exact share of each raster pixel that it covers."""
    left, upper, right, lower = ((side + MARGIN_MM) * scale for side in box)
    x, y = np.arange(raster.shape[1]), np.arange(raster.shape[0])
    across = np.clip(np.minimum(x + 1, right) - np.maximum(x, left), 0, 1)
    down = np.clip(np.minimum(y + 1, lower) - np.maximum(y, upper), 0, 1)
    rows, columns = np.flatnonzero(down), np.flatnonzero(across)
    if len(rows) and len(columns):
        place = np.s_[rows[0] : rows[-1] + 1, columns[0] : columns[-1] + 1]
        share = (down[rows, None] * across[None, columns])[..., None].astype(np.float32)
        raster[place] += share * (np.float32(tone) - raster[place])


def _patches(raster: NDArray[np.float32], scale: float, bar: Bar) -> None:
    """Print coloured and grey patches of another pitch below the blocks."""
    rng = np.random.default_rng(77)
    for n in range(int(bar.length / 7.5)):
        tone = rng.uniform(0.03, 0.75, 3)
        for channel in range(3):
            _box(
                raster[..., channel : channel + 1],
                scale,
                (7.5 * n, 5.6, 7.5 * n + 7.5, 11.5),
                float(tone[channel]),
            )


def _figures(raster: NDArray[np.float32], scale: float, bar: Bar) -> None:
    """Print figures at every centimetre."""
    tone = bar.paper if bar.style == "white blocks" else bar.ink
    for centimetre in range(bar.length // 10 + 1):
        down = 7.2 if not bar.across else 2.6
        if bar.style == "blocks and patches":
            down = 13.0
        size = 2.4 * scale / 22.0
        text = str(centimetre)
        (wide, tall), _ = cv2.getTextSize(text, cv2.FONT_HERSHEY_DUPLEX, size, max(1, round(0.3 * scale)))
        at = (
            round((10 * centimetre + MARGIN_MM) * scale - wide / 2),
            round((down + MARGIN_MM) * scale + tall / 2),
        )
        drawn = np.zeros(raster.shape[:2], np.uint8)
        cv2.putText(
            drawn, text, at, cv2.FONT_HERSHEY_DUPLEX, size, (255,), max(1, round(0.3 * scale)), cv2.LINE_8
        )
        raster[drawn > 0] = tone
