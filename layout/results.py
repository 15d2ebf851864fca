"""The results: what one measurement of a record says, every number with its draws.

The classes mirror the results file field by field (the design's section 5); ``to_json`` is generic, so the
two cannot drift apart. What cannot be computed is None, and ``missing`` says why.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, is_dataclass
from typing import Any

import numpy as np

from layout.notices import Assumption, Caveat, Missing
from layout.quantity import Floats, Quantity, Summary, significant

SCHEMA = 1


@dataclass(frozen=True, eq=False)
class ScaleResult:
    """Millimetres per pixel at the face, at the outline's centroid, and the model that gave it."""

    mm_per_px: Quantity
    model: str


@dataclass(frozen=True, eq=False)
class Preserved:
    """The surviving fragment: extent along and across the columns, and area, in the outline's plane."""

    width: Quantity
    height: Quantity
    area: Quantity


@dataclass(frozen=True, eq=False)
class RulingResult:
    """One ruling: its direction from the vertical or horizontal of the face frame, and its scatter in mm."""

    id: str
    runs: str
    angle_deg: Quantity
    scatter_mm: float | None


@dataclass(frozen=True, eq=False)
class ColumnResult:
    """A column between two vertical boundaries; ``taper`` is in mm per 100 mm of height."""

    left: str
    right: str
    width: Quantity
    taper: Quantity


@dataclass(frozen=True, eq=False)
class PitchResult:
    """Line pitch at the middle of the traced lines, its growth from line to line, and the lines' numbers."""

    pitch: Quantity
    drift: Quantity | None
    scatter_mm: float | None
    index: dict[str, int]


@dataclass(frozen=True, eq=False)
class ViewResult:
    """What one view measures."""

    face: str
    scale: ScaleResult | None
    preserved: Preserved | None
    rulings: tuple[RulingResult, ...]
    columns: tuple[ColumnResult, ...]
    line_pitch: PitchResult | None


@dataclass(frozen=True, eq=False)
class AxisEvidence:
    """What one source of evidence says alone about the width, and its share of the precision."""

    kind: str
    width: Quantity
    share: float


@dataclass(frozen=True, eq=False)
class AxisResult:
    """The axis: its x at y = 0 in the face frame (vertical axis), its angle, and the evidence for it."""

    position: Quantity
    angle_deg: Quantity
    evidence: tuple[AxisEvidence, ...]


@dataclass(frozen=True, eq=False)
class Axes:
    """The axes of symmetry that could be found."""

    vertical: AxisResult | None
    horizontal: AxisResult | None


@dataclass(frozen=True, eq=False)
class ReconstructedOutline:
    """The whole outline at the median, and the inner and outer edge of its 95 % band; closed polygons."""

    points_mm: Floats
    points_px: Floats
    band_px: tuple[Floats, Floats]


@dataclass(frozen=True, eq=False)
class Reconstructed:
    """The whole tablet as inferred from one view."""

    face: str
    axis: Axes
    outline: ReconstructedOutline
    width: Quantity
    height: Quantity | None
    area: Quantity | None
    lost_area: Quantity | None
    lost_space: Quantity | None
    lost_space_by_side: dict[str, Quantity]
    margin: Quantity | None


@dataclass(frozen=True, eq=False)
class SignWidthResult:
    """Width of a full digit in mm; of the other kinds of sign in full digits; how many entries spoke."""

    full: Quantity | None
    units_only: Quantity
    tens_only: Quantity
    blank: Quantity
    mean_sign: Quantity
    entries: int


@dataclass(frozen=True, eq=False)
class ColumnClearance:
    """How much wider one surviving column is than its widest entry."""

    left: str
    ratio: Quantity


@dataclass(frozen=True, eq=False)
class ClearanceResult:
    """The scribe's clearance: of each surviving column, typical, and its spread (sd of the logarithm)."""

    columns: tuple[ColumnClearance, ...]
    typical: Quantity
    spread: Quantity


@dataclass(frozen=True, eq=False)
class LinesResult:
    """Height in lines: of the lost part, and of the whole face."""

    lost: Quantity | None
    face: Quantity | None


@dataclass(frozen=True, eq=False)
class Capacity:
    """What the lost part held: sign widths across, lines down."""

    sign_widths: Quantity | None
    lines: LinesResult


@dataclass(frozen=True, eq=False)
class RankingRow:
    """One candidate against the lost space (in the ranking "none of these" is a row too)."""

    name: str
    plain_count: float | None
    required: Quantity | None
    predicted: Quantity | None
    widest_line: tuple[int, ...]
    probability_too_wide: float | None
    weight: float | None
    verdict: str | None
    contradicted_lines: tuple[int, ...]


@dataclass(frozen=True, eq=False)
class Results:
    """Everything that one measurement says."""

    schema: int
    name: str
    version: str
    draws: int
    seed: int
    views: tuple[ViewResult, ...]
    reconstructed: Reconstructed | None
    sign_width: SignWidthResult | None
    clearance: ClearanceResult | None
    capacity: Capacity | None
    ranking: tuple[RankingRow, ...]
    assumptions: tuple[Assumption, ...]
    warnings: tuple[Caveat, ...]
    missing: tuple[Missing, ...]

    def to_json(self) -> dict[str, Any]:
        """Return the results file as plain dicts, lists, strings and numbers of six significant digits."""
        plain: dict[str, Any] = _plain(self)
        return plain


def _plain(value: Any) -> Any:  # noqa: ANN401
    """Return a result as what the json module can write."""
    match value:
        case Quantity():
            return value.summary().to_json()
        case Summary():
            return value.to_json()
        case np.ndarray():
            return [_plain(item) for item in value.tolist()]
        case tuple() | list():
            return [_plain(item) for item in value]
        case dict():
            return {key: _plain(item) for key, item in value.items()}
        case float():
            return significant(value)
        case _ if is_dataclass(value):
            return {field.name: _plain(getattr(value, field.name)) for field in fields(value)}
        case _:
            return value
