"""Calibration of a lens from pictures of a chessboard, or of the scale card.

Zhang 2000: a flat pattern of known form, seen at several tilts, fixes the focal length, the centre and the
distortion; OpenCV does the fit. The unit of length drops out, so that nobody needs to measure the squares.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from layout.errors import CallError
from layout.image.photograph import Pixels, read_photograph
from layout.image.sampling import Grey, grey
from layout.image.target import find_card
from layout.lens import Lens, LensPicture, undistort
from layout.quantity import Floats

FEWEST_PICTURES = 5
FEWEST_POINTS = 12
LEAST_TURN_DEG = 10.0
"""The two boards that differ most must be tilted this much against each other: while all are parallel, a longer
focal length and a greater distance look the same."""
LARGEST_FOCAL_SD = 0.02
SURE_SD = 2.0
DOUBTFUL = 3.0
"""A picture is doubtful when its own reprojection error is so many times the median of all."""
SEARCH_PX = 1200
SHORTEST = 3
COMMON = (9, 6)
USUAL = range(4, 13)


@dataclass(frozen=True, eq=False)
class PatternView:
    """What one picture shows: points of a flat pattern, shape (N, 2), in any unit, and where they are seen, px."""

    file: str
    pattern: Floats
    at_px: Floats


@dataclass(frozen=True)
class Calibration:
    """A lens; the pictures that were not used, and why; and those that fit badly, to be looked at again."""

    lens: Lens
    unused: tuple[tuple[str, str], ...]
    doubtful: tuple[str, ...]


def calibrate(
    paths: Sequence[str | Path], *, columns: int | None = None, rows: int | None = None
) -> Calibration:
    """Calibrate a lens from photographs of a chessboard or of the scale card.

    The assumption: one camera, one lens, one focus and one zoom, held the same way in all pictures; the pattern
    is flat.

    Parameters
    ----------
    paths
        Five photographs or more, from several sides.
    columns, rows
        Inner corners of the chessboard, where four squares meet. When not given, 9 x 6 is tried first, then other
        sizes; a picture without a chessboard is searched for the card.

    Raises
    ------
    CallError
        If fewer than five pictures show the pattern, if the pictures are of different sizes, or if they are too
        alike for a lens to follow from them.
    PhotographError
        If a picture cannot be read.
    """
    if (columns is None) != (rows is None):
        text = "needs both the columns and the rows of the chessboard's inner corners, or neither"
        raise CallError(text)
    if columns is not None and rows is not None and min(columns, rows) < SHORTEST:
        text = f"needs a chessboard of {SHORTEST} x {SHORTEST} inner corners or more, has {columns} x {rows}"
        raise CallError(text)
    views: list[PatternView] = []
    unused: list[tuple[str, str]] = []
    sizes: dict[tuple[int, int], str] = {}
    board = None if columns is None or rows is None else (columns, rows)
    for path in paths:
        pixels = read_photograph(path)
        name = Path(path).name
        sizes.setdefault((pixels.shape[1], pixels.shape[0]), name)
        _need_one_size(sizes)
        found = find_chessboard(pixels, [board or COMMON], thorough=board is not None)
        view = _card_view(name, pixels) if found is None and columns is None else None
        if found is None and not views and view is None and board is None:
            # the other sizes are tried on the first picture only, and those before it that showed nothing
            found = find_chessboard(pixels, _other_sizes())
        if found is not None:
            # all pictures show the same board
            board = found.columns, found.rows
            view = PatternView(name, found.pattern, found.at_px)
        if view is None:
            unused.append((name, "shows no whole chessboard and no card"))
        else:
            views.append(view)
    if len(views) < FEWEST_PICTURES:
        raise CallError(_too_few(len(views), unused))
    lens = fit_lens(views, next(iter(sizes)))
    return Calibration(lens, tuple(unused), _doubtful(lens))


def fit_lens(views: Sequence[PatternView], size: tuple[int, int]) -> Lens:
    """Fit a lens to what several pictures show of one flat pattern.

    The pixels are taken as square, as on all present sensors. The third radial coefficient is fitted only where
    the pictures fix it: two standard uncertainties from zero, and no fold within the picture.

    Parameters
    ----------
    views
        Five or more.
    size
        Width and height of the upright pictures, px.

    Raises
    ------
    CallError
        If there are too few pictures, or if they are too alike.
    """
    import cv2

    if len(views) < FEWEST_PICTURES:
        raise CallError(_too_few(len(views), []))
    lens = _fit(views, size)
    if abs(lens.distortion[4]) < SURE_SD * lens.distortion_sd[4] or _folds(lens):
        # what the pictures do not fix does harm where none of them held it: in the corners
        lens = _fit(views, size, fixed=cv2.CALIB_FIX_K3)
    if _folds(lens):
        needs = "the distortion folds back within the picture; let the board reach its corners"
        raise CallError(_too_alike(needs))
    return lens


def _fit(views: Sequence[PatternView], size: tuple[int, int], fixed: int = 0) -> Lens:
    """Fit a lens; with some of its numbers fixed at zero."""
    import cv2

    solid = [np.pad(view.pattern, ((0, 0), (0, 1))).astype(np.float32) for view in views]
    seen = [view.at_px.astype(np.float32) for view in views]
    # the ratio 1 of this matrix is kept; its other numbers are no guess
    square, flags = np.eye(3), cv2.CALIB_FIX_ASPECT_RATIO | fixed
    try:
        rms, inner, distortion, turns, _, sds, _, each = cv2.calibrateCameraExtended(
            solid, seen, size, square, np.zeros(5), flags=flags
        )
    except cv2.error:
        raise CallError(_too_alike("no lens follows from them")) from None
    fitted, spread = np.ravel(distortion)[:5].tolist(), np.ravel(sds)[:9].tolist()
    focal_x, focal_y, *centre = inner[[0, 1, 0, 1], [0, 1, 2, 2]].tolist()
    if not np.isfinite([rms, focal_x, focal_y, *centre, *fitted, *spread]).all():
        raise CallError(_too_alike("no lens follows from them"))
    # the two focal lengths are one number of the fit, whose uncertainty stands at the second
    focal_sd = max(spread[:2])
    _need_tilts(np.array([cv2.Rodrigues(turn)[0][:, 2] for turn in turns]))
    _need_focal(focal_x, focal_sd)
    return Lens(
        schema=1,
        size=size,
        focal_px=_rounded([focal_x, focal_y]),
        focal_sd_px=_rounded([focal_sd, focal_sd]),
        centre_px=_rounded(centre),
        centre_sd_px=_rounded(spread[2:4]),
        distortion=_rounded(fitted),
        distortion_sd=_rounded(spread[4:]),
        rms_px=_rounded([rms])[0],
        pictures=tuple(
            LensPicture(file=view.file, points=len(view.pattern), rms_px=error)
            for view, error in zip(views, _rounded(np.ravel(each).tolist()), strict=True)
        ),
        made=f"Zhang 2000, by OpenCV; square pixels; {'without' if fixed else 'with'} k3",
    )


@dataclass(frozen=True, eq=False)
class Chessboard:
    """A chessboard in a picture: its inner corners row by row, counted in squares, and where they are seen, px."""

    columns: int
    rows: int
    at_px: Floats

    @property
    def pattern(self) -> Floats:
        """Return the corners in squares, shape (columns x rows, 2)."""
        y, x = np.mgrid[: self.rows, : self.columns]
        return np.column_stack([x.ravel(), y.ravel()]).astype(float)


def find_chessboard(
    pixels: Pixels, boards: Iterable[tuple[int, int]], *, thorough: bool = False
) -> Chessboard | None:
    """Find a chessboard, whole in the picture.

    Parameters
    ----------
    pixels
        The photograph, upright.
    boards
        Columns and rows of inner corners, in the order in which they are tried.
    thorough
        Whether to search longer, by a second way that on a board of another size would invent rows.

    Returns
    -------
    Chessboard or None
        Of a larger board perhaps only a part, which serves as well.
    """
    import cv2

    whole = grey(pixels)
    factor = min(1.0, SEARCH_PX / max(whole.shape))
    small = np.asarray(cv2.resize(whole, None, fx=factor, fy=factor, interpolation=cv2.INTER_AREA), np.uint8)
    for columns, rows in boards:
        corners = _corners(small, columns, rows, thorough=thorough)
        if corners is not None:
            at = _refine(small, corners, columns)
            # pixel centres stand on whole numbers, in the small picture as in the large one
            return Chessboard(columns, rows, _refine(whole, (at + 0.5) / factor - 0.5, columns))
    return None


def _corners(small: Grey, columns: int, rows: int, *, thorough: bool) -> Floats | None:
    """Find the corners roughly."""
    import cv2

    ways = cv2.CALIB_CB_ADAPTIVE_THRESH | cv2.CALIB_CB_NORMALIZE_IMAGE | cv2.CALIB_CB_FAST_CHECK
    found, corners = cv2.findChessboardCorners(small, (columns, rows), flags=ways)
    if not found and thorough:
        found, corners = cv2.findChessboardCornersSB(small, (columns, rows))
    return np.asarray(corners, dtype=float).reshape(-1, 2) if found else None


def _refine(grey: Grey, at_px: Floats, columns: int) -> Floats:
    """Move corners to where the brightness is a saddle, in a window well inside of the squares."""
    import cv2

    grid = at_px.reshape(-1, columns, 2)
    steps = np.concatenate([np.diff(grid, axis=axis).reshape(-1, 2) for axis in (0, 1)])
    half = int(np.clip(np.hypot(*steps.T).min() / 3, 2, 25))
    until = (cv2.TERM_CRITERIA_EPS + cv2.TERM_CRITERIA_COUNT, 60, 0.001)
    start = at_px.astype(np.float32).reshape(-1, 1, 2)
    return np.asarray(cv2.cornerSubPix(grey, start, (half, half), (-1, -1), until), float).reshape(-1, 2)


def _other_sizes() -> list[tuple[int, int]]:
    """Return the usual sizes but the most common: larger first, since a smaller one fits into a larger."""
    pairs = [(a, b) for b in USUAL for a in USUAL if b <= a <= b + 4 and (a, b) != COMMON]
    return sorted(pairs, key=lambda pair: -pair[0] * pair[1])


def _card_view(name: str, pixels: Pixels) -> PatternView | None:
    """Return the corners of the card, where enough of it is seen."""
    marks = find_card(pixels)
    if len(marks) < FEWEST_POINTS:
        return None
    return PatternView(name, np.array([mark.mm for mark in marks]), np.array([mark.at_px for mark in marks]))


def _need_one_size(sizes: dict[tuple[int, int], str]) -> None:
    """Refuse pictures of different sizes, or held differently."""
    if len(sizes) > 1:
        shown = " and ".join(f"{width} x {height} ({name})" for (width, height), name in sizes.items())
        text = f"needs pictures of one size, all held the same way, has {shown}; leave out the others"
        raise CallError(text)


def _need_tilts(normals: Floats) -> None:
    """Refuse boards that all face the same way; shape (pictures, 3)."""
    # a board counted from its other side faces the same way
    most = float(np.degrees(np.arccos(np.clip(np.abs(normals @ normals.T), 0, 1)).max()))
    if most < LEAST_TURN_DEG:
        needs = f"the board's tilts differ by {most:.1f} degrees at most, and {LEAST_TURN_DEG:.0f} or more are needed"
        raise CallError(_too_alike(needs))


def _need_focal(focal_px: float, sd_px: float) -> None:
    """Refuse a focal length that the pictures leave open."""
    if sd_px > LARGEST_FOCAL_SD * focal_px:
        needs = (
            f"the focal length is known to {100 * sd_px / focal_px:.1f} % only, and 2 % or better is needed"
        )
        raise CallError(_too_alike(needs))


def _folds(lens: Lens) -> bool:
    """Say whether the distortion folds back within the picture."""
    width, height = lens.size
    rim = np.array([[x, y] for x in (0.0, width - 1.0) for y in (0.0, height - 1.0)])
    try:
        undistort(lens, rim)
    except CallError:
        return True
    return False


def _too_alike(why: str) -> str:
    """Say what to do when a lens does not follow."""
    return (
        f"the pictures are too alike: {why}; photograph the board from the front, from above, from below and from "
        "either side, tilted by 20 to 40 degrees, and in the corners of the picture"
    )


def _too_few(count: int, unused: list[tuple[str, str]]) -> str:
    """Say how many pictures serve and why the others do not."""
    others = "; ".join(f"{name} {why}" for name, why in unused)
    needs = f"needs {FEWEST_PICTURES} pictures or more that show a whole chessboard or the card, has {count}"
    return f"{needs} ({others}); take more" if others else f"{needs}; take more"


def _doubtful(lens: Lens) -> tuple[str, ...]:
    """Name the pictures that fit much worse than most."""
    median = float(np.median([picture.rms_px for picture in lens.pictures]))
    return tuple(picture.file for picture in lens.pictures if picture.rms_px > DOUBTFUL * median)


def _rounded(values: Sequence[float]) -> Any:  # noqa: ANN401 - a tuple of as many numbers
    """Keep eight digits: far more than is known, and none that differ between machines."""
    return tuple(float(f"{value:.8g}") for value in values)
