"""Where along a strip a groove runs: evidence of its flanks at each station, and the smoothest course through it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.lib.stride_tricks import sliding_window_view
from numpy.typing import NDArray

from layout.image.sampling import Brightness
from layout.quantity import Floats

WIDTHS_PX = 4.0 * 2 ** (np.arange(8) / 2)
ANGLES = np.radians(np.arange(0.0, 181.0, 30.0))
"""Mixtures of a dark flank beside a bright one (0 and 180 degrees, by the side of the lamp) and of both dark (90)."""
GAPS = 1.3 * 1.17 ** np.arange(10)
"""How far the grooves of a double ruling stand apart, in widths."""
WIDEST_GAP_PX = 160.0
REACH = 1.3
"""A template reaches so many widths from its middle."""
SHORTEST = 6.0
"""A groove narrower than a sixth of its length is looked for."""

STEPS = 56
MOVES = 3
STIFFNESS = 3.0
NEARNESS = 0.1
CONTENDERS = 8


@dataclass(frozen=True, eq=False)
class Course:
    """A groove's course: offsets from the trace at all stations, the width and gap of what matched, and how well.

    ``angle`` is the number of the mixture of flanks that matched; ``shown`` how well each station matches it, -1 to
    1; ``told`` its correlation with what stations elsewhere say that is to be seen there.
    """

    offsets_px: Floats
    width_px: float
    gap_px: float
    angle: int
    shown: Floats
    told: Floats


def contrast_of(profiles: Brightness) -> Brightness:
    """Return profiles against the median of each station, and bounded: a bright scratch is no ten grooves."""
    level = np.maximum(np.median(profiles, axis=1, keepdims=True), 1e-3)
    return np.clip(profiles / level - 1, -1, 1.5).astype(np.float32)


@dataclass(frozen=True, eq=False)
class _Map:
    """Evidence of grooves of one width and gap: for each mixture, station and node across, from -1 to 1."""

    width_px: float
    gap_px: float
    step_px: int
    evidence: Brightness


def find_course(band: Brightness, spacing_px: float, within_px: float, double: bool) -> Course | None:
    """Follow the groove that is seen best near the trace; None where the strip has no room for one.

    Parameters
    ----------
    band
        Contrast across the trace, shape (S, 2 R + 1), at whole pixels from it.
    spacing_px
        How far stations stand apart.
    within_px
        How far from the trace to look.
    double
        Whether two grooves side by side are looked for; the course is midway.
    """
    pool = max(1, -(-len(band) // STEPS))
    maps = _evidence(band, spacing_px, within_px, double, pool)
    if not maps:
        return None
    which, angle = _best(maps)
    one = maps[which]
    score = _towards(one, within_px)[angle]
    stiffness = STIFFNESS * (one.step_px / one.width_px) ** 2
    nodes = _nodes(one)
    everywhere = np.arange(len(band))
    path = trace_courses(score[None], np.array([stiffness]))[1][0]
    offsets = np.interp(everywhere, everywhere[::pool], nodes[path])
    shown = one.evidence[angle, np.arange(len(path)), path]
    shown = np.interp(everywhere, everywhere[::pool], shown)
    told = _told(band, one, score, stiffness, pool, spacing_px)
    return Course(offsets, one.width_px, one.gap_px, angle, shown, told)


def _nodes(one: _Map) -> Floats:
    many = one.evidence.shape[2] // 2
    return np.arange(-many, many + 1) * float(one.step_px)


def _evidence(band: Brightness, spacing_px: float, within_px: float, double: bool, pool: int) -> list[_Map]:
    """Return the evidence for each width (and gap) that the strip has room for."""
    import cv2

    length, room = spacing_px * len(band), band.shape[1] // 2
    maps = []
    for width in WIDTHS_PX[WIDTHS_PX <= max(length / SHORTEST, WIDTHS_PX[0])]:
        step = max(1, round(width / 8))
        rows = int(width / spacing_px) | 1
        smooth = np.asarray(cv2.blur(band, (step, rows), borderType=cv2.BORDER_REFLECT), np.float32)
        basis = _templates(width, step)
        half = len(basis) // 2
        gaps = GAPS * width if double else np.zeros(1)
        for gap in gaps[gaps <= WIDEST_GAP_PX]:
            beside = round(gap / 2 / step)
            many = min(int(within_px + 0.35 * width) // step, (room // step) - half - beside)
            if many < 1:
                continue
            reach = many + beside + half
            seen = _matched(smooth[::pool, room - reach * step : room + reach * step + 1 : step], basis)
            if beside:
                # both grooves must be there
                seen = np.minimum(seen[..., : -2 * beside], seen[..., 2 * beside :])
            maps.append(_Map(float(width), float(2 * beside * step), step, seen))
    return maps


def _templates(width_px: float, step_px: float) -> Brightness:
    """Return unit templates (U, 4): dark beside bright, dark, level and gradient; the first two are free of those."""
    half = int(np.ceil(REACH * width_px / step_px))
    u = np.arange(-half, half + 1) * step_px / width_px
    odd, dark = -u * np.exp(-0.5 * (u / 0.27) ** 2), -np.exp(-0.5 * (u / 0.3) ** 2)
    level = np.linalg.qr(np.column_stack([np.ones_like(u), u]))[0]
    free = np.column_stack([odd, dark])
    free = free - level @ (level.T @ free)
    return np.column_stack([free / np.linalg.norm(free, axis=0), level]).astype(np.float32)


def _matched(rows: Brightness, basis: Brightness) -> Brightness:
    """Return the correlation of each window with each mixture, shape (A, S, J)."""
    windows = sliding_window_view(rows, len(basis), axis=1)
    parts = windows @ basis
    energy = np.einsum("sju,sju->sj", windows, windows) - parts[..., 2] ** 2 - parts[..., 3] ** 2
    # where hardly anything is to be seen nothing correlates
    energy = np.maximum(energy, 0)
    size = np.sqrt(energy + 0.05 * np.median(energy) + 1e-9)
    odd, dark = parts[..., 0] / size, parts[..., 1] / size
    turn = ANGLES.astype(np.float32)[:, None, None]
    return np.asarray(np.cos(turn) * odd + np.sin(turn) * dark, np.float32)


def evidence_of(rows: Brightness, width: float, angle: int) -> Brightness:
    """Return how well each place of profiles (S, U) matches a groove ``width`` samples wide: -1 to 1, 0 at the ends.

    ``angle`` is the mixture of flanks that a `Course` gives.
    """
    basis = _templates(width, 1.0)
    reach = len(basis) // 2
    matched = _matched(rows, basis)[angle]
    return np.pad(matched, ((0, 0), (reach, reach)))


def _towards(one: _Map, within_px: float) -> Brightness:
    """Return evidence that counts a little less far from the trace."""
    return np.asarray(one.evidence - NEARNESS * (_nodes(one) / within_px) ** 2, np.float32)


def _best(maps: list[_Map]) -> tuple[int, int]:
    """Return the width (and gap) and the mixture whose best course shows most."""
    quick = np.array([one.evidence.max(axis=2).mean(axis=1) for one in maps])
    order = np.argsort(-quick, axis=None)[:CONTENDERS]
    chosen = [(int(at // len(ANGLES)), int(at % len(ANGLES))) for at in order]
    widest = max(maps[which].evidence.shape[2] for which, _ in chosen)
    shown = maps[0].evidence.shape[1]
    score = np.full((len(chosen), shown, widest), -9.0, np.float32)
    for row, (which, angle) in zip(score, chosen, strict=True):
        seen = maps[which].evidence[angle]
        row[:, : seen.shape[1]] = seen
    stiffness = np.array(
        [STIFFNESS * (maps[which].step_px / maps[which].width_px) ** 2 for which, _ in chosen]
    )
    return chosen[int(trace_courses(score, stiffness)[0].argmax())]


def trace_courses(
    score: Brightness, stiffness: Floats, reach: int = MOVES
) -> tuple[Floats, NDArray[np.intp]]:
    """Return the greatest sums (C,) of evidence less bending, and the nodes (C, S) that give them.

    Dynamic programming (Bellman 1957): the best course to each node of a station goes through one of the
    neighbouring nodes of the station before it.
    """
    many, stations, nodes = score.shape
    moves = np.arange(-reach, reach + 1)
    price = (stiffness[:, None] * moves**2)[:, :, None].astype(np.float32)
    came = np.empty((stations, many, nodes), np.int8)
    padded = np.full((many, nodes + 2 * reach), -1e6, np.float32)
    windows = sliding_window_view(padded, nodes, axis=1)
    total = score[:, 0]
    for station in range(1, stations):
        padded[:, reach:-reach] = total
        reached = windows - price
        came[station] = reached.argmax(axis=1)
        total = reached.max(axis=1) + score[:, station]
    path = np.empty((many, stations), np.intp)
    path[:, -1] = total.argmax(axis=1)
    rows = np.arange(many)
    for station in range(stations - 1, 0, -1):
        path[:, station - 1] = path[:, station] + came[station, rows, path[:, station]] - reach
    return total.max(axis=1).astype(float), path


BLOCK = 4.0
"""Blocks of stations that tell of each other are so many widths long: what marks the clay there is shorter."""
MOST_BLOCKS = 24


def _told(
    band: Brightness, one: _Map, score: Brightness, stiffness: float, pool: int, spacing_px: float
) -> Floats:
    """Correlate each station with the mean profile of the other half of the blocks, on the course that they give.

    Without a groove, however well a course was chosen to fit, nothing that is left out agrees with it.
    """
    stations = len(band)
    blocks = 2 * int(np.clip(stations * spacing_px / (BLOCK * one.width_px), 4, MOST_BLOCKS) // 2)
    halves = (np.arange(stations) * blocks // stations) % 2
    masked = np.stack([np.where((halves[::pool] == half)[:, None], score, 0) for half in (0, 1)])
    paths = _nodes(one)[trace_courses(masked, np.full(2, stiffness))[1]]
    reach = int(np.ceil(REACH * one.width_px + one.gap_px / 2))
    told = np.empty(stations)
    for half, path in enumerate(paths):
        offsets = np.interp(np.arange(stations), np.arange(stations)[::pool], path)
        rows = unlevelled(_shifted(band, offsets, np.arange(-reach, reach + 1.0)))
        mean = rows[halves == half].mean(axis=0)
        left_out = rows[halves != half]
        size = np.linalg.norm(left_out, axis=1) * np.linalg.norm(mean) + 1e-9
        told[halves != half] = left_out @ mean / size
    return told


def _shifted(band: Brightness, offsets_px: Floats, across_px: Floats) -> Floats:
    """Return a band's rows, at whole pixels about its middle, read at ``across_px`` from a course; linear."""
    place = offsets_px[:, None] + across_px + band.shape[1] // 2
    left = np.clip(np.floor(place).astype(np.intp), 0, band.shape[1] - 2)
    share = np.clip(place - left, 0, 1)
    here = np.take_along_axis(band, left, axis=1)
    return np.asarray(here + (np.take_along_axis(band, left + 1, axis=1) - here) * share, float)


def unlevelled(rows: Floats) -> Floats:
    """Return rows without their level and gradient."""
    u = np.linspace(-1, 1, rows.shape[1])
    level = np.linalg.qr(np.column_stack([np.ones_like(u), u]))[0]
    return np.asarray(rows - (rows @ level) @ level.T, float)
