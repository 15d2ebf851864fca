"""The distortion of a lens: its file, and how points are freed of it.

The picture is never resampled: only the points that were traced on it move. The model is that of Conrady 1919
and Brown 1966, with three radial and two tangential coefficients, in the order and sign that OpenCV uses. A
point of the ideal picture at (x, y), counted from the centre in focal lengths, is seen at

    x (1 + k1 r^2 + k2 r^4 + k3 r^6) + 2 p1 x y + p2 (r^2 + 2 x^2)
    y (1 + k1 r^2 + k2 r^4 + k3 r^6) + p1 (r^2 + 2 y^2) + 2 p2 x y
"""

from __future__ import annotations

import json
import re
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any, Literal

import numpy as np
from pydantic import BaseModel, ConfigDict, Field, ValidationError

from layout.errors import CallError
from layout.files import reason, write_whole
from layout.quantity import Floats

if TYPE_CHECKING:
    from layout.record.model import Record

LARGEST_FILE = 1_000_000
HALVINGS = 50
STEPS = 20
CLOSE_PX = 1e-10
"""Newton's steps end when none moves a point by more; a double resolves 2e-12 px at 10,000 px."""

# a list that holds numbers only, as json sets it: one number to a line
_NUMBERS = re.compile(r"\[\n\s+([-+.,\de\s]*?)\s+\]")

Finite = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=-1e6, le=1e6)]
Positive = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=1e-6, le=1e6)]
NotNegative = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=0, le=1e6)]
Count = Annotated[int, Field(strict=True, ge=1, le=1_000_000)]
Text = Annotated[str, Field(strict=True)]
Five = tuple[Finite, Finite, Finite, Finite, Finite]


class _Part(BaseModel):
    """What the parts of a lens file share: immutable, and no key that is not known here."""

    model_config = ConfigDict(frozen=True, extra="forbid", defer_build=True, populate_by_name=True)


class LensPicture(_Part):
    """A picture that the lens was calibrated from: its file's name and its own reprojection error."""

    file: Text
    points: Count
    rms_px: NotNegative


class Lens(_Part):
    """A calibrated lens, as ``NAME.lens.json`` keeps it.

    ``size`` is (width, height) of the upright pictures; ``focal_px`` (fx, fy) and ``centre_px`` (cx, cy) are in
    pixels, pixel centres on whole numbers; ``distortion`` is (k1, k2, p1, p2, k3). Each ``sd`` holds the standard
    uncertainties of what it is named after, from the scatter of the fit. ``rms_px`` is the root mean square
    distance between the seen and the computed points of all pictures.
    """

    schema_version: Literal[1] = Field(alias="schema")
    size: tuple[Count, Count]
    focal_px: tuple[Positive, Positive]
    focal_sd_px: tuple[NotNegative, NotNegative]
    centre_px: tuple[Finite, Finite]
    centre_sd_px: tuple[NotNegative, NotNegative]
    distortion: Five
    distortion_sd: tuple[NotNegative, NotNegative, NotNegative, NotNegative, NotNegative]
    rms_px: NotNegative
    pictures: tuple[LensPicture, ...] = ()
    made: Text = ""

    def to_json(self) -> str:
        """Return the text of the lens file: keys in the format's order, two-space indent."""
        values = self.model_dump(mode="json", by_alias=True)
        text = json.dumps(values, indent=2, ensure_ascii=False, allow_nan=False)
        return _NUMBERS.sub(lambda match: f"[{' '.join(match[1].split())}]", text) + "\n"

    def for_size(self, size: tuple[int, int]) -> Lens:
        """Return this lens for photographs of another size, scaled down or up as a whole.

        The assumption: they show the whole sensor as the calibration's did, and were not cropped.

        Raises
        ------
        CallError
            If the proportions differ: the photograph was cropped, or held the other way.
        """
        if size == self.size:
            return self
        (width, height), (new_width, new_height) = self.size, size
        # a whole number of pixels lets the shorter side be off by one
        if abs(new_width * height - new_height * width) > max(width, height):
            raise CallError(_wrong_size(self.size, size))
        ratios = new_width / width, new_height / height
        # pixel centres stand on whole numbers, so that the picture begins at -0.5
        centre = tuple((at + 0.5) * ratio - 0.5 for at, ratio in zip(self.centre_px, ratios, strict=True))
        scaled = {
            name: tuple(value * ratio for value, ratio in zip(getattr(self, name), ratios, strict=True))
            for name in ("focal_px", "focal_sd_px", "centre_sd_px")
        }
        rms = self.rms_px * ratios[0]
        return self.model_copy(update={"size": size, "centre_px": centre, "rms_px": rms, **scaled})


def read_lens(path: str | Path) -> Lens:
    """Read a lens file.

    Raises
    ------
    CallError
        If the file cannot be read, is no JSON, or is malformed.
    """
    path = Path(path)
    try:
        if path.exists() and not path.is_file():
            text = "is no file but a folder or a device; name a lens file"
            raise CallError(text, file=path)
        if path.stat().st_size > LARGEST_FILE:
            text = "is larger than 1 MB, which no lens file is; name another file"
            raise CallError(text, file=path)
        data = path.read_bytes()
    except (OSError, ValueError) as error:
        text = f"cannot be read: {reason(error)}"
        raise CallError(text, file=path) from None
    try:
        return Lens.model_validate(json.loads(data.decode("utf-8-sig"), object_pairs_hook=_unrepeated))
    except ValidationError as error:
        raise CallError(_first_fault(error), file=path) from None
    except (ValueError, RecursionError) as error:
        text = f"is no lens file ({error}); calibrate with 'layout lens'"
        raise CallError(text, file=path) from None


def read_lenses(record: Record, folder: str | Path) -> dict[str, Lens]:
    """Read the lens files that a record's views name, from the folder in which the record lies.

    Raises
    ------
    CallError
        If one cannot be read or is malformed.
    """
    names = {view.scale.lens for view in record.views if view.scale.lens is not None}
    return {name: read_lens(Path(folder) / name) for name in sorted(names)}


def write_lens(lens: Lens, path: str | Path) -> None:
    """Write a lens file, whole or not at all.

    Raises
    ------
    CallError
        If it cannot be written; what was there before is then untouched.
    """
    write_whole(Path(path), lens.to_json().encode())


def distort(lens: Lens, points_px: Floats) -> Floats:
    """Return where the lens shows points of the ideal picture.

    Parameters
    ----------
    lens
        A lens for photographs of this size: see ``Lens.for_size``.
    points_px
        Shape (..., 2), as a pinhole of the same focal length and centre would show them.
    """
    return _to_px(lens, _distorted(lens, _from_px(lens, points_px)))


def undistort(lens: Lens, points_px: Floats) -> Floats:
    """Free points of a photograph from the distortion of its lens.

    Parameters
    ----------
    lens
        A lens for photographs of this size: see ``Lens.for_size``.
    points_px
        Shape (..., 2), as seen.

    Returns
    -------
    ndarray
        Shape (..., 2): where a pinhole of the same focal length and centre would show them; the inverse of
        ``distort``.

    Raises
    ------
    CallError
        If a point lies where the model folds back: no ideal point, or more than one, would be seen there.

    Examples
    --------
    >>> lens = Lens(schema=1, size=(601, 401), focal_px=(500.0, 500.0), focal_sd_px=(0.0, 0.0),
    ...     centre_px=(300.0, 200.0), centre_sd_px=(0.0, 0.0), distortion=(-0.1, 0.0, 0.0, 0.0, 0.0),
    ...     distortion_sd=(0.0, 0.0, 0.0, 0.0, 0.0), rms_px=0.0)
    >>> undistort(lens, np.array([[300.0, 200.0], [400.0, 200.0]])).round(3)
    array([[300.   , 200.   ],
           [400.405, 200.   ]])
    """
    points_px = np.asarray(points_px, dtype=float)
    if not np.isfinite(points_px).all():
        text = "needs points with finite coordinates to free them from the distortion of the lens"
        raise CallError(text)
    seen = _from_px(lens, points_px)
    fold = fold_radius(lens)
    ideal = _undo_radial(lens, seen, fold)
    close = CLOSE_PX / max(lens.focal_px)
    for _ in range(STEPS):
        # the tangential part is small: from the radial solution Newton's method converges in a few steps
        step = _solve(_derivative(lens, ideal), seen - _distorted(lens, ideal))
        # a step that is wild is cut short, and the check below refuses where it led
        ideal = ideal + np.clip(step, -0.1, 0.1)
        if np.abs(step).max(initial=0.0) <= close:
            break
    away = np.abs(seen - _distorted(lens, ideal)).max(axis=-1)
    a, b, c, d = _derivative(lens, ideal)
    lost = (away > 10 * close) | (a * d <= b * c) | (np.hypot(*np.moveaxis(ideal, -1, 0)) >= fold)
    if lost.any():
        x, y = points_px[lost][0]
        text = (
            f"the lens file does not reach to the point ({x:.1f}, {y:.1f}): its distortion folds back there; "
            "calibrate again with the board near the corners of the picture"
        )
        raise CallError(text)
    return _to_px(lens, ideal)


def fold_radius(lens: Lens) -> float:
    """Return how far from the centre, in focal lengths, the radial model grows: infinity if everywhere."""
    k1, k2, _, _, k3 = lens.distortion
    # the derivative of r (1 + k1 r^2 + k2 r^4 + k3 r^6), a cubic in r^2
    roots = np.roots([7 * k3, 5 * k2, 3 * k1, 1.0])
    real = roots.real[(np.abs(roots.imag) < 1e-9 * np.abs(roots)) & (roots.real > 0)]
    return float(np.sqrt(real.min())) if real.size else np.inf


def _undo_radial(lens: Lens, seen: Floats, fold: float) -> Floats:
    """Invert the radial part by halving the interval in which it grows; beyond it stands its end."""
    k1, k2, _, _, k3 = lens.distortion
    r_seen = np.hypot(seen[..., 0], seen[..., 1])
    low = np.zeros_like(r_seen)
    # where nothing folds, r (1 + ...) exceeds any radius in the end; a picture never needs 100 focal lengths
    high = np.full_like(r_seen, min(fold, 100.0))
    for _ in range(HALVINGS):
        middle = (low + high) / 2
        square = middle * middle
        below = middle * (1 + square * (k1 + square * (k2 + square * k3))) < r_seen
        low, high = np.where(below, middle, low), np.where(below, high, middle)
    ratio = np.divide(low, r_seen, out=np.ones_like(low), where=r_seen > 0)
    return np.asarray(seen * ratio[..., None])


def _distorted(lens: Lens, points: Floats) -> Floats:
    """Apply the model of the module's docstring to points in focal lengths."""
    k1, k2, p1, p2, k3 = lens.distortion
    x, y = points[..., 0], points[..., 1]
    r2 = x * x + y * y
    radial = 1 + r2 * (k1 + r2 * (k2 + r2 * k3))
    return np.stack(
        [
            x * radial + 2 * p1 * x * y + p2 * (r2 + 2 * x * x),
            y * radial + p1 * (r2 + 2 * y * y) + 2 * p2 * x * y,
        ],
        axis=-1,
    )


def _derivative(lens: Lens, points: Floats) -> tuple[Floats, Floats, Floats, Floats]:
    """Return the derivative of the model, row by row: dx/dx, dx/dy, dy/dx, dy/dy."""
    k1, k2, p1, p2, k3 = lens.distortion
    x, y = points[..., 0], points[..., 1]
    r2 = x * x + y * y
    radial = 1 + r2 * (k1 + r2 * (k2 + r2 * k3))
    # of the radial factor, by r^2
    slope = k1 + r2 * (2 * k2 + 3 * r2 * k3)
    cross = 2 * x * y * slope + 2 * p1 * x + 2 * p2 * y
    return (
        radial + 2 * x * x * slope + 2 * p1 * y + 6 * p2 * x,
        cross,
        cross,
        radial + 2 * y * y * slope + 6 * p1 * y + 2 * p2 * x,
    )


def _solve(derivative: tuple[Floats, Floats, Floats, Floats], right: Floats) -> Floats:
    """Solve the two equations of each point."""
    a, b, c, d = derivative
    determinant = a * d - b * c
    # at a fold there is no solution; whatever comes out is refused afterwards
    determinant = np.where(np.abs(determinant) < 1e-12, 1e-12, determinant)
    u, v = right[..., 0], right[..., 1]
    return np.stack([d * u - b * v, a * v - c * u], axis=-1) / determinant[..., None]


def _from_px(lens: Lens, points_px: Floats) -> Floats:
    """Count pixels from the centre in focal lengths."""
    return np.asarray((np.asarray(points_px, dtype=float) - lens.centre_px) / lens.focal_px)


def _to_px(lens: Lens, points: Floats) -> Floats:
    """Turn focal lengths from the centre into pixels."""
    return np.asarray(points * lens.focal_px + lens.centre_px)


def _wrong_size(own: tuple[int, int], other: tuple[int, int]) -> str:
    """Say why a lens does not serve a photograph."""
    needs = f"the lens file is for pictures of {own[0]} x {own[1]} pixels, or of the same proportions"
    if abs(other[1] * own[1] - other[0] * own[0]) <= max(own):
        mend = "it was held the other way; calibrate from pictures that were held as this one"
    else:
        mend = (
            "it was cropped or taken with another camera; use the uncropped photograph or its own lens file"
        )
    return f"{needs}, the photograph has {other[0]} x {other[1]}: {mend}"


def _unrepeated(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    """Refuse a key that stands twice, which json would drop silently."""
    values = dict(pairs)
    if len(values) < len(pairs):
        message = "a key stands twice"
        raise ValueError(message)
    return values


def _first_fault(error: ValidationError) -> str:
    """Name the first thing to mend, and where it stands."""
    detail = error.errors(include_url=False)[0]
    place = ".".join(str(step) for step in detail["loc"])
    if detail["type"] == "missing":
        return f"{place}: is missing; calibrate again with 'layout lens'"
    if detail["type"] == "extra_forbidden":
        return f"{place}: unknown key; delete it"
    text = detail["msg"].removeprefix("Input ").lower()
    return f"{place}: {text}, has {str(detail['input'])[:40]!r}; calibrate again with 'layout lens'"
