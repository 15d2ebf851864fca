"""The sheet's drawing: what survives, as traced, and the whole tablet as inferred, true to scale.

It is drawn in pixels of the photograph, so that traced points and the photograph need no conversion; the
page gives it its size in millimetres.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from layout.quantity import Floats
from layout.record.model import Record, View
from layout.results import ReconstructedOutline, Results, ViewResult

SCALE_BARS_MM = (1, 2, 5, 10, 20, 50, 100, 200)
BAR_SHARE = 0.4
"""The scale bar is the longest round one that takes no more of the drawing's width."""
MARGIN_SHARE = 0.04


@dataclass(frozen=True)
class Box:
    """A rectangle in pixels of the photograph."""

    x: float
    y: float
    width: float
    height: float


@dataclass(frozen=True)
class Stroke:
    """A traced line: what it is (an edge, ``break``, a kind of ruling) and its path."""

    kind: str
    path: str


@dataclass(frozen=True)
class ScaleBar:
    """A scale bar: its length, and its alternate blocks from left to right."""

    mm: int
    blocks: tuple[Box, ...]


@dataclass(frozen=True)
class Drawing:
    """The drawing: paths in pixels of the photograph with the id ``photograph``.

    ``stroke_px`` is what a thin line measures in them, ``width_mm`` the drawing's width. ``surviving`` is
    empty while the outline is open, ``whole``, ``band`` and ``axis`` while nothing is inferred.
    """

    photograph: str
    box: Box
    width_mm: float | None
    stroke_px: float
    surviving: str
    whole: str
    band: str
    axis: str
    edges: tuple[Stroke, ...]
    rulings: tuple[Stroke, ...]
    bar: ScaleBar | None


def draw(record: Record, results: Results) -> Drawing | None:
    """Draw the view from which the whole was inferred, else the first one on which anything is traced."""
    index = _drawn_view(record, results)
    if index is None:
        return None
    view, measured = record.views[index], results.views[index]
    whole = results.reconstructed
    outline = whole.outline if whole is not None and whole.face == view.face else None
    content = _box_around(_traced(view), outline)
    mm_per_px = _mm_per_px(measured)
    stroke_px = content.width / 500
    bar = None if mm_per_px is None else _scale_bar(content, mm_per_px)
    box = Box(content.x, content.y, content.width, content.height + (30 * stroke_px if bar else 0))
    contour = [point for piece in view.outline for point in piece.points]
    return Drawing(
        photograph=view.photograph,
        box=box,
        width_mm=None if mm_per_px is None else box.width * mm_per_px,
        stroke_px=stroke_px,
        surviving=_path(contour, closed=True) if measured.preserved is not None else "",
        whole="" if outline is None else _path(outline.points_px, closed=True),
        band="" if outline is None else " ".join(_path(edge, closed=True) for edge in outline.band_px),
        axis="" if outline is None else _axis(outline),
        edges=_edges(view),
        rulings=tuple(
            Stroke(ruling.kind, _path(ruling.points)) for ruling in view.rulings if len(ruling.points) > 1
        ),
        bar=bar,
    )


def _axis(outline: ReconstructedOutline) -> str:
    """Return the vertical axis from end to end of the whole outline, where its polygon meets it."""
    quarter = len(outline.points_px) // 4
    return _path(outline.points_px[[quarter, 3 * quarter]])


def _drawn_view(record: Record, results: Results) -> int | None:
    """Return the index of the view to draw."""
    face = None if results.reconstructed is None else results.reconstructed.face
    drawable = [index for index, view in enumerate(record.views) if len(_traced(view)) > 1]
    inferred = (index for index in drawable if record.views[index].face == face)
    return next(inferred, drawable[0] if drawable else None)


def _traced(view: View) -> list[tuple[float, float]]:
    """Return every traced point of the fragment itself."""
    traces = [*(piece.points for piece in view.outline), *(ruling.points for ruling in view.rulings)]
    return [point for points in traces for point in points]


def _edges(view: View) -> tuple[Stroke, ...]:
    """Return the contour piece by piece, each drawn on to where the next one begins."""
    pieces = [piece for piece in view.outline if piece.points]
    following = [*pieces[1:], *pieces[:1]]
    return tuple(
        Stroke(
            "break" if piece.edge == "break" else piece.state,
            _path([*piece.points, after.points[0]] if piece.edge == "break" else piece.points),
        )
        for piece, after in zip(pieces, following, strict=True)
    )


def _box_around(traced: list[tuple[float, float]], outline: ReconstructedOutline | None) -> Box:
    """Return the drawing's extent: all that is traced or inferred, and a margin."""
    points = np.array(traced)
    if outline is not None:
        points = np.vstack([points, outline.points_px, *outline.band_px])
    low, high = points.min(axis=0), points.max(axis=0)
    margin = MARGIN_SHARE * float((high - low).max())
    width, height = (high - low + 2 * margin).tolist()
    return Box(round(low[0] - margin, 1), round(low[1] - margin, 1), round(width, 1), round(height, 1))


def _mm_per_px(measured: ViewResult) -> float | None:
    """Return the scale at the face, if there is one."""
    return None if measured.scale is None else measured.scale.mm_per_px.summary().value


def _scale_bar(content: Box, mm_per_px: float) -> ScaleBar | None:
    """Return a bar of alternate blocks below the drawing, or None where even a millimetre is too long."""
    room_mm = BAR_SHARE * content.width * mm_per_px
    length = max((mm for mm in SCALE_BARS_MM if mm <= room_mm), default=None)
    if length is None:
        return None
    leading = int(str(length)[0])
    count = 10 if leading == 1 else leading
    step_px = length / count / mm_per_px
    top, height = content.y + content.height, content.width / 100
    start = content.x + MARGIN_SHARE * content.width
    return ScaleBar(
        length,
        tuple(
            Box(round(start + index * step_px, 2), round(top, 2), round(step_px, 2), round(height, 2))
            for index in range(count)
        ),
    )


def _path(points: Floats | Iterable[tuple[float, float]], *, closed: bool = False) -> str:
    """Write points as an SVG path, to a tenth of a pixel."""
    return "M" + " ".join(f"{x:.1f},{y:.1f}" for x, y in points) + ("Z" if closed else "")
