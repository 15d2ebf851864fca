"""Pixels to millimetres: the scale with its joint draws, and the face frame of a view.

A photograph is a central projection. Its optical axis meets the picture at the centre, the bar lies in a
plane at the distance D from the lens, and a point at height h above that plane is seen further from the
centre, by D / (D - h): the face is nearer to the lens than the bar, the outline of a pillow-shaped tablet
half its thickness further away than the face. The camera is square to the scene but for a small tilt. With

    t = (pixel - centre) * mm_per_px,   k = 1 / D,   n = the scene's normal seen from the camera

the point of the plane at height h that a pixel shows lies at s t across and (s - 1) / k along the optical
axis, where s = (n_z - h k) / (n_z + k n.t); k = 0 is a flatbed scanner.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from layout.notices import Assumption, Caveat, Missing, Notice, assume, warn
from layout.quantity import Floats, Quantity

if TYPE_CHECKING:
    from layout.record.model import Known, Mark, Measured, View

MM_PER_INCH = 25.4
ASSUMED_POINTING_PX = 1.0
ASSUMED_THICKNESS_MM = (25.0, 7.0)
ASSUMED_DISTANCE_MM = 700.0
ASSUMED_DISTANCE_LOG_SD = 0.4
ASSUMED_TILT_SD_DEG = 1.5
ASSUMED_PPI_SD = 0.003
POINTING_DOF = 10.0
"""How many degrees of freedom a stated pointing error is worth against the scatter that is seen."""


@dataclass(frozen=True, eq=False)
class Plane:
    """A plane of the scene, parallel to that of the bar: how points map to it, draw by draw.

    Parameters
    ----------
    homography
        Shape (3, 3, N): from pixels, or from mm of a frame, to mm from the foot of the optical axis, x right, y down.
    nominal_mm_per_px
        The scale at which shapes in this plane are fitted.
    """

    homography: Floats
    nominal_mm_per_px: float

    def map(self, points: Floats) -> Floats:
        """Map points, shape (P, 2), or (N, P, 2) with draws of their own, to mm of the plane, (N, P, 2)."""
        x, y = points[..., 0], points[..., 1]
        mapped = (by_x[:, None] * x + by_y[:, None] * y + at[:, None] for by_x, by_y, at in self.homography)
        mm_x, mm_y, w = mapped
        return np.stack([mm_x / w, mm_y / w], axis=-1)

    def local(self, at: Floats) -> Floats:
        """Return how many mm a unit is around one point, (N,): the geometric mean of all directions."""
        by_x, by_y, alone = self.homography[2]
        # a homography's Jacobian has the determinant det H / w^3
        return np.asarray(np.sqrt(np.abs(self._determinant / (by_x * at[0] + by_y * at[1] + alone) ** 3)))

    def seen_from(self, affine: Floats) -> Plane:
        """Return the map from other coordinates that a (3, 3) matrix turns into those of this one."""
        return Plane(np.einsum("ijn,jk->ikn", self.homography, affine), self.nominal_mm_per_px)

    @cached_property
    def _determinant(self) -> Floats:
        one, other, third = self.homography
        return np.asarray((one * np.cross(other, third, axis=0)).sum(axis=0))


@dataclass(frozen=True, eq=False)
class Scale:
    """Joint draws of what turns pixels into millimetres.

    Parameters
    ----------
    centre_px
        Where the optical axis meets the photograph, shape (2,).
    mm_per_px
        In the plane of the bar, on the optical axis, shape (N,).
    face, outline
        The planes of the inscribed face and of the outline.
    model
        What kind of map the marks allowed: ``"similarity"``, or ``"none"`` where nothing gives a scale and
        lengths have no unit.
    """

    centre_px: Floats
    mm_per_px: Floats
    face: Plane
    outline: Plane
    model: str

    @property
    def known(self) -> bool:
        """Whether anything gives a scale; without one only ratios of lengths mean something."""
        return self.model != "none"


def find_homography(mm_per_px: Floats, tilt: Floats, nearness: Floats, height: Floats) -> Floats:
    """Return the map from pixels from the centre to the plane at a height: the equations at the top of this module.

    Parameters
    ----------
    mm_per_px, nearness, height
        In the plane of the bar; one over the lens's distance from it; above it in mm; each (N,).
    tilt
        The two components of the scene's normal, as sines, shape (N, 2).

    Returns
    -------
    Floats
        Shape (3, 3, N); the plane's own axes are e1 = (n_z, 0, -n_x) / r and n x e1.
    """
    a, b = tilt.T
    c, r = np.sqrt(1 - a**2 - b**2), np.sqrt(1 - b**2)
    near = c - height * nearness
    return np.array(
        [
            [mm_per_px * (c * near + a**2), mm_per_px * a * b, a * height],
            [
                mm_per_px * a * b * height * nearness,
                mm_per_px * (r**2 * near + b**2 * c),
                b * c * height,
            ],
            [mm_per_px * nearness * r * a, mm_per_px * nearness * r * b, r * c],
        ]
    )


@dataclass(frozen=True, eq=False)
class Frame:
    """The face frame of a view at the nominal scale: millimetres, x right, y down.

    Parameters
    ----------
    centre_px
        The photograph's centre, shape (2,).
    origin_mm
        The frame's origin from that centre, in the outline's plane, shape (2,).
    turn
        Angle in radians by which the frame is turned against the photograph, positive from x to y.
    """

    centre_px: Floats
    origin_mm: Floats
    turn: float

    def to_mm(self, points_px: Floats, mm_per_px: float) -> Floats:
        """Return pixels, shape (..., 2), in this frame, at the nominal scale of their plane."""
        return np.asarray(((points_px - self.centre_px) * mm_per_px - self.origin_mm) @ turned(-self.turn))

    def to_px(self, points_mm: Floats, mm_per_px: float) -> Floats:
        """Return points of this frame, shape (..., 2), as pixels: the inverse of ``to_mm``."""
        return np.asarray(
            (points_mm @ turned(self.turn) + self.origin_mm) / mm_per_px + self.centre_px,
        )

    def of_plane(self, plane: Plane) -> Plane:
        """Return the map from this frame at a plane's nominal scale: ``to_px`` and then the plane's."""
        px_per_mm = 1 / plane.nominal_mm_per_px
        affine = shifted(self.centre_px + self.origin_mm * px_per_mm)
        affine[:2, :2] = turned(self.turn).T * px_per_mm
        return plane.seen_from(affine)


def shifted(by: Floats) -> Floats:
    """Return the (3, 3) matrix that shifts points (2,)."""
    return np.array([[1.0, 0.0, by[0]], [0.0, 1.0, by[1]], [0.0, 0.0, 1.0]])


def turned(angle: float) -> Floats:
    """Return the matrix that turns row vectors by an angle, from x to y."""
    return np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])


@dataclass(frozen=True, eq=False)
class Length:
    """A known length in a picture: a source of the scale.

    ``ends_px`` has shape (2, 2); ``log_sd`` is the relative standard uncertainty of the millimetres per
    pixel that the length gives; it lies in the plane of the bar, or of the face (``on_face``).
    """

    name: str
    ends_px: Floats
    mm: float
    log_sd: float
    on_face: bool


def fit_bar(name: str, marks: list[Mark], pointing_px: float) -> Length:
    """Fit the marks of one bar or flat target by a similarity.

    Errors are in the pixels: least squares of z = A + B m with complex z (pixels) and m (millimetres), a
    bar's millimetres being real. The stated pointing error counts as ten degrees of freedom against the
    scatter of the marks.

    Parameters
    ----------
    marks
        Two or more.
    pointing_px
        Standard uncertainty of one coordinate of a mark.
    """
    z = np.array([complex(*mark.at) for mark in marks])
    flat = [mark.mm if isinstance(mark.mm, tuple) else (mark.mm, 0.0) for mark in marks]
    fits = []
    for mirror in (1.0, -1.0):  # a target's Y may run up or down
        m = np.array([complex(x, mirror * y) for x, y in flat])
        away = m - m.mean()
        spread = float((abs(away) ** 2).sum())
        slope = (away.conj() * (z - z.mean())).sum() / spread
        fits.append((float((abs(z - z.mean() - slope * away) ** 2).sum()), m, slope, spread))
    rest, m, slope, spread = min(fits, key=lambda fit: fit[0])
    dof = 2 * len(marks) - 4
    variance = (POINTING_DOF * pointing_px**2 + rest) / (POINTING_DOF + dof)
    far = int(abs(m - m.mean()).argmax())
    near = int(abs(m - m[far]).argmax())
    ends = z.mean() + slope * (m[[near, far]] - m.mean())
    return Length(
        name=name,
        ends_px=np.stack([ends.real, ends.imag], axis=-1),
        mm=float(abs(m[far] - m[near])),
        log_sd=float(np.sqrt(variance / spread) / abs(slope)),
        on_face=False,
    )


def fit_known(known: Known, pointing_px: float) -> Length:
    """Take a length that was measured on the object as a source of the scale, in the plane of the face."""
    ends = np.array([known.from_, known.to])
    span_px = float(np.hypot(*(ends[1] - ends[0])))
    log_sd = float(np.hypot(known.sd / known.mm, np.sqrt(2) * pointing_px / span_px))
    return Length(known.source or "known length", ends, known.mm, log_sd, on_face=True)


def find_lengths(view: View, pointing_px: float) -> list[Length]:
    """Collect a view's sources of scale: each bar with two marks or more, then each known length."""
    bars: dict[str, list[Mark]] = {}
    for mark in view.scale.marks:
        bars.setdefault(mark.bar, []).append(mark)
    lengths = [fit_bar(f"bar {name!r}", marks, pointing_px) for name, marks in bars.items() if len(marks) > 1]
    return lengths + [fit_known(known, pointing_px) for known in view.scale.known]


@dataclass(frozen=True, eq=False)
class Prior:
    """What is known of the scene before any length is used: medians and standard deviations.

    The parameters are (log of mm per px, tilt about y, tilt about x, height of the face, log distance).
    """

    mean: Floats
    sd: Floats
    scanner: bool

    def log_length(self, parameters: Floats, length: Length, centre_px: Floats) -> Floats:
        """Return the logarithm of a length in mm as rows of parameters (N, 5) see it, shape (N,)."""
        height = parameters[:, 3] if length.on_face else np.zeros(len(parameters))
        ends = self.plane(parameters, height, centre_px, 1.0).map(length.ends_px)
        return np.asarray(np.log(np.hypot(*(ends[:, 1] - ends[:, 0]).T)))

    def plane(self, parameters: Floats, height: Floats, centre_px: Floats, nominal: float) -> Plane:
        """Return the plane at a height, (N,), for rows of parameters, (N, 5)."""
        nearness = np.zeros(len(parameters)) if self.scanner else np.exp(-parameters[:, 4])
        homography = find_homography(np.exp(parameters[:, 0]), parameters[:, 1:3], nearness, height)
        return Plane(homography, nominal).seen_from(shifted(-centre_px))


def fit_scale(
    view: View,
    photograph_size: tuple[int, int],
    thickness: Measured | None,
    draws: int,
    rng: np.random.Generator,
) -> tuple[Scale, list[Notice]]:
    """Fit a view's scale from all its sources and draw from it.

    The scene's parameters have a Gaussian prior, each source observes the logarithm of its length, nearly
    linear in them: the posterior is Gaussian, and its draws are then made to agree with the sources exactly.
    Sources that contradict one another (chi-squared above its 99th percentile) have their errors enlarged by
    the Birge ratio, and a warning says so.

    Parameters
    ----------
    view
        With marks, ``ppi`` or known lengths; without any the scale has ``model == "none"``.
    photograph_size
        Width and height in pixels of the upright photograph.
    thickness
        Of the tablet; assumed where nobody gave it.

    Returns
    -------
    tuple
        The scale and what was assumed, warned of and missing.
    """
    notices: list[Notice] = []
    pointing_px, note = pointing_of(view)
    notices += note
    centre_px = (np.array(photograph_size, dtype=float) - 1) / 2
    lengths = find_lengths(view, pointing_px)
    thick, note = _thickness(thickness)
    notices += note
    if not lengths and view.scale.ppi is None:
        notices.append(assume("scale.unit", f"{view.face}: scale"))
        return _without_scale(view, centre_px, draws), [*notices, _no_scale(view)]
    prior, note = _prior(view, thick, lengths, centre_px)
    notices += note
    parameters, caveats = _draw_posterior(prior, lengths, centre_px, draws, rng)
    notices += caveats
    thickness_mm = np.abs(rng.normal(thick[0], thick[1], draws))
    centre = parameters.mean(axis=0)
    nearness = 0.0 if prior.scanner else float(np.exp(-centre[4]))
    at_bar, height = float(np.exp(centre[0])), float(centre[3])
    face, outline = (
        prior.plane(
            parameters,
            parameters[:, 3] - share * thickness_mm,
            centre_px,
            at_bar * (1 - (height - share * thick[0]) * nearness),
        )
        for share in (0.0, 0.5)
    )
    return Scale(centre_px, np.exp(parameters[:, 0]), face, outline, "similarity"), notices


def pointing_of(view: View) -> tuple[float, list[Assumption]]:
    """Return the standard uncertainty of one traced point in pixels, assumed where nobody gave it."""
    if view.pointing_px is not None:
        return view.pointing_px, []
    return ASSUMED_POINTING_PX, [
        assume("scale.pointing", f"{view.face}: pointing_px", px=ASSUMED_POINTING_PX),
    ]


def _thickness(thickness: Measured | None) -> tuple[tuple[float, float], list[Assumption]]:
    """Return mean and sd of the tablet's thickness in mm."""
    if thickness is not None:
        return (thickness.mm, thickness.sd), []
    mean, sd = ASSUMED_THICKNESS_MM
    return (mean, sd), [assume("scale.thickness", "thickness", mm=mean, sd=sd)]


def _prior(
    view: View,
    thickness: tuple[float, float],
    lengths: list[Length],
    centre_px: Floats,
) -> tuple[Prior, list[Assumption]]:
    """State the prior of the scene: as given, or assumed with an honest width."""
    given = view.scale
    notes: list[Assumption] = []
    scanner = given.ppi is not None and not any(not length.on_face for length in lengths)
    if given.below_face is not None:
        below, below_sd = given.below_face.mm, given.below_face.sd
    else:
        # the bar lies on the table, level with the face, or anywhere between
        below, below_sd = thickness[0] / 2, float(np.hypot(0.4 * thickness[0], thickness[1] / 2))
        if not scanner:
            notes.append(assume("scale.below_face", f"{view.face}: scale.below_face", mm=below, sd=below_sd))
    if given.distance is not None:
        distance, distance_log_sd = given.distance.mm, given.distance.sd / given.distance.mm
    else:
        distance, distance_log_sd = ASSUMED_DISTANCE_MM, ASSUMED_DISTANCE_LOG_SD
        if not scanner:
            notes.append(assume("scale.distance", f"{view.face}: scale.distance", mm=distance))
    tilt_deg = given.tilt_sd_deg
    if tilt_deg is None:
        tilt_deg = 0.0 if scanner else ASSUMED_TILT_SD_DEG
        if not scanner:
            notes.append(assume("scale.tilt", f"{view.face}: scale.tilt_sd_deg", deg=tilt_deg))
    if given.ppi is not None:
        log_mm_per_px, log_sd = np.log(MM_PER_INCH / given.ppi), ASSUMED_PPI_SD
        notes.append(assume("scale.ppi", f"{view.face}: scale.ppi", percent=100 * ASSUMED_PPI_SD))
    else:
        log_mm_per_px, log_sd = 0.0, 10.0  # anything: the lengths decide
    tilt_sd = np.sin(np.deg2rad(tilt_deg))
    prior = Prior(
        mean=np.array([log_mm_per_px, 0.0, 0.0, below, np.log(distance)]),
        sd=np.array([log_sd, tilt_sd, tilt_sd, below_sd, distance_log_sd]),
        scanner=scanner,
    )
    if given.ppi is None:  # start where the first length puts the scale, so that its neighbourhood is linear
        log_px = np.log(np.hypot(*(lengths[0].ends_px[1] - lengths[0].ends_px[0])))
        prior.mean[0] = np.log(lengths[0].mm) - log_px
        seen = prior.log_length(prior.mean[None], lengths[0], centre_px)[0]
        prior.mean[0] += np.log(lengths[0].mm) - seen
    return prior, notes


def _draw_posterior(
    prior: Prior,
    lengths: list[Length],
    centre_px: Floats,
    draws: int,
    rng: np.random.Generator,
) -> tuple[Floats, list[Caveat]]:
    """Condition the scene's parameters on all lengths; return draws of shape (N, 5)."""
    z = rng.standard_normal((draws, 5))
    if not lengths:
        return prior.mean + z * prior.sd, []
    step = np.where(prior.sd > 0, np.minimum(prior.sd, [1e-3, 1e-3, 1e-3, 0.1, 1e-3]), 1e-3)
    around = prior.mean + np.vstack([np.zeros(5), np.diag(step), -np.diag(step)])
    seen = np.stack([prior.log_length(around, length, centre_px) for length in lengths])
    slopes = (seen[:, 1:6] - seen[:, 6:]) / (2 * step)
    surprise = np.array([np.log(length.mm) for length in lengths]) - seen[:, 0]
    noise = np.array([length.log_sd for length in lengths]) ** 2
    covariance = np.diag(prior.sd**2)
    birge, notes = _agreement(lengths, slopes, surprise, noise, prior)
    noise = noise * birge**2
    # Gaussian conditioning: K = P G' (G P G' + R)^-1
    gain = covariance @ slopes.T @ np.linalg.inv(slopes @ covariance @ slopes.T + np.diag(noise))
    # each row: a draw of the prior, moved by its own misfit to the noisy lengths (exact for Gaussians)
    errors = rng.standard_normal((draws, len(lengths))) * np.sqrt(noise)
    parameters = prior.mean + z * prior.sd
    parameters += (surprise + errors - (parameters - prior.mean) @ slopes.T) @ gain.T
    # what is not linear in the tilt: the rows' lengths must still be what the linear form says
    linear = seen[:, 0] + (parameters - prior.mean) @ slopes.T
    exact = np.stack([prior.log_length(parameters, length, centre_px) for length in lengths], axis=1)
    parameters[:, 0] += ((linear - exact) / noise).sum(axis=1) / (1 / noise).sum()
    return parameters, notes


def _agreement(
    lengths: list[Length],
    slopes: Floats,
    surprise: Floats,
    noise: Floats,
    prior: Prior,
) -> tuple[float, list[Caveat]]:
    """Return the Birge ratio of the sources of scale (1 where they agree) and a warning where they do not."""
    dof = len(lengths) - (prior.sd[0] > 1)
    if dof < 1:
        return 1.0, []
    total = slopes @ np.diag(prior.sd**2) @ slopes.T + np.diag(noise)
    chi2 = float(surprise @ np.linalg.solve(total, surprise))
    # Wilson and Hilferty 1931: the cube root of chi-squared over its degrees of freedom is nearly normal
    z = ((chi2 / dof) ** (1 / 3) - (1 - 2 / (9 * dof))) / np.sqrt(2 / (9 * dof))
    if z < 2.33:
        return 1.0, []
    ratio = float(np.sqrt(chi2 / dof))
    names = ", ".join(length.name for length in lengths)
    return ratio, [warn("scale.disagree", sources=names, ratio=f"{ratio:.1f}")]


def _without_scale(view: View, centre_px: Floats, draws: int) -> Scale:
    """Return a scale without a unit: for the shape's priors the fragment is taken to be 90 mm across."""
    traced = [point for piece in view.outline for point in piece.points]
    points = np.array(traced or [(0.0, 0.0), (90.0, 0.0)])
    mm_per_px = 90.0 / max(float(np.ptp(points, axis=0).max()), 1.0)
    zero = np.zeros(draws)
    homography = find_homography(np.full(draws, mm_per_px), np.zeros((draws, 2)), zero, zero)
    plane = Plane(homography, mm_per_px).seen_from(shifted(-centre_px))
    return Scale(centre_px, np.full(draws, mm_per_px), plane, plane, "none")


def _no_scale(view: View) -> Missing:
    """Say why there is no scale and what would give one."""
    marks = len(view.scale.marks)
    return Missing(
        "scale",
        f"needs two marks or more on one bar, a ppi, or a known length; has {marks} mark"
        + ("s on different bars" if marks > 1 else "" if marks == 1 else "s"),
    )


def measure_scale(scale: Scale, at_px: Floats) -> Quantity:
    """Return the millimetres per pixel at the face, around one point."""
    return Quantity("mm/px", scale.face.local(at_px))
