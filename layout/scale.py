"""The scale of a view, from all that gives it: bars, targets, known lengths, resolution, focal length."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from layout.aslant import Aslant, can_tell_tilt, fit_aslant
from layout.frame import Plane, Scale, find_homography, shifted
from layout.homography import inverse
from layout.lens import Lens
from layout.notices import Assumption, Caveat, Missing, Notice, assume
from layout.quantity import MM_PER_INCH, Floats
from layout.scene import UNKNOWN, Scene, draw_scene, observed
from layout.sources import Focal, Length, fit_bar, fit_known, flats_of, pointing_of

if TYPE_CHECKING:
    from layout.record.model import Measured, Photograph, View

ASSUMED_THICKNESS_MM = (25.0, 7.0)
ASSUMED_DISTANCE_MM = 700.0
ASSUMED_DISTANCE_LOG_SD = 0.4
ASSUMED_TILT_SD_DEG = 1.5
ASSUMED_PPI_SD = 0.003
FOCUSED_LOG_SD = 0.03
"""By how much a focal length differs from that of the calibration, when the lens is focused elsewhere."""


def fit_scale(
    view: View,
    photograph: Photograph,
    thickness: Measured | None,
    draws: int,
    rng: np.random.Generator,
    lens: Lens | None = None,
) -> tuple[Scale, list[Notice]]:
    """Fit a view's scale from all its sources and draw from it.

    Parameters
    ----------
    view
        With marks, ``ppi`` or known lengths, its points freed of the lens's distortion; without a source of scale
        the model is ``"none"``.
    photograph
        That the view shows.
    thickness
        Of the tablet; assumed where nobody gave it.
    lens
        Of the photograph's own size: its centre is where the optical axis is, its focal length ties the distance.

    Returns
    -------
    tuple
        The scale and what was assumed, warned of and missing.
    """
    notices: list[Notice] = []
    pointing_px, note = pointing_of(view)
    notices += note
    centre_px = (np.array(photograph.size, dtype=float) - 1) / 2 if lens is None else np.array(lens.centre_px)
    flats = flats_of(view, pointing_px)
    knowns = [fit_known(known, pointing_px) for known in view.scale.known]
    thick, note = _thickness(thickness)
    notices += note
    if not flats and not knowns and view.scale.ppi is None:
        notices.append(assume("scale.unit", f"{view.face}: scale"))
        return _without_scale(view, centre_px, draws, lens), [*notices, _no_scale(view)]
    if any(flat.found for flat in flats):
        notices.append(assume("scale.bar", f"{view.face}: scale.marks"))
    scanner = view.scale.ppi is not None and not flats
    focal = None if scanner else _focal(photograph, lens)
    before, note = _beforehand(view, thick, focal, scanner=scanner)
    notices += note
    distance = float(before.mean[4]), float(np.sqrt(before.covariance[4, 4]))
    ways = fit_aslant(flats, distance, focal, centre_px) if can_tell_tilt(flats) else []
    if ways:
        drawn, caveats = _draw_aslant(before, ways, knowns, centre_px, draws, rng)
        notices.append(
            assume("scale.rocking", f"{view.face}: scale.tilt_sd_deg", deg=_tilt_deg(view, scanner=scanner))
        )
    else:
        lengths = [*map(fit_bar, flats), *knowns]
        drawn, caveats = _draw_square(before, lengths, focal, centre_px, draws, rng)
    notices += caveats
    thickness_mm = np.abs(rng.normal(thick[0], thick[1], draws))
    return _lay_planes(view, drawn, centre_px, (thickness_mm, thick[0]), lens), notices


@dataclass(frozen=True, eq=False)
class Drawn:
    """Draws of the scene, (N, 5), of how the face rocks against the bar's plane, (N, 2), and whether it is aslant."""

    scene: Scene
    parameters: Floats
    rocking: Floats
    aslant: bool


def _thickness(thickness: Measured | None) -> tuple[tuple[float, float], list[Assumption]]:
    """Return mean and sd of the tablet's thickness in mm."""
    if thickness is not None:
        return (thickness.mm, thickness.sd), []
    mean, sd = ASSUMED_THICKNESS_MM
    return (mean, sd), [assume("scale.thickness", "thickness", mm=mean, sd=sd)]


def _focal(photograph: Photograph, lens: Lens | None) -> Focal | None:
    """Return the focal length: the lens's, or the one that the camera wrote into the photograph."""
    if lens is not None:
        px = float(np.mean(lens.focal_px))
        sd = float(np.mean(lens.focal_sd_px)) / px
        return Focal("focal length of the lens file", px, float(np.hypot(sd, FOCUSED_LOG_SD)))
    if photograph.focal_length is not None:
        stated = photograph.focal_length
        return Focal("focal length of the camera data", stated.px, stated.sd / stated.px)
    return None


def _tilt_deg(view: View, *, scanner: bool) -> float:
    """Return the standard deviation of the tilt: stated or assumed."""
    if view.scale.tilt_sd_deg is not None:
        return view.scale.tilt_sd_deg
    return 0.0 if scanner else ASSUMED_TILT_SD_DEG


def _beforehand(
    view: View, thickness: tuple[float, float], focal: Focal | None, *, scanner: bool
) -> tuple[Scene, list[Assumption]]:
    """State what is known of the scene before any mark: as given, or assumed with an honest width."""
    given = view.scale
    notes: list[Assumption] = []
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
        if focal is not None:
            percent = 100 * focal.log_sd
            notes.append(
                assume("scale.focal", f"{view.face}: scale.distance", name=focal.name, percent=percent)
            )
        elif not scanner:
            notes.append(assume("scale.distance", f"{view.face}: scale.distance", mm=distance))
    tilt_deg = _tilt_deg(view, scanner=scanner)
    if given.tilt_sd_deg is None and not scanner:
        notes.append(assume("scale.tilt", f"{view.face}: scale.tilt_sd_deg", deg=tilt_deg))
    if given.ppi is not None:
        log_mm_per_px, log_sd = np.log(MM_PER_INCH / given.ppi), ASSUMED_PPI_SD
        notes.append(assume("scale.ppi", f"{view.face}: scale.ppi", percent=100 * ASSUMED_PPI_SD))
    else:
        log_mm_per_px, log_sd = 0.0, UNKNOWN  # anything: the lengths decide
    tilt_sd = np.sin(np.deg2rad(tilt_deg))
    mean = np.array([log_mm_per_px, 0.0, 0.0, below, np.log(distance)])
    sd = np.array([log_sd, tilt_sd, tilt_sd, below_sd, distance_log_sd])
    return Scene(mean, np.diag(sd**2), scanner), notes


def _draw_square(
    before: Scene,
    lengths: list[Length],
    focal: Focal | None,
    centre_px: Floats,
    draws: int,
    rng: np.random.Generator,
) -> tuple[Drawn, list[Caveat]]:
    """Draw a scene whose camera is square to it but for the tilt that is stated or assumed."""
    mean = before.mean.copy()
    if before.covariance[0, 0] > 1:
        # start where the first length puts the scale, so that its neighbourhood is linear
        mean[0] = np.log(lengths[0].mm) - np.log(np.hypot(*(lengths[0].ends_px[1] - lengths[0].ends_px[0])))
        mean[0] += observed(lengths[0]) - before.expect(mean[None], lengths[0], centre_px)[0]
    scene = Scene(mean, before.covariance, before.scanner)
    sources: list[Length | Focal] = [*lengths]
    if focal is not None:
        sources.append(focal)
    parameters, notes = draw_scene(scene, sources, centre_px, draws, rng)
    return Drawn(scene, parameters, np.zeros((draws, 2)), aslant=False), notes


def _draw_aslant(
    before: Scene,
    ways: list[Aslant],
    knowns: list[Length],
    centre_px: Floats,
    draws: int,
    rng: np.random.Generator,
) -> tuple[Drawn, list[Caveat]]:
    """Draw a scene whose tilt the marks show; the face may rock against the plane of the marks."""
    of_marks = np.ix_([0, 1, 2, 4], [0, 1, 2, 4])
    choice = rng.choice(len(ways), draws, p=[way.weight for way in ways])
    parameters = np.empty((draws, 5))
    notes: list[Caveat] = []
    for number, way in enumerate(ways):
        mean, covariance = before.mean.copy(), np.zeros((5, 5))
        mean[[0, 1, 2, 4]], covariance[of_marks] = way.mean, way.covariance
        covariance[3, 3] = before.covariance[3, 3]
        rows = np.flatnonzero(choice == number)
        scene = Scene(mean, covariance, scanner=False)
        parameters[rows], note = draw_scene(scene, knowns, centre_px, len(rows), rng)
        notes += note
    best = max(ways, key=lambda way: way.weight)
    mean = before.mean.copy()
    mean[[0, 1, 2, 4]] = best.mean
    rocking = rng.normal(0.0, np.sqrt(before.covariance[1, 1]), (draws, 2))
    return Drawn(Scene(mean, before.covariance, scanner=False), parameters, rocking, aslant=True), notes


def _lay_planes(
    view: View, drawn: Drawn, centre_px: Floats, thickness: tuple[Floats, float], lens: Lens | None
) -> Scale:
    """Return the scale: the planes of face and outline, as levelled pixels show them."""
    parameters = drawn.parameters
    middle = drawn.scene.mean if drawn.aslant else parameters.mean(axis=0)
    levelling = _levelling(middle, centre_px) if drawn.aslant else np.eye(3)
    facing, height = parameters, parameters[:, 3]
    if drawn.aslant:
        facing = parameters.copy()
        facing[:, 1:3] += drawn.rocking
        height = _height_on_axis(parameters, facing, _middle_of(view, centre_px) - centre_px)
    upright = float(np.sqrt(1 - (middle[1:3] ** 2).sum())) if drawn.aslant else 1.0
    nearness = 0.0 if drawn.scene.scanner else float(np.exp(-middle[4]))
    at_bar = float(np.exp(middle[0]))
    planes = [
        drawn.scene.plane(
            facing,
            height - share * thickness[0],
            centre_px,
            at_bar * (upright - (float(middle[3]) - share * thickness[1]) * nearness),
        ).seen_from(inverse(levelling))
        for share in (0.0, 0.5)
    ]
    return Scale(
        centre_px=centre_px,
        mm_per_px=np.exp(parameters[:, 0]),
        face=planes[0],
        outline=planes[1],
        model="perspective" if drawn.aslant else "similarity",
        levelling=levelling,
        lens=lens,
    )


def _levelling(parameters: Floats, centre_px: Floats) -> Floats:
    """Return the homography (3, 3) to the picture that a camera at the same place, square to the scene, would take."""
    log_mm_per_px, a, b, _, log_distance = parameters
    focal_px = np.exp(log_distance - log_mm_per_px)
    n = np.array([a, b, np.sqrt(1 - a * a - b * b)])
    # Rodrigues: the shortest turn that brings the scene's normal onto the optical axis
    axis = np.cross(n, [0.0, 0.0, 1.0])
    cross = np.array([[0, -axis[2], axis[1]], [axis[2], 0, -axis[0]], [-axis[1], axis[0], 0]])
    turn = np.eye(3) + cross + cross @ cross / (1 + n[2])
    camera = np.array([[focal_px, 0, centre_px[0]], [0, focal_px, centre_px[1]], [0, 0, 1.0]])
    return np.asarray(camera @ turn @ np.linalg.inv(camera))


def _height_on_axis(parameters: Floats, facing: Floats, at_px: Floats) -> Floats:
    """Return at what height, (N,), a plane that rocks about a point of the face meets the optical axis.

    The face passes through the point that is seen at ``at_px`` (from the centre) at the face's height above the
    plane of the bar, whose normal is n; its own normal is m.
    """
    k, h = np.exp(-parameters[:, 4]), parameters[:, 3]
    t = at_px * np.exp(parameters[:, :1])
    n, m = parameters[:, 1:3], facing[:, 1:3]
    n_z, m_z = (np.sqrt(1 - (normal**2).sum(axis=1)) for normal in (n, m))
    n_t, m_t = (n * t).sum(axis=1), (m * t).sum(axis=1)
    return np.asarray((h * (k * m_t + m_z) + m_z * n_t - n_z * m_t) / (n_z + k * n_t))


def _middle_of(view: View, centre_px: Floats) -> Floats:
    """Return the middle of what was traced on the face; the picture's centre where nothing was."""
    traced = [point for part in (view.outline, view.rulings) for one in part for point in one.points]
    return np.asarray(np.mean(traced, axis=0)) if traced else centre_px


def _without_scale(view: View, centre_px: Floats, draws: int, lens: Lens | None) -> Scale:
    """Return a scale without a unit: for the shape's priors the fragment is taken to be 90 mm across."""
    traced = [point for piece in view.outline for point in piece.points]
    points = np.array(traced or [(0.0, 0.0), (90.0, 0.0)])
    mm_per_px = 90.0 / max(float(np.ptp(points, axis=0).max()), 1.0)
    zero = np.zeros(draws)
    homography = find_homography(np.full(draws, mm_per_px), np.zeros((draws, 2)), zero, zero)
    plane = Plane(homography, mm_per_px).seen_from(shifted(-centre_px))
    return Scale(centre_px, np.full(draws, mm_per_px), plane, plane, "none", np.eye(3), lens)


def _no_scale(view: View) -> Missing:
    """Say why there is no scale and what would give one."""
    marks = len(view.scale.marks)
    return Missing(
        "scale",
        f"needs two marks or more on one bar, a ppi, or a known length; has {marks} mark"
        + ("s on different bars" if marks > 1 else "" if marks == 1 else "s"),
    )
