"""What the capacity sheet says: one content, which the writers only set.

Cells hold summaries, not printed numbers, so that a spreadsheet gets numbers and a page gets
``41.38(22) mm [40.95, 41.81]`` from the same content.
"""

from __future__ import annotations

from dataclasses import dataclass

from layout.quantity import Summary
from layout.record.model import Record
from layout.results import (
    AxisResult,
    Reconstructed,
    Results,
    SignWidthResult,
    ViewResult,
)
from layout.sheet.numbers import plain
from layout.sheet.prose import CAUTIONS, NOTATION, RELATIVE_SUPPORT, as_sentence, method, summary

Cell = str | Summary | None
Row = tuple[Cell, ...]


@dataclass(frozen=True)
class Table:
    """A table: the heads of its columns, and rows whose first cell says what the row is about.

    ``unit`` names the unit that all numbers of the table share; where it is empty each number carries its
    own.
    """

    title: str
    columns: tuple[str, ...]
    rows: tuple[Row, ...]
    unit: str = ""


@dataclass(frozen=True)
class Section:
    """A part of the sheet: tables first, then sentences."""

    id: str
    title: str
    tables: tuple[Table, ...] = ()
    sentences: tuple[str, ...] = ()


@dataclass(frozen=True)
class Content:
    """The whole sheet but its drawing."""

    name: str
    facts: tuple[tuple[str, str], ...]
    sections: tuple[Section, ...]
    provenance: str

    def section(self, name: str) -> Section | None:
        """Return the section with this id, or None if the results have nothing for it."""
        return next((section for section in self.sections if section.id == name), None)


def compose(record: Record, results: Results, record_sha256: str, decides: str | None) -> Content:
    """Compose the sheet.

    Parameters
    ----------
    record, results
        A record and what its measurement gave.
    record_sha256
        The hash of the record's file, by which a reader can tell which state of it was measured.
    decides
        The line that says what decides the order of the candidates; None without a ranking.
    """
    sections = [
        Section("summary", "In short", sentences=summary(results)),
        Section("warnings", "Warnings", sentences=tuple(as_sentence(one.text) for one in results.warnings)),
        *(_view(view, index) for index, view in enumerate(results.views)),
        _whole(results.reconstructed),
        _capacity(results),
        _ranking(results, decides),
        Section(
            "assumptions",
            "What is assumed",
            sentences=tuple(as_sentence(one.text) for one in results.assumptions),
        ),
        Section(
            "missing",
            "What could not be computed",
            sentences=tuple(as_sentence(f"{one.text} ({one.result})") for one in results.missing),
        ),
        Section("notation", "How to read the numbers", sentences=NOTATION),
        Section("method", "How it was computed", sentences=method(results)),
        Section("cautions", "What to keep in mind", sentences=CAUTIONS),
    ]
    return Content(
        name=record.name,
        facts=_facts(record),
        sections=tuple(section for section in sections if section.tables or section.sentences),
        provenance=(
            f"layout {results.version}; {results.draws} draws, seed {results.seed}; "
            f"record SHA-256 {record_sha256}"
        ),
    )


def _facts(record: Record) -> tuple[tuple[str, str], ...]:
    """Return who observed what, and where the photographs came from."""
    facts = [
        ("Findspot", record.findspot),
        ("Observer", record.observer),
        ("Date", record.date),
        ("Remarks", record.remarks),
    ]
    for photograph in record.photographs:
        facts += [
            ("Photograph", photograph.file),
            ("Credit", photograph.credit),
            ("Licence", photograph.licence),
            ("SHA-256", photograph.sha256 or ""),
        ]
    return tuple((label, text) for label, text in facts if text)


def _view(view: ViewResult, index: int) -> Section:
    """Return what one view measures."""
    rows: list[Row] = []
    if view.scale is not None:
        rows.append((f"scale at the face ({view.scale.model})", view.scale.mm_per_px.summary()))
    if view.preserved is not None:
        rows += [
            ("surviving width", view.preserved.width.summary()),
            ("surviving height", view.preserved.height.summary()),
            ("surviving area", view.preserved.area.summary()),
        ]
    if view.line_pitch is not None:
        rows.append(("line pitch", view.line_pitch.pitch.summary()))
        if view.line_pitch.drift is not None:
            rows.append(("growth of the pitch from line to line", view.line_pitch.drift.summary()))
    columns = tuple(
        (f"{column.left} to {column.right}", column.width.summary(), column.taper.summary())
        for column in view.columns
    )
    tables = (
        Table("Measurements", ("what", "measured"), tuple(rows)),
        Table("Columns", ("between", "width", "taper"), columns),
        Table("Rulings", ("ruling", "line number", "direction", "scatter"), _rulings(view)),
    )
    return Section(
        f"view-{index}", f"The surviving {view.face}", tuple(table for table in tables if table.rows)
    )


def _rulings(view: ViewResult) -> tuple[Row, ...]:
    """Return each ruling with the number of its line, its direction and how straight it is."""
    numbers = {} if view.line_pitch is None else view.line_pitch.index
    return tuple(
        (
            ruling.id,
            plain(numbers[ruling.id], "") if ruling.id in numbers else None,
            ruling.angle_deg.summary(),
            None if ruling.scatter_mm is None else plain(round(ruling.scatter_mm, 3), "mm"),
        )
        for ruling in view.rulings
    )


def _whole(whole: Reconstructed | None) -> Section:
    """Return the tablet as inferred, and what speaks for its axis."""
    if whole is None:
        return Section("whole", "")
    named = [
        ("width", whole.width),
        ("height", whole.height),
        ("area", whole.area),
        ("lost area", whole.lost_area),
        ("lost space", whole.lost_space),
    ]
    rows: list[Row] = [(name, quantity.summary()) for name, quantity in named if quantity is not None]
    if len(whole.lost_space_by_side) > 1:
        rows += [(f"lost on the {side}", space.summary()) for side, space in whole.lost_space_by_side.items()]
    if whole.margin is not None:
        rows.append(("margin", whole.margin.summary()))
    axes = (("vertical", whole.axis.vertical), ("horizontal", whole.axis.horizontal))
    tables = [Table("Reconstructed", ("what", "inferred"), tuple(rows))]
    tables += [_axis(name, axis) for name, axis in axes if axis is not None]
    return Section("whole", "The whole tablet as inferred", tuple(tables))


def _axis(name: str, axis: AxisResult) -> Table:
    """Return an axis and what each source of evidence says alone, with its share of the precision."""
    extent = "width" if name == "vertical" else "height"
    evidence = tuple(
        (f"{extent} by {source.kind} alone", source.width.summary(), plain(source.share, "1"))
        for source in axis.evidence
    )
    return Table(
        f"{name.capitalize()} axis of symmetry",
        ("evidence", "says", "share"),
        (
            ("position in the face frame", axis.position.summary(), None),
            ("turned by", axis.angle_deg.summary(), None),
            *evidence,
        ),
    )


def _capacity(results: Results) -> Section:
    """Return what the lost part held, and the widths and clearances that it rests on."""
    tables = []
    if results.capacity is not None:
        rows: list[Row] = []
        if results.capacity.sign_widths is not None:
            rows.append(("lost space", results.capacity.sign_widths.summary()))
        lines = results.capacity.lines
        rows += [
            (what, lost.summary())
            for what, lost in (("lines lost", lines.lost), ("lines on the whole face", lines.face))
            if lost is not None
        ]
        tables.append(Table("Capacity", ("what", "room for"), tuple(rows)))
    if results.sign_width is not None:
        tables.append(_sign_widths(results.sign_width))
    if results.clearance is not None:
        clearance = results.clearance
        rows = [
            *((f"column from {column.left}", column.ratio.summary()) for column in clearance.columns),
            ("typical of this scribe", clearance.typical.summary()),
            ("spread (sd of the logarithm)", clearance.spread.summary()),
        ]
        tables.append(
            Table("Clearance: column width over widest entry", ("column", "clearance"), tuple(rows))
        )
    return Section(
        "capacity", "Signs, clearance and capacity", tuple(table for table in tables if table.rows)
    )


def _sign_widths(widths: SignWidthResult) -> Table:
    """Return the widths of the kinds of sign: a full digit in mm, the others in full digits."""
    kinds = (
        ("digit of units only", widths.units_only),
        ("digit of tens only", widths.tens_only),
        ("blank place", widths.blank),
        ("mean sign of running text", widths.mean_sign),
    )
    full: tuple[Row, ...] = () if widths.full is None else (("full digit", widths.full.summary()),)
    heard = "1 entry" if widths.entries == 1 else f"{widths.entries} entries"
    return Table(
        f"Sign widths, from {heard} (full digit = 1)",
        ("sign", "width"),
        (*full, *((name, width.summary()) for name, width in kinds)),
    )


def _ranking(results: Results, decides: str | None) -> Section:
    """Return the candidates, best first, with the convention's plain count beside what is required."""
    rows = tuple(
        (
            row.name,
            None if row.plain_count is None else plain(row.plain_count, "sign widths"),
            None if row.required is None else row.required.summary(),
            None if row.predicted is None else row.predicted.summary(),
            None if row.probability_too_wide is None else plain(row.probability_too_wide, "1"),
            None if row.weight is None else plain(row.weight, "1"),
            row.verdict,
        )
        for row in results.ranking
    )
    if not rows:
        return Section("ranking", "")
    heads = (
        "candidate",
        "plain count",
        "required",
        "predicted",
        "probability too wide",
        "weight",
        "verdict",
    )
    contradicted = tuple(
        f"{row.name} contradicts the remains in line {', '.join(map(str, row.contradicted_lines))}."
        for row in results.ranking
        if row.contradicted_lines
    )
    return Section(
        "ranking",
        "Candidates for the lost columns",
        (Table("Best first, in sign widths", heads, rows, unit="sign widths"),),
        (*(() if decides is None else (decides,)), *contradicted, RELATIVE_SUPPORT),
    )
