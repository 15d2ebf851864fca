"""The face as a picture of known resolution: seen square, free of the lens's distortion, upright."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.errors import CallError
from layout.frame import Frame, Scale, turned
from layout.homography import apply, inverse
from layout.image.photograph import MOST_PIXELS, Pixels
from layout.lens import Lens
from layout.quantity import Floats
from layout.record.model import Record, View
from layout.scale import fit_scale
from layout.straighten import free_of_lens, moved
from layout.views import find_frame

MARGIN_MM = 5.0
DRAWS = 2000
MM_PER_CM = 10
BAND_ROWS = 512
PER_MM = (1.0, 200.0)


@dataclass(frozen=True, eq=False)
class Rectified:
    """A picture of the face, and how many of its pixels make a millimetre."""

    pixels: Pixels
    px_per_mm: float


def rectify(
    record: Record, number: int, pixels: Pixels, px_per_mm: float, lens: Lens | None = None
) -> Rectified:
    """Resample a view so that its face lies square in the picture, at one resolution.

    The face is taken to be flat and at its most likely height and tilt; what stands above or below it is shifted a
    little. Its rulings run upright.

    Parameters
    ----------
    record
        With a scale.
    number
        Of the view, from 0.
    pixels
        The view's photograph.
    px_per_mm
        From 1 to 200, in tenths.
    lens
        The lens file that the view names, if any.

    Raises
    ------
    CallError
        If there is no such view or no scale, the resolution is out of range, or the picture would be too large.
    """
    _check(record, number, px_per_mm)
    view = record.views[number]
    photograph = record.photograph_of(view)
    lens = None if lens is None else lens.for_size(photograph.size)
    straight = view if lens is None else free_of_lens(view, lens)
    scale, _ = fit_scale(straight, photograph, record.thickness, DRAWS, np.random.default_rng(0), lens)
    if not scale.known:
        message = f"views[{number}] has no scale; mark two divisions of its bar or more"
        raise CallError(message)
    to_mm = _to_mm(scale, find_frame(moved(straight, scale.level), scale))
    low, high = _bounds(view, photograph.size, to_mm, scale)
    width, height = np.ceil((high - low) * px_per_mm).astype(int)
    if int(width) * int(height) > MOST_PIXELS:
        message = f"would have {width} x {height} pixels; ask for fewer pixels per mm"
        raise CallError(message)
    return Rectified(_resample(pixels, inverse(to_mm), scale, (low, px_per_mm), (width, height)), px_per_mm)


def _check(record: Record, number: int, px_per_mm: float) -> None:
    """Hold what a call needs."""
    if not 0 <= number < len(record.views):
        message = f"needs a view from 0 to {len(record.views) - 1}, has {number}"
        raise CallError(message)
    tenths = px_per_mm * 10
    if not PER_MM[0] <= px_per_mm <= PER_MM[1] or abs(tenths - round(tenths)) > 1e-9:
        message = f"needs {PER_MM[0]:g} to {PER_MM[1]:g} pixels per mm, in tenths, has {px_per_mm:g}"
        raise CallError(message)


def _to_mm(scale: Scale, frame: Frame) -> Floats:
    """Return the most likely homography (3, 3) from levelled pixels to mm of the face, rulings upright."""
    rows = scale.face.homography / scale.face.homography[2, 2]
    upright = np.eye(3)
    upright[:2, :2] = turned(-frame.turn).T
    return np.asarray(upright @ np.median(rows, axis=2))


def _bounds(view: View, size: tuple[int, int], to_mm: Floats, scale: Scale) -> tuple[Floats, Floats]:
    """Return the corners, mm, of what is shown: the outline with a margin, else the view's region or photograph."""
    traced = [point for piece in view.outline for point in piece.points]
    if traced:
        points, margin = np.array(traced, dtype=float), MARGIN_MM
    else:
        x, y, width, height = view.region or (0.0, 0.0, float(size[0]), float(size[1]))
        points = np.array([[x, y], [x + width, y], [x, y + height], [x + width, y + height]]) - 0.5
        margin = 0.0
    mm = apply(to_mm, scale.from_photograph(points))
    return mm.min(axis=0) - margin, mm.max(axis=0) + margin


def _resample(
    pixels: Pixels, from_mm: Floats, scale: Scale, grid: tuple[Floats, float], size: tuple[int, int]
) -> Pixels:
    """Look up every pixel of the new picture in the photograph, a band of rows at a time."""
    import cv2

    low, px_per_mm = grid
    width, height = size
    middle = apply(from_mm, low + np.array(size) / (2 * px_per_mm))
    finer = px_per_mm * float(np.median(scale.face.local(middle)))
    source, shrink = pixels, 1.0
    if finer < 0.7:
        # a picture coarser than the photograph is taken from a photograph made coarser first, by averaging
        shrink = finer
        source = np.asarray(
            cv2.resize(pixels, None, fx=shrink, fy=shrink, interpolation=cv2.INTER_AREA), pixels.dtype
        )
    bands = []
    x = low[0] + (np.arange(width) + 0.5) / px_per_mm
    for top in range(0, int(height), BAND_ROWS):
        y = low[1] + (np.arange(top, min(top + BAND_ROWS, int(height))) + 0.5) / px_per_mm
        at = scale.to_photograph(apply(from_mm, np.stack(np.meshgrid(x, y), axis=-1)))
        at = (at + 0.5) * shrink - 0.5
        bands.append(
            cv2.remap(
                source,
                at[..., 0].astype(np.float32),
                at[..., 1].astype(np.float32),
                cv2.INTER_CUBIC,
                borderMode=cv2.BORDER_CONSTANT,
            )
        )
    return np.asarray(np.concatenate(bands), pixels.dtype)


def to_tiff(rectified: Rectified) -> bytes:
    """Return the picture as a TIFF whose resolution is in its metadata, in pixels per centimetre."""
    import cv2

    per_cm = round(rectified.px_per_mm * MM_PER_CM)
    options = [cv2.IMWRITE_TIFF_RESUNIT, 3, cv2.IMWRITE_TIFF_XDPI, per_cm, cv2.IMWRITE_TIFF_YDPI, per_cm]
    done, data = cv2.imencode(".tif", cv2.cvtColor(rectified.pixels, cv2.COLOR_RGB2BGR), options)
    if not done:
        message = "the picture cannot be encoded; ask for fewer pixels per mm"
        raise CallError(message)
    return data.tobytes()
