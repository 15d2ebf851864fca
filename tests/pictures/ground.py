"""Pictures of fragments that lie on a plain ground; where their silhouettes run is known exactly.

Nothing here knows how contours are found. Silhouettes are polygons, drawn with 8 x 8 samples to a pixel; clay is lit
as a convex body whose limb turns away from the camera; the shadow is the silhouette swept away from the lamp, the
softer the further; then comes what every camera does: vignetting, blur in linear light, noise, sRGB, JPEG. Pixel
centres stand on whole numbers; y runs down, and rings run clockwise as seen.
"""

from __future__ import annotations

from dataclasses import dataclass

import cv2
import numpy as np
import shapely
from numpy.typing import NDArray

Points = NDArray[np.float64]
Field = NDArray[np.float32]
Picture = NDArray[np.uint8]
Colour = tuple[float, float, float]

SAMPLES = 8

BLACK: Colour = (0.0040, 0.0039, 0.0042)
GREY: Colour = (0.270, 0.275, 0.283)
WHITE: Colour = (0.78, 0.79, 0.80)

BROWN: Colour = (0.42, 0.30, 0.20)
GREY_CLAY: Colour = (0.21, 0.20, 0.185)
DARK: Colour = (0.075, 0.060, 0.048)
PALE: Colour = (0.62, 0.53, 0.42)


@dataclass(frozen=True, eq=False)
class Thing:
    """A piece of clay: silhouette (N, 2), colour in linear light, and how wide the limb is that turns away, px."""

    ring: Points
    colour: Colour = BROWN
    limb_px: float = 45.0


@dataclass(frozen=True, eq=False)
class Card:
    """A printed scale: corners (4, 2); its blocks are black and white in turn."""

    corners: Points
    blocks: int = 10


@dataclass(frozen=True)
class Setting:
    """Ground, lamp and camera.

    ``towards`` is where the lamp stands (x, y, z); ``shadow_px`` how far the shadow reaches, ``soft_px`` how soft its
    end is; ``ambient`` the light that reaches everything; ``vignetting`` what is lost in the corners, ``slope`` how
    much brighter the ground is on the right than on the left; ``texture`` the relative roughness of the ground.
    """

    ground: Colour = BLACK
    towards: tuple[float, float, float] = (-0.55, -0.50, 0.67)
    shadow_px: float = 0.0
    soft_px: float = 9.0
    ambient: float = 0.30
    vignetting: float = 0.0
    slope: float = 0.0
    texture: float = 0.02
    blur_px: float = 0.9
    noise: float = 1.0
    quality: int | None = 92


def picture(
    size: tuple[int, int], things: list[Thing], setting: Setting, seed: int, cards: tuple[Card, ...] = ()
) -> Picture:
    """Return a photograph (height, width, 3) of things and cards on a ground; ``size`` is (width, height)."""
    rng = np.random.default_rng(seed)
    width, height = size
    tone = 1 + setting.texture * (layers(size, (1.2, 3.0, 9.0), rng) + 0.5 * layers(size, (120.0,), rng))
    light = np.asarray(tone[..., None] * np.array(setting.ground, np.float32), np.float32)
    light *= shade(size, things, cards, setting)[..., None]
    for card in cards:
        light = draw_card(light, card)
    for thing in things:
        cover = coverage(size, thing.ring)[..., None]
        light = light * (1 - cover) + cover * clay(size, thing, setting, rng)
    x, y = np.meshgrid(np.linspace(-1, 1, width), np.linspace(-1, 1, height))
    uneven = (1 - setting.vignetting * (x**2 + y**2) / 2) * (1 + setting.slope * x)
    return camera(light * uneven[..., None].astype(np.float32), setting, rng)


def coverage(size: tuple[int, int], ring: Points) -> Field:
    """Return the share of each pixel that a polygon covers, from 8 x 8 samples."""
    width, height = size
    cover = np.zeros((height, width), np.float32)
    low = np.clip(np.floor(ring.min(axis=0)) - 1, 0, [width - 1, height - 1]).astype(int)
    high = np.clip(np.ceil(ring.max(axis=0)) + 2, 1, [width, height]).astype(int)
    around = (int(high[0] - low[0]), int(high[1] - low[1]))
    fine = np.zeros((around[1] * SAMPLES, around[0] * SAMPLES), np.uint8)
    # OpenCV fills the outline as well, half a sample too far
    inner = shapely.Polygon(ring).buffer(-0.5 / SAMPLES, join_style="mitre")
    for part in getattr(inner, "geoms", [inner]):
        # a place on the picture, in the lattice of samples, in sixteenths of their spacing
        places = (shapely.get_coordinates(part.exterior) - low + 0.5) * SAMPLES - 0.5
        cv2.fillPoly(fine, [np.round(places * 16).astype(np.int32)], (255,), shift=4)
    shares = cv2.resize(fine, around, interpolation=cv2.INTER_AREA) / np.float32(255)
    cover[low[1] : high[1], low[0] : high[0]] = shares
    return cover


def clay(size: tuple[int, int], thing: Thing, setting: Setting, rng: np.random.Generator) -> Field:
    """Return the light of a convex piece of clay, drawn a little beyond its silhouette."""
    within = (coverage(size, thing.ring) >= 0.5).astype(np.uint8)
    depth = np.asarray(cv2.distanceTransform(within, cv2.DIST_L2, 5), np.float32)
    depth = np.asarray(cv2.GaussianBlur(depth, (0, 0), 2.0), np.float32)
    # a quarter circle in section: the normal turns away by asin(1 - depth / limb)
    aside = np.clip(1 - depth / thing.limb_px, 0, 1)
    upright = np.sqrt(np.clip(1 - aside**2, 0, 1))
    gy, gx = np.gradient(np.asarray(cv2.GaussianBlur(depth, (0, 0), 3.0), np.float32))
    steep = np.maximum(np.hypot(gx, gy), 1e-3)
    relief = layers(size, (1.5, 3.0, 8.0), rng)
    ry, rx = np.gradient(relief)
    normal = np.stack([-gx / steep * aside - 0.08 * rx, -gy / steep * aside - 0.08 * ry, upright], axis=-1)
    normal /= np.linalg.norm(normal, axis=-1, keepdims=True)
    lit = np.clip(normal @ np.array(setting.towards, np.float32), 0, None)
    around = setting.ambient * (0.5 + 0.5 * upright)
    stain = 1 + 0.05 * layers(size, (2.0, 6.0, 25.0), rng) + 0.06 * layers(size, (60.0,), rng)
    albedo = stain[..., None] * np.array(thing.colour, np.float32)
    return np.asarray(albedo * (1.25 * lit + around)[..., None], np.float32)


def shade(size: tuple[int, int], things: list[Thing], cards: tuple[Card, ...], setting: Setting) -> Field:
    """Return what is left of the ground's light: silhouettes swept away from the lamp, softer with the way."""
    width, height = size
    away = -np.array(setting.towards[:2]) / np.hypot(*setting.towards[:2])
    dark = np.zeros((height, width), np.float32)
    casting = [(thing.ring, setting.shadow_px) for thing in things]
    casting += [(card.corners, 0.05 * setting.shadow_px) for card in cards]
    for ring, reach in casting:
        for share in np.linspace(0, 1, 13)[1:] if reach else ():
            there = coverage_quick(size, ring + away * share * reach)
            soft = share * setting.soft_px
            dark = np.maximum(dark, np.asarray(cv2.GaussianBlur(there, (0, 0), soft), np.float32))
    return np.asarray(1 - (1 - setting.ambient) * dark, np.float32)


def coverage_quick(size: tuple[int, int], ring: Points) -> Field:
    """Return a polygon drawn with OpenCV's own anti-aliasing: good enough for what is blurred anyway."""
    canvas = np.zeros(size[::-1], np.uint8)
    cv2.fillPoly(canvas, [np.round(ring * 16).astype(np.int32)], (255,), cv2.LINE_AA, 4)
    return np.asarray(canvas / np.float32(255), np.float32)


def draw_card(light: Field, card: Card) -> Field:
    """Return the picture with a printed card: white, with blocks in turn along its middle."""
    size = (light.shape[1], light.shape[0])
    a, b, _, d = card.corners
    light = _over(light, coverage(size, card.corners), (0.80, 0.79, 0.77))
    for block in range(0, card.blocks, 2):
        along = [0.08 + 0.84 * (block + step) / card.blocks for step in (0, 1)]
        top = [a + (b - a) * at + (d - a) * 0.25 for at in along]
        foot = [a + (b - a) * at + (d - a) * 0.55 for at in along]
        light = _over(light, coverage(size, np.array([*top, *foot[::-1]])), (0.02, 0.02, 0.02))
    return light


def _over(light: Field, cover: Field, colour: Colour) -> Field:
    """Return the picture with an evenly coloured shape over it."""
    return np.asarray(
        light * (1 - cover[..., None]) + cover[..., None] * np.array(colour, np.float32), np.float32
    )


def camera(light: Field, setting: Setting, rng: np.random.Generator) -> Picture:
    """Return what the camera stores: blur, noise of light and of reading, sRGB, JPEG."""
    seen = np.asarray(cv2.GaussianBlur(light, (0, 0), setting.blur_px), np.float32)
    spread = np.sqrt(4e-5 * np.clip(seen, 0, None) + 1.5e-6)
    seen += setting.noise * spread * rng.standard_normal(seen.shape, np.float32)
    seen = np.clip(seen, 0, 1)
    encoded = np.where(seen <= 0.0031308, 12.92 * seen, 1.055 * np.maximum(seen, 1e-6) ** (1 / 2.4) - 0.055)
    eight = np.clip(np.round(255 * encoded), 0, 255).astype(np.uint8)
    if setting.quality is None:
        return eight
    _, data = cv2.imencode(".jpg", eight[..., ::-1], [cv2.IMWRITE_JPEG_QUALITY, setting.quality])
    return np.ascontiguousarray(np.asarray(cv2.imdecode(data, cv2.IMREAD_COLOR), np.uint8)[..., ::-1])


def layers(size: tuple[int, int], lengths: tuple[float, ...], rng: np.random.Generator) -> Field:
    """Return noise of unit variance in equal parts at several lengths, px."""
    width, height = size
    total = np.zeros((height, width), np.float32)
    for length in lengths:
        step = max(1, int(length / 3))
        rough = rng.standard_normal((height // step + 4, width // step + 4), np.float32)
        rough = np.asarray(cv2.GaussianBlur(rough, (0, 0), length / step), np.float32)
        full = (rough.shape[1] * step, rough.shape[0] * step)
        fine = np.asarray(cv2.resize(rough, full, interpolation=cv2.INTER_CUBIC), np.float32)
        total += (fine / fine.std())[:height, :width]
    return total / np.float32(np.sqrt(len(lengths)))


def ellipse(centre: tuple[float, float], half: tuple[float, float], turn_deg: float = 0.0) -> Points:
    """Return an ellipse as a ring of 2000 points."""
    at = np.linspace(0, 2 * np.pi, 2000, endpoint=False)
    return turned(np.column_stack([half[0] * np.cos(at), half[1] * np.sin(at)]), turn_deg) + centre


def tablet(width: float, height: float, rng: np.random.Generator, corner: float = 0.12) -> Points:
    """Return the silhouette of a whole tablet about the origin: round corners, sides that swell and waver."""
    radius = corner * min(width, height)
    core = shapely.box(-width / 2 + radius, -height / 2 + radius, width / 2 - radius, height / 2 - radius)
    ring = evenly(shapely.get_coordinates(core.buffer(radius, quad_segs=64).exterior)[:-1], 0.5)
    swell = 1 + 0.03 * (1 - (2 * ring[:, ::-1] / [height, width]) ** 2)
    at = np.linspace(0, 2 * np.pi, len(ring), endpoint=False)
    waver = sum(
        rng.normal(0, 0.0025) * min(width, height) * np.cos(k * at + rng.uniform(0, 6.28))
        for k in range(2, 12)
    )
    return clockwise(ring * swell * (1 + np.asarray(waver)[:, None] / np.linalg.norm(ring, axis=1)[:, None]))


def rough_line(start: Points, end: Points, rng: np.random.Generator, rough: float = 1.0) -> Points:
    """Return a broken course from start to end: octaves from a third of its length down to 6 px."""
    length = float(np.hypot(*(end - start)))
    at = np.arange(0, length, 0.5)
    stray = np.zeros_like(at)
    wave = length / 3
    while wave > 6:
        stray += (
            0.030
            * rough
            * wave**0.85
            * np.cos(2 * np.pi * at / wave + rng.uniform(0, 6.28))
            * rng.normal(1, 0.3)
        )
        wave /= 1.7
    along = (end - start) / length
    return np.asarray(start + at[:, None] * along + stray[:, None] * np.array([-along[1], along[0]]))


def broken(whole: Points, course: Points, away: Points) -> tuple[Points, Points]:
    """Return what is left of a silhouette, and the two ends of its break.

    ``course`` crosses the silhouette; what lies between it and the points ``away`` is lost.
    """
    body = shapely.Polygon(whole)
    left = body.difference(shapely.Polygon(np.vstack([course, away])).buffer(0))
    piece = max(getattr(left, "geoms", [left]), key=lambda part: part.area)
    ring = evenly(shapely.get_coordinates(piece.exterior)[:-1], 0.5)
    near_break = shapely.distance(shapely.points(ring), shapely.LineString(course)) < 1e-6
    on_break = np.flatnonzero(near_break)
    jumps = np.argmax(np.diff(np.append(on_break, on_break[0] + len(ring))))
    ends = ring[[on_break[jumps], on_break[(jumps + 1) % len(on_break)]]]
    return clockwise(ring), np.asarray(ends)


def diagonal(
    width: float, height: float, rng: np.random.Generator, rough: float = 1.0
) -> tuple[Points, Points]:
    """Return a tablet about the origin whose lower right is broken off along a rough diagonal, and the break's ends."""
    start = np.array([0.72 * width, -0.28 * height])
    end = np.array([-0.22 * width, 0.72 * height])
    course = rough_line(start, end, rng, rough)
    return broken(tablet(width, height, rng), course, np.array([[width, height]]))


def evenly(ring: Points, step: float) -> Points:
    """Return a closed ring resampled to an even spacing."""
    closed = np.vstack([ring, ring[:1]])
    way = np.concatenate([[0], np.cumsum(np.hypot(*np.diff(closed, axis=0).T))])
    at = np.linspace(0, way[-1], max(8, round(way[-1] / step)), endpoint=False)
    return np.column_stack([np.interp(at, way, closed[:, k]) for k in (0, 1)])


def clockwise(ring: Points) -> Points:
    """Return a ring so that it runs clockwise as seen, y down: its signed area is positive."""
    x, y = ring.T
    return ring if np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y) > 0 else ring[::-1]


def turned(points: Points, turn_deg: float) -> Points:
    """Return points turned about the origin, clockwise as seen."""
    angle = np.radians(turn_deg)
    c, s = np.cos(angle), np.sin(angle)
    return np.asarray(points @ np.array([[c, s], [-s, c]]))


def shifted(points: Points, x: float, y: float) -> Points:
    """Return points moved right and down."""
    return np.asarray(points + np.array([x, y]))


def distances(points: Points, ring: Points) -> Points:
    """Return how far points lie from a closed ring, px."""
    line = shapely.LinearRing(ring)
    shapely.prepare(line)
    return np.asarray(shapely.distance(shapely.points(points), line))


def rms_between(found: Points, truth: Points) -> tuple[float, float]:
    """Return the RMS distance of what was found from the truth, and of the truth from what was found, px."""
    there, back = distances(found, truth), distances(evenly(truth, 1.5), found)
    return float(np.sqrt(np.mean(there**2))), float(np.sqrt(np.mean(back**2)))
