"""One view, measured: its scale, its frame, its rulings, columns, line pitch and preserved extent."""

from __future__ import annotations

import itertools
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from layout.frame import Frame, Scale, measure_scale
from layout.lengths import Mapped, measure_column, polygon_area, polygon_centroid
from layout.lens import Lens
from layout.notices import Missing, Notice, warn
from layout.quantity import Floats, Quantity, quantiles
from layout.record.model import Photograph, Record, Ruling, View
from layout.results import ColumnResult, PitchResult, Preserved, RulingResult, ScaleResult, ViewResult
from layout.rulings import Line, Pitch, fit_lines, fit_pitch
from layout.scale import fit_scale
from layout.sources import pointing_of
from layout.straighten import free_of_lens, moved

LEAST_POINTS = 3


@dataclass(frozen=True, eq=False)
class Column:
    """A column between two vertical boundaries: width and taper, each of shape (N,)."""

    left: Line
    right: Line
    width: Floats
    taper: Floats


@dataclass(frozen=True, eq=False)
class MeasuredView:
    """A view with all that later steps read: every array of draws has N rows."""

    view: View
    scale: Scale
    frame: Frame
    mapped: Mapped
    pointing_mm: float
    verticals: tuple[Line, ...]
    horizontals: tuple[Line, ...]
    columns: tuple[Column, ...]
    pitch: Pitch | None
    pitch_mm: Floats | None
    polygon: Floats | None
    preserved: Preserved | None
    notices: tuple[Notice, ...]


def measure_view(
    record: Record,
    view: View,
    draws: int,
    generators: list[np.random.Generator],
    lenses: Mapping[str, Lens],
) -> MeasuredView:
    """Measure one view.

    Parameters
    ----------
    record
        That the view is of.
    draws
        How many rows.
    generators
        One each for scale, rulings, pitch and preserved extent.
    lenses
        By the names by which views name them.

    Raises
    ------
    CallError
        If a lens does not belong to the photograph, or shows nothing where a point was traced.
    """
    for_scale, for_lines, for_pitch, for_extent = generators
    photograph = record.photograph_of(view)
    lens, notices = _lens_of(view, photograph, lenses)
    straight = view if lens is None else free_of_lens(view, lens)
    scale, note = fit_scale(straight, photograph, record.thickness, draws, for_scale, lens)
    notices += note
    if scale.model == "perspective":
        straight = moved(straight, scale.level)
    view = straight
    frame = find_frame(view, scale)
    mapped = Mapped.of(scale, frame)
    pointing_mm = pointing_of(view)[0] * scale.face.nominal_mm_per_px
    traces, note = _traces(view, frame, scale)
    lines = fit_lines(traces, pointing_mm, draws, for_lines) if traces else []
    verticals = tuple(
        sorted(
            (line for line in lines if line.runs == "vertical"),
            key=lambda line: line.mean_at(0.0),
        )
    )
    horizontals = _lines_of_writing(view, lines)
    pitch = fit_pitch(horizontals, draws, for_pitch)
    polygon = _polygon(view, frame, scale)
    return MeasuredView(
        view=view,
        scale=scale,
        frame=frame,
        mapped=mapped,
        pointing_mm=pointing_mm,
        verticals=verticals,
        horizontals=tuple(line for line in lines if line.runs == "horizontal"),
        columns=tuple(
            Column(left, right, *measure_column(left, right, mapped))
            for left, right in itertools.pairwise(verticals)
        ),
        pitch=pitch,
        pitch_mm=None if pitch is None else pitch.pitch * mapped.face.local(_middle(horizontals)),
        polygon=polygon,
        preserved=None if polygon is None else _preserved(polygon, mapped, pointing_mm, draws, for_extent),
        notices=(*notices, *note, *_ambiguous(view, pitch), *_left_alone(view)),
    )


def _lens_of(
    view: View, photograph: Photograph, lenses: Mapping[str, Lens]
) -> tuple[Lens | None, list[Notice]]:
    """Return the lens that a view names, for its photograph's size, and a warning where nobody gave it."""
    name = view.scale.lens
    if name is None:
        return None, []
    if name not in lenses:
        return None, [warn("lens.unread", face=view.face, file=name)]
    return lenses[name].for_size(photograph.size), []


def find_frame(view: View, scale: Scale) -> Frame:
    """Return the face frame: origin at the centroid of the outline, turned by the rulings.

    Without an outline the origin is the centroid of the rulings; without rulings the turn is that of the
    original edges on the left and right.
    """
    outline = [np.array(piece.points) for piece in view.outline if piece.points]
    rulings = [np.array(ruling.points) for ruling in view.rulings if ruling.points]
    if outline:
        centroid, mm_per_px = polygon_centroid(np.vstack(outline)), scale.outline.nominal_mm_per_px
    elif rulings:
        centroid, mm_per_px = np.vstack(rulings).mean(axis=0), scale.face.nominal_mm_per_px
    else:
        centroid, mm_per_px = scale.centre_px, scale.face.nominal_mm_per_px
    turns = [
        _turn(np.array(ruling.points), ruling.runs) for ruling in view.rulings if len(ruling.points) > 1
    ] or [
        _turn(np.array(piece.points), "vertical")
        for piece in view.outline
        if piece.edge in ("left", "right") and len(piece.points) > 1
    ]
    turn = float(quantiles(np.array(turns), (0.5,))[0]) if turns else 0.0
    return Frame(scale.centre_px, (centroid - scale.centre_px) * mm_per_px, turn)


def _turn(points: Floats, runs: str) -> float:
    """Return by how much a traced line is turned from the photograph's vertical or horizontal, radians."""
    away = points - points.mean(axis=0)
    x, y = np.linalg.svd(away, full_matrices=False)[2][0]
    if runs == "horizontal":
        return float(np.arctan2(y, x) if x > 0 else np.arctan2(-y, -x))
    return float(np.arctan2(-x, y) if y > 0 else np.arctan2(x, -y))


def _traces(view: View, frame: Frame, scale: Scale) -> tuple[list[tuple[str, str, Floats]], list[Notice]]:
    """Return the rulings of two points or more in the face frame, and name the others."""
    traces: list[tuple[str, str, Floats]] = []
    notes: list[Notice] = []
    for ruling in view.rulings:
        points = np.array(ruling.points).reshape(-1, 2)
        if _is_line(ruling, points):
            traces.append((ruling.id, ruling.runs, frame.to_mm(points, scale.face.nominal_mm_per_px)))
        else:
            text = f"needs two points or more that are apart, has {len(points)}"
            notes.append(Missing(f"rulings[{ruling.id}]", text))
    return traces, notes


def _is_line(ruling: Ruling, points: Floats) -> bool:
    """Whether a ruling's points lie apart along its run."""
    return len(points) > 1 and bool(np.ptp(points[:, 1 if ruling.runs == "vertical" else 0]) > 1.0)


def _lines_of_writing(view: View, lines: list[Line]) -> list[Line]:
    """Return the horizontal lines that count lines of writing: the ruled ones, or those signs stand on."""
    kinds = {ruling.id: ruling.kind for ruling in view.rulings}
    level = [line for line in lines if line.runs == "horizontal"]
    ruled = [line for line in level if kinds[line.id] != "writing"]
    standing = [line for line in level if kinds[line.id] == "writing"]
    return ruled if len(ruled) >= len(standing) else standing


def _middle(lines: list[Line]) -> Floats:
    """Return the middle of some horizontal lines, shape (2,)."""
    return np.asarray(np.mean([(line.middle, line.mean_at(line.middle)) for line in lines], axis=0))


def _polygon(view: View, frame: Frame, scale: Scale) -> Floats | None:
    """Return the traced outline in the face frame, or None where it is too short or still open."""
    pieces = [np.array(piece.points) for piece in view.outline if piece.points]
    if not pieces or sum(map(len, pieces)) < 2 * LEAST_POINTS:
        return None
    points = np.vstack(pieces)
    gap = float(np.hypot(*(points[0] - points[-1])))
    if gap > 0.1 * float(np.ptp(points, axis=0).max()):
        return None
    return frame.to_mm(points, scale.outline.nominal_mm_per_px)


def _preserved(
    polygon: Floats, mapped: Mapped, pointing_mm: float, draws: int, rng: np.random.Generator
) -> Preserved:
    """Return the surviving width, height and area; each extent has the pointing error of two points."""
    ratio = mapped.outline.local(np.zeros(2))
    width, height = np.ptp(polygon, axis=0)
    errors = rng.normal(0.0, np.sqrt(2) * pointing_mm, (2, draws))
    area = polygon_area(polygon)
    perimeter = float(np.hypot(*np.diff(polygon, axis=0).T).sum())
    # independent errors of P points move the area by the pointing error times perimeter / sqrt(P)
    area_error = rng.normal(0.0, pointing_mm * perimeter / np.sqrt(len(polygon)), draws)
    return Preserved(
        width=Quantity("mm", (width + errors[0]) * ratio),
        height=Quantity("mm", (height + errors[1]) * ratio),
        area=Quantity("mm2", (area + area_error) * ratio**2),
    )


def _ambiguous(view: View, pitch: Pitch | None) -> list[Notice]:
    """Warn where the lines could be numbered otherwise."""
    if pitch is None or not pitch.alternatives:
        return []
    others = ", ".join(f"{mm:.2f} mm" for mm in pitch.alternatives)
    best = f"{float(np.median(pitch.pitch)):.2f} mm"
    return [warn("pitch.ambiguous", face=view.face, best=best, others=others)]


def _left_alone(view: View) -> list[Notice]:
    """Warn of what a view holds that its measurement does not use."""
    notes: list[Notice] = []
    if any(piece.state != "sound" for piece in view.outline):
        notes.append(warn("outline.state", face=view.face))
    return notes


def view_result(measured: MeasuredView) -> tuple[ViewResult, list[Missing]]:
    """Return a view as the results show it; without a scale its lengths are left out."""
    face = measured.view.face
    missing: list[Missing] = []
    rulings = tuple(
        RulingResult(
            line.id,
            line.runs,
            Quantity("deg", np.degrees(np.arctan(line.slope * (-1 if line.runs == "vertical" else 1)))),
            line.scatter_mm if measured.scale.known else None,
        )
        for line in (*measured.verticals, *measured.horizontals)
    )
    if not measured.scale.known:
        return ViewResult(face, None, None, rulings, (), None), missing
    if not measured.columns:
        missing.append(Missing("columns", "needs two vertical rulings of two points or more"))
    if measured.pitch is None:
        missing.append(Missing("line_pitch", "needs two horizontal rulings or lines of writing"))
    if measured.preserved is None:
        missing.append(Missing("preserved", "needs an outline that closes around the fragment"))
    origin_px = measured.frame.to_px(np.zeros(2), measured.scale.outline.nominal_mm_per_px)
    return (
        ViewResult(
            face=face,
            scale=ScaleResult(measure_scale(measured.scale, origin_px), measured.scale.model),
            preserved=measured.preserved,
            rulings=rulings,
            columns=tuple(
                ColumnResult(
                    column.left.id,
                    column.right.id,
                    Quantity("mm", column.width),
                    Quantity("mm_per_100mm", column.taper),
                )
                for column in measured.columns
            ),
            line_pitch=_pitch_result(measured),
        ),
        missing,
    )


def _pitch_result(measured: MeasuredView) -> PitchResult | None:
    """Return the line pitch as the results show it."""
    pitch = measured.pitch
    if pitch is None or measured.pitch_mm is None:
        return None
    ratio = measured.pitch_mm / pitch.pitch
    return PitchResult(
        pitch=Quantity("mm", measured.pitch_mm),
        drift=None if pitch.drift is None else Quantity("mm", pitch.drift * ratio),
        scatter_mm=pitch.scatter_mm,
        index=pitch.index,
    )
