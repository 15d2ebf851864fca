"""The whole tablet as inferred: outline, axis, lost space, margin, and the lines that its height holds."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.lengths import Extent, Mapped, measure_extent, measure_to_edge
from layout.notices import Missing, Notice, assume, warn
from layout.outline import TURN, X0, Y0, Outline, Traced, fit_outline
from layout.quantity import Floats, Quantity
from layout.record.model import TABLET_EDGE, Record
from layout.results import (
    Axes,
    AxisEvidence,
    AxisResult,
    Reconstructed,
    ReconstructedOutline,
)
from layout.rulings import Line
from layout.views import LEAST_POINTS, MeasuredView

ASSUMED_ASYMMETRY_PERCENT = 1.0
BAND = (0.025, 0.975)
OPPOSITE = {"left": "right", "right": "left"}


@dataclass(frozen=True, eq=False)
class Whole:
    """The reconstructed tablet: lengths, (N,), are in mm, or in the scale's own unit where there is none."""

    width: Floats
    lost_space: Floats | None
    lost_height: Floats | None
    reconstructed: Reconstructed


def reconstruct(
    record: Record, measured: MeasuredView, draws: int, rng: np.random.Generator
) -> tuple[Whole | None, list[Notice]]:
    """Reconstruct the whole tablet from one view.

    Returns
    -------
    tuple
        The whole, or None, and the notices: what was assumed, and why there is no whole.
    """
    traced = _trace(measured)
    notices: list[Notice] = []
    names = {name for name, _ in traced.pieces}
    if not names & {"left", "right"} or not names & {"upper", "lower"}:
        text = "needs original edge on the left or right, and above or below, three points or more each"
        return None, [Missing("reconstructed", text)]
    asymmetry = record.asymmetry_percent
    if asymmetry is None:
        asymmetry = ASSUMED_ASYMMETRY_PERCENT
        notices.append(assume("outline.asymmetry", "asymmetry_percent", percent=asymmetry))
    about = f"{measured.view.face}: outline"
    notices += [assume("outline.shape", about), assume("outline.share", about)]
    outline, caveats = fit_outline(traced, asymmetry / 100, draws, rng)
    notices += caveats
    if outline is None:
        return None, [*notices, Missing("reconstructed", caveats[-1].text)]
    extent = measure_extent(outline, measured.mapped)
    sides, note = _lost_sides(record, names)
    notices += note
    margin, by_side, note = _lost_space(measured, extent, sides)
    notices += note
    bounded = {"upper", "lower"} <= names
    if not bounded:
        side = "below" if "upper" in names else "above"
        notices.append(warn("outline.proportion", face=measured.view.face, side=side))
        for result in ("height", "area", "lost_area"):
            notices.append(Missing(f"reconstructed.{result}", f"needs original edge {side}"))
    area = _area(outline, measured.mapped) if bounded else None
    lost = None if len(by_side) != 1 else next(iter(by_side.values()))
    reconstructed = Reconstructed(
        face=measured.view.face,
        axis=Axes(_vertical_axis(outline, measured.mapped, extent), None),
        outline=_drawn(outline, measured),
        width=Quantity("mm", extent.width),
        height=Quantity("mm", extent.height) if bounded else None,
        area=None if area is None else Quantity("mm2", area),
        lost_area=None
        if area is None or measured.preserved is None
        else Quantity("mm2", area - measured.preserved.area.draws),
        lost_space=None if lost is None else Quantity("mm", lost),
        lost_space_by_side={side: Quantity("mm", space) for side, space in by_side.items()},
        margin=None if margin is None else Quantity("mm", margin),
    )
    lost_height = _lost_height(outline, traced, measured.mapped) if bounded else None
    return Whole(extent.width, lost, lost_height, reconstructed), notices


def _trace(measured: MeasuredView) -> Traced:
    """Return the view's sound edges and its break in the face frame."""
    view, mm_per_px = measured.view, measured.scale.outline.nominal_mm_per_px
    points = [
        (piece, measured.frame.to_mm(np.array(piece.points), mm_per_px))
        for piece in view.outline
        if len(piece.points) >= LEAST_POINTS
    ]
    edges = tuple((p.edge, mm) for p, mm in points if p.edge != "break" and p.state == "sound")
    breaks = [mm for p, mm in points if p.edge == "break"]
    pointing_mm = measured.pointing_mm * mm_per_px / measured.scale.face.nominal_mm_per_px
    return Traced(edges, np.vstack(breaks) if breaks else np.empty((0, 2)), pointing_mm)


def _lost_sides(record: Record, edges: set[str]) -> tuple[tuple[str, ...], list[Notice]]:
    """Return the sides where columns are lost: as stated, or those without original edge."""
    if record.lost.sides:
        return tuple(record.lost.sides), []
    sides = tuple(side for side in ("left", "right") if side not in edges)
    return sides, [assume("lost.sides", "lost.sides", sides=" and ".join(sides) or "neither")]


def _lost_space(
    measured: MeasuredView, extent: Extent, sides: tuple[str, ...]
) -> tuple[Floats | None, dict[str, Floats], list[Notice]]:
    """Return the margin on the surviving side and the lost space by side, each of shape (N,)."""
    result = "reconstructed.lost_space"
    if len(sides) != 1:
        text = "nothing is lost on the left or right"
        if sides:
            text = "needs one side that survives: with both lost the tablet is not bounded"
        return None, {}, [Missing(result, text)]
    if not measured.verticals:
        return None, {}, [Missing(result, "needs a vertical ruling of two points or more")]
    side = sides[0]
    nearest, outermost = measured.verticals[0], measured.verticals[-1]
    if side == "right":
        nearest, outermost = outermost, nearest
    margin = _margin(measured, outermost, OPPOSITE[side], extent)
    lost = measure_to_edge(nearest, side, extent, measured.mapped) - margin
    notices: list[Notice] = [assume("margin.mirrored", "writing")]
    negative = float((lost < 0).mean())
    if negative > 0.025:
        notices.append(warn("lost_space.negative", percent=f"{100 * negative:.0f}"))
    return margin, {side: lost}, notices


def _margin(measured: MeasuredView, outermost: Line, side: str, extent: Extent) -> Floats:
    """Return the margin on a surviving side; zero where the last column runs to the edge."""
    begins = outermost.id if side == "right" else TABLET_EDGE
    if any(entry.column == begins for entry in measured.view.writing):
        return np.zeros(len(extent.width))
    return measure_to_edge(outermost, side, extent, measured.mapped)


def _vertical_axis(outline: Outline, mapped: Mapped, extent: Extent) -> AxisResult:
    """Return the vertical axis: where it meets y = 0 of the face frame, and its angle from the vertical."""
    shape = outline.shape
    at_origin = shape[:, X0] + np.tan(shape[:, TURN]) * shape[:, Y0]
    width = Quantity("mm", extent.width)
    return AxisResult(
        position=Quantity("mm", at_origin * mapped.outline.local(np.zeros(2))),
        angle_deg=Quantity("deg", np.degrees(shape[:, TURN])),
        evidence=(AxisEvidence("outline", width, 1.0),),
    )


def _drawn(outline: Outline, measured: MeasuredView) -> ReconstructedOutline:
    """Return the outline as polygons: the median, and the edges of the 95 % band."""
    mm_per_px = measured.scale.outline.nominal_mm_per_px
    median, inner, outer = (outline.polygon(quantile) for quantile in (0.5, *BAND))
    seen = [
        measured.scale.to_photograph(measured.frame.to_px(polygon, mm_per_px))
        for polygon in (median, inner, outer)
    ]
    return ReconstructedOutline(points_mm=median, points_px=seen[0], band_px=(seen[1], seen[2]))


def _lost_height(outline: Outline, traced: Traced, mapped: Mapped) -> Floats:
    """Return the height that is gone above and below together, (N,).

    Where the edge still stands at the tablet's highest or lowest point nothing is lost there, nor is what would be less
    than the edge's wobble.
    """
    tangents = outline.tangents
    everything = np.vstack([traced.breaks, *(points for _, points in traced.pieces)])
    lost = np.zeros(len(tangents))
    for side, place, down in (("upper", 2, -1), ("lower", 3, 1)):
        x, y = tangents[:, place].T
        stands = np.zeros(len(x), dtype=bool)
        for name, points in traced.pieces:
            if name == side:
                stands |= (points[:, 0].min() <= x) & (x <= points[:, 0].max())
        beyond = down * y - (down * everything[:, 1]).max()
        lost += np.where(stands | (beyond < outline.wobble_mm), 0.0, beyond)
    return lost * _ratio_at_centre(outline, mapped)


def _ratio_at_centre(outline: Outline, mapped: Mapped) -> Floats:
    """Return each row's scale over the nominal one at the whole outline's centre."""
    return mapped.outline.local(outline.shape[:, [X0, Y0]].mean(axis=0))


def _area(outline: Outline, mapped: Mapped) -> Floats:
    """Return the whole area in mm2, shape (N,)."""
    return np.asarray(outline.area() * _ratio_at_centre(outline, mapped) ** 2)
