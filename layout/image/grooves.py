"""Draw a traced ruling to its groove.

Where the groove runs along the trace, which section under which light makes the mean profile across it, where by
that section each station has its centre, and a smooth line through the stations that agree.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.lib.stride_tricks import sliding_window_view

from layout.errors import CallError
from layout.image.groove.course import Course, contrast_of, find_course
from layout.image.groove.first_guess import AXIS, Start, guess_both, guess_one
from layout.image.groove.hollow import Hollow, fit_hollow
from layout.image.groove.section import Beside
from layout.image.groove.smoothing import SmoothLine
from layout.image.groove.stations import (
    Stations,
    against_face,
    fit_stations,
    line_through,
    mean_profile,
    weights_of,
)
from layout.image.groove.strip import Strip, lay_strip
from layout.image.photograph import Pixels
from layout.notices import Caveat, warn
from layout.quantity import Floats

Kind = Literal["single", "double"]

TOLD = 0.42
"""A groove is there if stations agree so well, on average, with what the others say that is to be seen."""
AGREES, LEAST_SEEN, MOST_BEYOND = 0.5, 0.4, 0.5
"""A station shows it if it correlates so well with it; so many must, and not more may lie too far from the trace."""

BAND_PX: dict[str, int] = {"single": 66, "double": 146}
REACH_PX: dict[str, int] = {"single": 106, "double": 146}
"""How far beside the place of a course to look for it, and for its section: grooves of 45 px have room."""
FINE_PX = 27.0
"""What is wider is guessed from coarser profiles."""
SAMPLES, SPAN = 81, 2.4
"""Samples of a profile, and how many half widths it reaches from the centre."""
UNEXPLAINED = 0.02
"""Share of the contrast that the library's sections do not explain."""
BY_CHANCE, BY_CHANCE_SOUGHT = 0.35, 0.6
"""So well stretches of bare clay agree with a groove by chance; and where the best place was sought."""


@dataclass(frozen=True, eq=False)
class Groove:
    """A ruling drawn to its groove, or the tracing where none is seen.

    Parameters
    ----------
    points_px
        Points along the groove's centre, shape (P, 2); of a double ruling midway between its two grooves. Where no
        groove is seen: the tracing, unchanged.
    sd_px
        Standard uncertainty of the line across it, at any one place: from the scatter of the stations, of which
        neighbours err alike, and from what else would explain the mean profile. None where no groove is seen.
    scatter_px
        Robust standard deviation of single stations about the line; None where no groove is seen.
    seen
        Share of the stations at which the groove is seen, 0 to 1.
    found
        Whether there is a groove.
    """

    points_px: Floats
    sd_px: float | None
    scatter_px: float | None
    seen: float
    found: bool

    @property
    def caveats(self) -> tuple[Caveat, ...]:
        """Return a warning where no groove is seen."""
        return () if self.found else (warn("groove.unseen"),)


def draw_to_groove(pixels: Pixels, trace_px: Floats, *, within_px: float, kind: Kind = "single") -> Groove:
    """Find the groove that a traced ruling follows.

    The groove must run within ``within_px`` of the tracing, about as the tracing does; signs and damage may cross it.
    Of several parallel ones the nearest is taken. The groove is taken to be as deep on one flank as on the other, and
    lit by one lamp. Its centre is found to a few tenths of a pixel, for wide grooves to about a hundredth of their
    width. Where the lamp stands within some 25 degrees of the groove's own direction, or so high that the bright
    flank is as bright as the face, two places may explain the picture equally well: ``sd_px`` says so.

    Parameters
    ----------
    pixels
        The photograph, shape (height, width, 3), 8 or 16 bits a channel.
    trace_px
        The tracing, shape (P, 2), two points or more that are apart.
    within_px
        No point that is returned lies further from the tracing.
    kind
        ``double``: two grooves side by side, ``single``: one.

    Raises
    ------
    CallError
        If the tracing is not two finite points or more that are apart, if ``within_px`` is not above 0, or if the
        kind is another.

    Examples
    --------
    >>> clay = np.full((60, 200, 3), 128, np.uint8)
    >>> trace = np.array([[10.0, 32.0], [190.0, 31.0]])
    >>> draw_to_groove(clay, trace, within_px=5).found
    False
    >>> clay[26:30], clay[30:34] = 90, 160  # a dark flank beside a bright one
    >>> groove = draw_to_groove(clay, trace, within_px=5)
    >>> groove.found, bool(abs(np.median(groove.points_px[:, 1]) - 29.5) < 0.5)
    (True, True)
    """
    return find_groove(pixels, trace_px, within_px, kind).groove


@dataclass(frozen=True, eq=False)
class Found:
    """A groove, the course from which it was found, and its width; None as far as there is none."""

    groove: Groove
    course: Course | None = None
    width_px: float | None = None


def find_groove(pixels: Pixels, trace_px: Floats, within_px: float, kind: Kind = "single") -> Found:
    """Find what `draw_to_groove` returns, and how it looks."""
    if kind not in REACH_PX:
        message = (
            f"the kind of a ruling needs to be 'single' or 'double', is {kind!r}; only these are grooves"
        )
        raise CallError(message)
    if not (np.isfinite(within_px) and within_px > 0):
        message = (
            f"within_px needs a distance above 0 px, is {within_px!r}; give how far from the tracing to look"
        )
        raise CallError(message)
    within_px = min(within_px, float(max(pixels.shape[:2])))
    strip = lay_strip(pixels, trace_px, within_px + REACH_PX[kind])
    reach = int(within_px + BAND_PX[kind])
    band = contrast_of(strip.profiles(np.arange(-reach, reach + 1.0)))
    course = find_course(band, strip.spacing_px, within_px, kind == "double")
    if course is None:
        return Found(_unseen(trace_px, 0.0))
    line = _follow(strip, course, within_px, kind) if course.told.mean() >= TOLD else None
    if line is None:
        return Found(_unseen(trace_px, float((course.told > AGREES).mean())))
    if line.seen < LEAST_SEEN or np.mean(np.abs(line.offsets_px) > within_px) > MOST_BEYOND:
        return Found(_unseen(trace_px, line.seen))
    points = strip.beside(line.offsets_px, within_px)
    return Found(Groove(points, line.sd_px, line.scatter_px, line.seen, True), course, line.width_px)


def _unseen(trace_px: Floats, seen: float) -> Groove:
    """Return the tracing as it came."""
    return Groove(np.array(trace_px, dtype=float), None, None, seen, False)


@dataclass(frozen=True, eq=False)
class _Line:
    """A groove's centre beside the trace at all stations, with what `Groove` says of it."""

    offsets_px: Floats
    sd_px: float
    scatter_px: float
    seen: float
    width_px: float


@dataclass(frozen=True, eq=False)
class _Rough:
    """A line near the groove, and what the groove may be there: lengths in px, centres beside the line."""

    offsets_px: Floats
    starts: list[Start]
    beside: Beside | None

    def axis(self, half_px: float) -> Floats:
        """Return places across, shape (U,), to look at for a groove of a half width."""
        return np.linspace(-1, 1, SAMPLES) * (SPAN * half_px + self.apart_px + 2)

    @property
    def apart_px(self) -> float:
        """How far from the centre that counts its grooves stand."""
        return 0.0 if self.beside is None else abs(self.beside.apart_px) * self.beside.shared


def _follow(strip: Strip, course: Course, within_px: float, kind: Kind) -> _Line | None:
    """Refine a course to the centre of its groove; None where none that fits lies near enough."""
    rough = _begin(strip, course, within_px, kind)
    if rough is None:
        return None
    # what fits the dark flank alone has to show that nothing stands beside it: the widest start sets the view
    half = min(max(start.half for start in rough.starts), 3 * rough.starts[0].half)
    first, stations = _fit(strip, rough, half)
    line = _line(strip, rough, first, stations)
    rough = replace(rough, offsets_px=line.values, starts=[first.again(0.0)])
    hollow, stations = _fit(strip, rough, first.half_px)
    hollow, stations = _by_depth(strip, rough, hollow, stations)
    line = _line(strip, rough, hollow, stations)
    # the first fit knew the other solutions, the later ones began at one
    sd = float(np.hypot(line.sd, max(first.sd_px, hollow.sd_px)))
    seen = float((stations.agreement > AGREES).mean())
    return _Line(line.values, sd, line.scatter, seen, 2 * hollow.half_px)


def _fit(strip: Strip, rough: _Rough, half_px: float) -> tuple[Hollow, Stations]:
    """Fit the mean profile along a line, and by that each station."""
    axis = rough.axis(half_px)
    rows = against_face(strip.profiles(axis, rough.offsets_px))
    mean, doubt = mean_profile(rows, strip.spacing_px, 2 * rough.starts[0].half)
    hollow = fit_hollow(axis, mean, doubt, rough.starts, rough.beside)
    return hollow, fit_stations(rows, axis, hollow, 2 * hollow.half_px + rough.apart_px + 3)


def _by_depth(strip: Strip, rough: _Rough, hollow: Hollow, stations: Stations) -> tuple[Hollow, Stations]:
    """Fit shallow and deep stretches apart, and move each station by what its depth does to its place.

    A shadow's edge moves with depth, and a mean of shallow and deep grooves is no groove.
    """
    around = np.pad(stations.depth, 2, mode="edge")
    depth = np.median(sliding_window_view(around, 5), axis=1)
    good = stations.agreement > np.median(stations.agreement) - 0.1
    low, high = np.quantile(depth[good], [1 / 3, 2 / 3])
    fits, depths = [], []
    for these in (good & (depth <= low), good & (depth >= high)):
        mean, doubt = mean_profile(stations.rows[these], strip.spacing_px, 2 * hollow.half_px)
        start = hollow.again(hollow.centre_px)
        fits.append(fit_hollow(rough.axis(rough.starts[0].half), mean, doubt, [start], rough.beside))
        depths.append(float(depth[these].mean()))
    step = max(depths[1] - depths[0], 0.02)
    share = np.clip((depth - depths[0]) / step, -1, 2)
    change = fits[1].centre_px - fits[0].centre_px
    change *= change**2 / (change**2 + fits[0].sd_px ** 2 + fits[1].sd_px ** 2)
    middle = (fits[0].centre_px + fits[1].centre_px) / 2 - hollow.centre_px
    moved = stations.places_px + middle + change * (share - 0.5)
    return replace(hollow, sd_px=max(fit.sd_px for fit in fits)), replace(stations, places_px=moved)


def _line(strip: Strip, rough: _Rough, hollow: Hollow, stations: Stations) -> SmoothLine:
    """Return the line through the stations' centres."""
    centres = rough.offsets_px + hollow.centre_px + stations.places_px
    return line_through(strip, centres, weights_of(stations.agreement, BY_CHANCE), 2 * hollow.half_px)


def _begin(strip: Strip, course: Course, within_px: float, kind: Kind) -> _Rough | None:
    """Guess from the mean profile along a course what stands there; None where nothing near enough fits."""
    line = line_through(
        strip, course.offsets_px, weights_of(course.shown, BY_CHANCE_SOUGHT), course.width_px
    ).values
    unit = max(1.0, course.width_px / FINE_PX, course.gap_px / 2 / FINE_PX)
    rows = against_face(strip.profiles(AXIS * unit, line))
    mean, doubt = mean_profile(rows, strip.spacing_px, course.width_px)
    doubt = 1.5 * np.hypot(doubt, UNEXPLAINED * np.ptp(mean))
    offset = float(line.mean())
    between = ((-within_px - offset) / unit - 1, (within_px - offset) / unit + 1)
    if kind == "double":
        starts, beside = guess_both(mean, doubt, between, course.gap_px / unit)
    else:
        starts, beside = guess_one(mean, doubt, between, course.width_px / unit)
    if not starts:
        return None
    centre = starts[0].centre
    if beside is not None and beside.shared == 0:
        here = offset / unit + centre
        if abs(here + beside.apart_px) < abs(here):
            # the other one is nearer to the trace; it has the first beside it
            line, beside = line + beside.apart_px * unit, Beside(-beside.apart_px, 0.0)
    return _Rough(
        line + centre * unit,
        [replace(start, centre=(start.centre - centre) * unit, half=start.half * unit) for start in starts],
        None if beside is None else replace(beside, apart_px=beside.apart_px * unit),
    )
