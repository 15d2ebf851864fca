"""The ground of a plate and what lies on it: the first step of ``contour``, on a reduced picture."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from layout.errors import CallError
from layout.image.photograph import Pixels
from layout.image.sampling import Brightness, linear_light
from layout.image.silhouette.ring import clockwise
from layout.quantity import Floats

Flags = NDArray[np.bool_]
MEND_GROUND = "trace by hand, or photograph on plain black, grey or white"
COARSE_PIXELS = 1_000_000
DAMPING = 0.006
"""Linear light added before logarithms: below it there is more noise than light."""
NOISIEST = 0.05
"""A ground whose fine texture is rougher than this share of its brightness is not plain."""
LEAST_RIM = 0.4
TINT_NOISE = 0.004
"""Linear light by which noise and compression may change red against blue."""
BALL = 2.5
"""Radius of the disc that enters the ground, cells: a step may fail over 5 cells, and nothing leaks."""
BORDER = 2 * BALL + 2
"""How far from a step the disc's centre stays, and its rim again: cells."""
LIT = 0.15
"""How much darker than the lit ground what still counts as lit may be (logarithm)."""
HUELESS = 0.1
"""Redness against the ground's (logarithm of red over blue) below which a thing has no hue of its own."""
SHADED = 0.35
"""How much darker than the lit ground the core of a shadow is (logarithm)."""
DARK_GROUND = 0.02
"""Clay is never as dark as a ground that is darker than this (linear light)."""
MOST_THINGS = 40


@dataclass(frozen=True, eq=False)
class Plate:
    """A reduced picture, parted into ground (0) and numbered things, the largest first: shape (height, width).

    ``doubtful`` is what may be shadow as well; ``blank`` what is nearly as the lit ground; ``warm`` the logarithm of
    red over blue, against the ground's.
    """

    things: NDArray[np.int32]
    doubtful: Flags
    blank: Flags
    warm: Brightness
    px_per_cell: Floats

    def thing_at(self, at_px: tuple[float, float]) -> int:
        """Return the number of the thing at a point of the photograph, 0 for the ground."""
        height, width = self.things.shape
        x, y = np.clip(np.round((np.array(at_px) + 0.5) / self.px_per_cell - 0.5), 0, [width - 1, height - 1])
        return int(self.things[int(y), int(x)])

    def hue_of(self, thing: int) -> float:
        """Return how much redder than the ground a thing is: the median over its middle."""
        mine = self.things == thing
        middle = mine & (_distance(~mine) > 3)
        return float(np.median(self.warm[middle if middle.any() else mine]))

    def picture_at(self, thing: int) -> tuple[slice, slice] | None:
        """Return the rows and columns, px, of a thing that is an upright rectangle: it may be a picture of its own.

        Plates are put together from pictures whose grounds are not always equally black.
        """
        rows, columns = np.nonzero(self.things == thing)
        low, high = np.array([rows.min(), columns.min()]), np.array([rows.max(), columns.max()]) + 1
        corners = self.things[np.ix_([low[0] + 3, high[0] - 4], [low[1] + 3, high[1] - 4])]
        if min(high - low) < 40 or len(rows) < 0.97 * np.prod(high - low) or (corners != thing).any():
            return None
        first = np.ceil((low + 4) * self.px_per_cell[::-1]).astype(int)
        last = np.floor((high - 4) * self.px_per_cell[::-1]).astype(int)
        return slice(first[0], last[0]), slice(first[1], last[1])

    def doubt_along(self, ring: Floats) -> float:
        """Return the share of a ring along which what lies within may be shadow."""
        import cv2

        disc = cv2.getStructuringElement(cv2.MORPH_ELLIPSE, (7, 7))
        solid = np.asarray(cv2.morphologyEx(self.doubtful.astype(np.uint8), cv2.MORPH_OPEN, disc) > 0)
        at = np.round((ring + 0.5) / self.px_per_cell - 0.5).astype(int)
        return float((_distance(solid)[at[:, 1], at[:, 0]] <= 3).mean())

    def ring_of(self, thing: int) -> Floats:
        """Return a thing's outer boundary on the photograph, px, clockwise."""
        import cv2

        mask = (self.things == thing).astype(np.uint8)
        rings, _ = cv2.findContours(mask, cv2.RETR_EXTERNAL, cv2.CHAIN_APPROX_NONE)
        ring = max(rings, key=len)[:, 0].astype(float)
        return clockwise((ring + 0.5) * self.px_per_cell - 0.5)


def refusal(came: str, *, needed: str, mend: str) -> CallError:
    """Return the error that says what is needed, what came, and how to mend it."""
    return CallError(f"the contour needs {needed}, {came}; {mend}")


def part_ground(pixels: Pixels) -> Plate:
    """Tell the ground, with the shadows on it, from what lies on it.

    Raises
    ------
    CallError
        If the rim of the photograph is not plain.
    """
    import cv2

    height, width = pixels.shape[:2]
    cells = max(1, math.ceil(math.sqrt(height * width / COARSE_PIXELS)))
    size = (max(8, width // cells), max(8, height // cells))
    small = shrunk(pixels, size)
    tones = _tones(linear_light(small))
    # a step stands out from its surroundings, the slope of vignetting and of penumbrae does not
    steps = np.abs(tones - cv2.GaussianBlur(tones, (0, 0), 3.0))
    busy = np.maximum(np.maximum(steps[..., 0], steps[..., 1]), steps[..., 2])
    rim = _rim(busy.shape)
    noise = float(np.median(busy[rim]))
    level = float(np.exp(np.median(tones[rim][:, :3]))) - DAMPING
    _require_plain(noise, level)
    ground = _enter(tones, busy > max(0.02, 6 * noise), rim)
    things, doubtful = _tell_apart(ground, dark=level < DARK_GROUND)
    px_per_cell = np.array([width, height]) / [small.shape[1], small.shape[0]]
    blank = ~ground.bright & (ground.depth < LIT) & (np.abs(ground.warm) < HUELESS)
    return Plate(things, doubtful, blank, ground.warm, px_per_cell)


def _tell_apart(ground: _Ground, *, dark: bool) -> tuple[NDArray[np.int32], Flags]:
    """Return numbered things, and what of them may be shadow as well. Nothing casts a shadow on a dark ground."""
    things = _label((ground.away > BALL) & (ground.odd | (ground.away > BORDER)))
    hue = _own_hue(things, ground)
    shaded = (ground.depth > SHADED) & (ground.away <= BALL)
    # where the ground beside it lies in shadow too, it is shadow: the disc does not fit in where a shadow leaves the
    # clay, nor past its sharp rim; elsewhere it may be clay that fire has blackened, and nobody can tell
    like_shadow = (ground.depth > SHADED) & (np.sign(hue) * ground.warm < np.abs(hue) / 2 - ground.blind)
    shadow = _near(like_shadow & (ground.away < 40), shaded)
    # a gap between things is too narrow for the disc; but where the things may look like the ground it is left
    gap = _near((things > 0) & ((hue != 0) | dark) & ground.lit, ground.away <= BALL)
    # clay without a hue of its own is told from its shadow by nothing but a step
    alike = (hue == 0) & (_distance(shaded) < 2 * BORDER) & (not dark)
    things = _label((things > 0) & ~shadow & ~gap)
    return things, (like_shadow | alike) & (things > 0)


def _require_plain(noise: float, level: float) -> None:
    """Refuse a rim whose fine texture shows; in the dark, what does not show is no texture."""
    texture = noise * (level + DAMPING) / (level + 0.03)
    if texture > NOISIEST:
        came = f"along the rim its texture is {texture:.1%} of the brightness"
        raise refusal(came, needed="a plain ground", mend=MEND_GROUND)


def shrunk(pixels: Pixels, size: tuple[int, int]) -> Pixels:
    """Return a picture reduced to (width, height) by averaging."""
    import cv2

    if size == pixels.shape[1::-1]:
        return pixels
    small: Pixels = cv2.resize(pixels, size, interpolation=cv2.INTER_AREA).astype(pixels.dtype)
    return small


def _tones(light: Brightness) -> Brightness:
    """Return logarithms of red, green and blue, and of red over blue, lightly smoothed: shape (height, width, 4)."""
    import cv2

    logs = np.log(light + DAMPING)
    tones = np.concatenate([logs, logs[..., :1] - logs[..., 2:]], axis=-1)
    return np.asarray(cv2.GaussianBlur(tones, (0, 0), 1.0), np.float32)


def _rim(shape: tuple[int, ...]) -> Flags:
    """Return the band along the rim of a picture."""
    band = max(3, int(0.04 * min(shape)))
    rim = np.ones(shape, bool)
    rim[band:-band, band:-band] = False
    return rim


@dataclass(frozen=True, eq=False)
class _Ground:
    """How every cell compares with the lit ground; logarithms, shape (height, width).

    ``away`` is how far the disc's centre stayed away, cells; ``depth`` by how much a cell is darker, ``warm`` how much
    redder than a shadow of that depth, and ``blind`` by how much noise may redden it; ``bright`` is what is brighter,
    ``odd`` what is brighter or of another colour.
    """

    away: Brightness
    depth: Brightness
    warm: Brightness
    blind: Brightness
    bright: Flags
    odd: Flags

    @property
    def lit(self) -> Flags:
        """What is as bright as the lit ground, and of its colour."""
        return ~self.odd & (self.depth < LIT)


def _enter(tones: Brightness, stepped: Flags, rim: Flags) -> _Ground:
    """Enter the ground from the rim, and learn its light and the tint of its shadows on the way."""
    where, tint, spread = rim, 0.0, 0.35
    blind = np.asarray(TINT_NOISE * np.exp(-tones[..., 1]), np.float32)
    for turn in range(3):
        apart, sd = _from_lit_ground(tones, where)
        depth, warm = np.clip(-apart[1], 0, None), apart[3]
        warm_sd = 1.4826 * float(np.median(np.abs(warm[where & (depth < 0.1)])))
        shaded = where & (depth > 0.25) & (np.abs(warm) < 0.05 + 5 * warm_sd + 0.35 * depth)
        if turn and shaded.sum() > 0.001 * shaded.size:
            # shadows are lit by another light: the deeper, the more of its tint
            shares = warm[shaded] / depth[shaded]
            tint = float(np.median(shares))
            spread = 0.06 + 4 * float(np.median(np.abs(shares - tint)))
        warm = warm - np.float32(tint) * depth
        most = 0.03 + 6 * warm_sd + spread * depth + blind
        bright = apart[:3].max(axis=0) > 0.08 + 5 * sd
        odd = bright | (np.abs(warm) > most)
        away = _distance(_joined_with_rim(_distance(stepped | odd) > BALL))
        where = away <= BALL
        if where[rim].mean() < LEAST_RIM:
            came = f"it shows along {where[rim].mean():.0%} of the rim"
            raise refusal(came, needed="a plain ground around the fragment", mend=MEND_GROUND)
    return _Ground(away, depth, warm, blind, bright, odd)


def _from_lit_ground(tones: Brightness, where: Flags) -> tuple[Brightness, float]:
    """Return how far all is from a quadratic surface through the lit ground, a layer for each tone, and its spread.

    Shadows are left out as outliers: values beyond three robust standard deviations, again and again.
    """
    height, width, count = tones.shape
    x, y = np.linspace(-1, 1, width, dtype=np.float32), np.linspace(-1, 1, height, dtype=np.float32)[:, None]
    rows, columns = np.nonzero(where)
    some = slice(None, None, max(1, len(rows) // 5_000))
    seen, u, v = tones[rows[some], columns[some]].astype(float), x[columns[some]], y[rows[some], 0]
    design = np.column_stack([np.ones_like(u), u, v, u * u, u * v, v * v]).astype(float)
    surface = np.zeros((6, count))
    surface[0] = np.median(seen, axis=0)
    keep: Flags = np.ones(len(seen), bool)
    for _ in range(8):
        rest = seen - design @ surface
        sd = 1.4826 * np.median(np.abs(rest[keep]), axis=0) + 1e-3
        keep = np.asarray((np.abs(rest) < 3 * sd).all(axis=1))
        surface = np.linalg.lstsq(design[keep], seen[keep], rcond=None)[0]
    a, b, c, d, e, f = surface.astype(np.float32)[..., None, None]
    apart = [
        tones[..., k] - (a[k] + c[k] * y + f[k] * y * y) - x * (b[k] + d[k] * x + e[k] * y)
        for k in range(count)
    ]
    return np.stack(apart), float(sd[:3].max())


def _distance(where: Flags) -> Brightness:
    """Return the distance to the nearest flagged cell."""
    import cv2

    if not where.any():
        return np.full(where.shape, 1e6, np.float32)
    return np.asarray(cv2.distanceTransform((~where).astype(np.uint8), cv2.DIST_L2, 5), np.float32)


def _joined_with_rim(free: Flags) -> Flags:
    """Return the parts of what is free that reach the rim of the picture."""
    import cv2

    _, labels = cv2.connectedComponents(free.astype(np.uint8), connectivity=4)
    reaching = np.unique(np.concatenate([labels[0], labels[-1], labels[:, 0], labels[:, -1]]))
    return np.asarray(np.isin(labels, reaching[reaching > 0]))


def _label(things: Flags) -> NDArray[np.int32]:
    """Return things with holes filled and threads cut, numbered, the largest first."""
    import cv2

    disc = cv2.getStructuringElement(cv2.MORPH_ELLIPSE, (7, 7))
    solid = things.astype(np.uint8)
    for _ in range(2):
        rings, _ = cv2.findContours(solid, cv2.RETR_EXTERNAL, cv2.CHAIN_APPROX_NONE)
        cv2.drawContours(solid, rings, -1, (1,), cv2.FILLED)
        solid = np.asarray(cv2.morphologyEx(solid, cv2.MORPH_OPEN, disc), np.uint8)
    count, labels, stats, _ = cv2.connectedComponentsWithStats(solid, connectivity=4)
    order = np.argsort(-stats[1:, cv2.CC_STAT_AREA], kind="stable") + 1
    number = np.zeros(count, np.int32)
    number[order] = np.arange(1, count)
    return np.asarray(number[labels], np.int32)


def _own_hue(things: NDArray[np.int32], ground: _Ground) -> Brightness:
    """Return at each cell the hue of the thing it belongs to, 0 where a thing has none that is clear."""
    import cv2

    inner = np.asarray(cv2.erode((things > 0).astype(np.uint8), np.ones((9, 9), np.uint8)) > 0)
    hues = np.zeros(int(things.max()) + 1, np.float32)
    for thing in range(1, min(len(hues), MOST_THINGS + 1)):
        body = ground.warm[inner & (things == thing)]
        if len(body) < 50:
            continue
        hue = float(np.median(body))
        if abs(hue) > max(HUELESS, 5 * 1.4826 * float(np.median(np.abs(body - hue)))):
            hues[thing] = hue
    return hues[things]


def _near(parts: Flags, ground: Flags) -> Flags:
    """Return those connected parts that come near some ground."""
    import cv2

    _, labels = cv2.connectedComponents(parts.astype(np.uint8), connectivity=4)
    touching = np.unique(labels[(_distance(ground) <= BORDER) & parts])
    return np.asarray(np.isin(labels, touching[touching > 0]))
