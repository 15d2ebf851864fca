"""The record: what a person observed of one fragment, and nothing computed.

The attributes have the names of the file's keys; only ``from``, a word of Python's own, is ``from_``, and
``schema`` is ``schema_version``. Every field but the few without a default may be missing: ``None`` or an
empty tuple then says that nobody gave it, and whoever needs it assumes a value and says so.

Points are in pixels of the upright photograph, ``(x, y)``; lengths in mm; ``sd`` is a standard uncertainty.
"""

from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Field, PlainValidator

SCHEMA = 1
TABLET_EDGE = "edge"
"""What ``Entry.column`` holds where the column begins at the tablet's edge, in place of a ruling's id."""


LARGEST = 1e6
SMALLEST = 1e-6
"""No length, pixel or percentage is larger, nothing that is divided by is smaller: what lies beyond is a slip
of the keyboard, and would overflow where it is squared."""


def _is_length(value: object) -> bool:
    """Say whether a value is a number in range; ``True`` is not a number."""
    return isinstance(value, (int, float)) and not isinstance(value, bool) and abs(value) <= LARGEST


def _read_mark(value: Any) -> float | tuple[float, float]:  # noqa: ANN401 - whatever stands in the file
    """Return a mark's reading: one check for both forms, since a union of types would report two faults."""
    if _is_length(value):
        return float(value)
    if isinstance(value, (list, tuple)) and len(value) == 2 and all(_is_length(each) for each in value):
        return float(value[0]), float(value[1])
    message = f"needs a number of mm along a bar, or [X, Y] on a flat target, up to {LARGEST:.0f}"
    raise ValueError(message)


Number = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=-LARGEST, le=LARGEST)]
Positive = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=SMALLEST, le=LARGEST)]
NotNegative = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=0, le=LARGEST)]
Count = Annotated[int, Field(strict=True, ge=1, le=1_000_000)]
Index = Annotated[int, Field(strict=True, ge=0)]
Point = tuple[Number, Number]
Points = tuple[Point, ...]
Reading = Annotated[float | tuple[float, float], PlainValidator(_read_mark)]
Name = Annotated[str, Field(strict=True, min_length=1)]
Text = Annotated[str, Field(strict=True)]
Sha256 = Annotated[str, Field(strict=True, pattern=r"^[0-9a-f]{64}$")]

Face = Literal["obverse", "reverse", "upper edge", "lower edge", "left edge", "right edge"]
Edge = Literal["left", "right", "upper", "lower", "break"]


class _Part(BaseModel):
    """What all parts of a record share: immutable, and no key that is not known here."""

    # validators are built once, for the whole record, when the first one is read
    model_config = ConfigDict(frozen=True, extra="forbid", defer_build=True)


class Measured(_Part):
    """A length that somebody measured: mm and its standard uncertainty."""

    mm: Number
    sd: NotNegative


class FocalLength(_Part):
    """A focal length in pixels of the upright photograph, and its standard uncertainty."""

    px: Positive
    sd: Positive


class Photograph(_Part):
    """A photograph beside the record; ``size`` is (width, height) in pixels once it stands upright.

    ``focal_length`` is what the camera wrote into it, if the photograph was not cropped.
    """

    id: Name
    file: Name
    sha256: Sha256 | None = None
    size: tuple[Count, Count]
    of: Literal["object", "scan", "cast", "print"] = "object"
    focal_length: FocalLength | None = None
    credit: Text = ""
    licence: Text = ""


class Mark(_Part):
    """A division of a scale bar (``mm`` is a number) or a point of a flat target (``mm`` is ``(X, Y)``).

    ``sd_px`` is the standard uncertainty of one coordinate of its place, where a program found it.
    """

    bar: Name = "a"
    at: Point
    mm: Reading
    sd_px: Positive | None = None


class Known(_Part):
    """A length measured on the object itself: the scale, or a check of the scale."""

    from_: Point = Field(alias="from")
    to: Point
    mm: Positive
    sd: Positive
    source: Text = ""


class Scale(_Part):
    """What is known about the scale of a view.

    ``below_face`` is how far the bar lies below the inscribed face, ``distance`` the way from the lens to
    the plane of the bar, ``tilt_sd_deg`` how far the camera may be from square to the face, ``lens`` the
    name of a lens file.
    """

    marks: tuple[Mark, ...] = ()
    ppi: Positive | None = None
    known: tuple[Known, ...] = ()
    below_face: Measured | None = None
    distance: Measured | None = None
    tilt_sd_deg: NotNegative | None = None
    lens: Name | None = None


class OutlinePiece(_Part):
    """A piece of the fragment's contour: original edge, or the break; pieces follow in order around it."""

    edge: Edge
    state: Literal["sound", "abraded", "doubtful"] = "sound"
    points: Points = ()


class Ruling(_Part):
    """A boundary that the scribe drew or kept: vertical between columns, horizontal between lines."""

    id: Name
    runs: Literal["vertical", "horizontal"]
    kind: Literal["single", "double", "spacing", "writing"] = "single"
    points: Points = ()


class Entry(_Part):
    """A measured entry: its text and where it starts and ends.

    ``column`` is the id of the ruling at the column's left, or ``TABLET_EDGE``; ``line`` counts from 1.
    """

    text: Text
    kind: Literal["entry", "heading", "total"] = "entry"
    from_: Point = Field(alias="from")
    to: Point
    column: Name | None = None
    line: Count | None = None


class View(_Part):
    """One face as one photograph shows it, or the ``region`` (x, y, width, height) of one.

    ``pointing_px`` is the standard uncertainty of one traced point.
    """

    face: Face
    photograph: Name
    region: tuple[Number, Number, Positive, Positive] | None = None
    pointing_px: Positive | None = None
    scale: Scale = Field(default_factory=Scale)
    outline: tuple[OutlinePiece, ...] = ()
    rulings: tuple[Ruling, ...] = ()
    writing: tuple[Entry, ...] = ()


class Evidence(_Part):
    """What is known from elsewhere about the whole tablet."""

    about: Literal["width", "height"]
    mm: Positive
    sd: Positive
    source: Text = ""


class Lost(_Part):
    """On which sides the lost columns stood."""

    sides: tuple[Literal["left", "right"], ...] = ()


class CandidateColumn(_Part):
    """A proposed column: its entries line by line, or the ``rule`` that computes them from the series."""

    heading: Text = ""
    entries: tuple[Text, ...] = ()
    rule: Name | None = None
    remains: tuple[Text, ...] = ()


class Candidate(_Part):
    """A proposal for what stood in the lost columns; ``holds`` is what must be true between the columns."""

    name: Name
    columns: tuple[CandidateColumn, ...] = ()
    holds: Name | None = None


class Pool(_Part):
    """Columns of which every combination of so many (from, to) is a candidate."""

    columns: tuple[CandidateColumn, ...] = ()
    together: tuple[Count, Count] = (1, 3)


class Gap(_Part):
    """A gap in a line of running text, with what might be restored there; ``view`` counts from 0."""

    view: Index = 0
    line: Count | None = None
    from_: Point = Field(alias="from")
    to: Point
    restorations: tuple[Text, ...] = ()


class Record(_Part):
    """One fragment: photographs, what was traced on them, and what is proposed for the lost part.

    ``convexity`` is how far the face falls from its middle to its edge, ``asymmetry_percent`` the standard
    deviation of half-width against half-width, ``series`` the named runs of numbers, line by line.
    """

    schema_version: Literal[1] = Field(alias="schema")
    name: Name
    remarks: Text = ""
    observer: Text = ""
    date: Text = ""
    findspot: Text = ""
    photographs: tuple[Photograph, ...]
    views: tuple[View, ...]
    thickness: Measured | None = None
    convexity: Measured | None = None
    asymmetry_percent: NotNegative | None = None
    evidence: tuple[Evidence, ...] = ()
    lost: Lost = Field(default_factory=Lost)
    series: dict[Name, tuple[Text, ...]] = {}
    candidates: tuple[Candidate, ...] = ()
    pool: Pool = Field(default_factory=Pool)
    gaps: tuple[Gap, ...] = ()

    def photograph_of(self, view: View) -> Photograph:
        """Return the photograph that a view shows."""
        return next(photograph for photograph in self.photographs if photograph.id == view.photograph)
