"""measure(): from a record to its results, the steps top to bottom.

Each step draws with a generator of its own, seeded by the seed and fixed numbers for the step and the view, so
that a change in one step does not shuffle another.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from layout import __version__
from layout.agreement import compare_faces
from layout.candidates.ranking import Ranked, rank
from layout.candidates.width import Proposal, Space
from layout.clearance import Clearance, find_widest, learn_clearance
from layout.errors import CallError
from layout.lens import Lens
from layout.notices import Assumption, Caveat, Missing, Notice, warn
from layout.quantity import Floats, Quantity
from layout.record.crossings import mend_outlines
from layout.record.model import Record
from layout.results import (
    SCHEMA,
    Capacity,
    ClearanceResult,
    ColumnClearance,
    LinesResult,
    RankingRow,
    Results,
    SignWidthResult,
)
from layout.sign_widths import MeasuredEntries, SignWidths, expect_full_digit, fit_sign_widths
from layout.signs import SignCounts, count_signs
from layout.views import MeasuredView, measure_view, view_result
from layout.whole import Whole, reconstruct

SCALE, LINES, PITCH, EXTENT, OUTLINE, SIGNS, CLEARANCE, RANKING = range(8)
LEAST_DRAWS, MOST_DRAWS = 100, 1_000_000


def measure(
    record: Record, draws: int = 10_000, seed: int = 0, *, lenses: Mapping[str, Lens] | None = None
) -> Results:
    """Measure a record.

    Parameters
    ----------
    record
        As read; incomplete is welcome: what cannot be computed is None and named in ``missing``.
    draws
        How many joint draws, 100 to 1,000,000.
    seed
        Of all random numbers, 0 or more: the same record, seed and versions give the same results.
    lenses
        The lens files that views name, by their names: ``read_lenses(record, folder)``.

    Raises
    ------
    CallError
        If draws or seed are out of range, or a lens does not belong to its photograph.
    """
    if not LEAST_DRAWS <= draws <= MOST_DRAWS:
        message = f"needs {LEAST_DRAWS} to {MOST_DRAWS} draws, has {draws}"
        raise CallError(message)
    if seed < 0:
        message = f"needs a seed of 0 or more, has {seed}"
        raise CallError(message)
    record, mended = mend_outlines(record)
    notices: list[Notice] = [*mended, *_left_alone(record)]
    views = []
    for index, view in enumerate(record.views):
        steps = [np.random.default_rng([seed, step, index]) for step in (SCALE, LINES, PITCH, EXTENT)]
        views.append(measure_view(record, view, draws, steps, lenses or {}))
        notices += _placed(views[-1].notices, index)
    notices += compare_faces(views)
    main = _main_view(views)
    whole, note = reconstruct(record, views[main], draws, np.random.default_rng([seed, OUTLINE, main]))
    notices += note
    writing = read_writing(views[main], np.random.default_rng([seed, SIGNS, main]))
    notices += writing.widths.notices
    notices += _placed(writing.faults, main)
    clearance = _learn(views[main], writing, np.random.default_rng([seed, CLEARANCE, main]))
    notices += clearance.notices
    ranking, note = _rank(record, whole, writing, clearance, np.random.default_rng([seed, RANKING, main]))
    notices += note
    shown = []
    for index, measured in enumerate(views):
        result, missing = view_result(measured)
        shown.append(result)
        notices += _placed(missing, index)
    known = views[main].scale.known
    reconstructed = None if whole is None else whole.reconstructed
    return Results(
        schema=SCHEMA,
        name=record.name,
        version=__version__,
        draws=draws,
        seed=seed,
        views=tuple(shown),
        reconstructed=reconstructed if known else None,
        sign_width=_sign_width_result(writing.widths, known=known),
        clearance=_clearance_result(views[main], writing, clearance),
        capacity=_capacity(views[main], whole, writing.widths),
        ranking=ranking,
        assumptions=tuple(dict.fromkeys(n for n in notices if isinstance(n, Assumption))),
        warnings=tuple(dict.fromkeys(n for n in notices if isinstance(n, Caveat))),
        missing=tuple(dict.fromkeys(n for n in notices if isinstance(n, Missing))),
    )


def _placed(notices: tuple[Notice, ...] | list[Missing], index: int) -> list[Notice]:
    """Name what is missing in a view by the view's place."""
    return [
        replace(note, result=f"views[{index}].{note.result}") if isinstance(note, Missing) else note
        for note in notices
    ]


def _left_alone(record: Record) -> list[Notice]:
    """Warn of what a record holds that no step uses."""
    notes: list[Notice] = []
    if record.convexity is not None:
        notes.append(warn("surface.flat"))
    if record.evidence:
        notes.append(
            warn("evidence.unused", sources=", ".join(item.source or item.about for item in record.evidence))
        )
    columns = [column for candidate in record.candidates for column in candidate.columns]
    if any(any(column.remains) for column in columns):
        notes.append(warn("ranking.remains"))
    if record.pool.columns or record.gaps:
        notes.append(warn("ranking.pool"))
    return notes


def _main_view(views: list[MeasuredView]) -> int:
    """Return which view the tablet is reconstructed from: the obverse with an outline, or the first."""
    order = sorted(
        range(len(views)),
        key=lambda index: (views[index].polygon is None, views[index].view.face != "obverse"),
    )
    return order[0]


@dataclass(frozen=True, eq=False)
class Writing:
    """The entries of a view whose signs can be counted, by column, and the widths of signs from them."""

    by_column: dict[str, list[SignCounts]]
    widths: SignWidths
    faults: tuple[Missing, ...]


def read_writing(measured: MeasuredView, rng: np.random.Generator) -> Writing:
    """Count the signs of a view's entries and fit the widths of signs to their extents."""
    counts, ends, faults = [], [], []
    by_column: dict[str, list[SignCounts]] = {}
    for index, entry in enumerate(measured.view.writing):
        try:
            count = count_signs(entry.text)
        except CallError as error:
            faults.append(Missing(f"writing[{index}]", error.message))
            continue
        counts.append(count)
        ends.append((entry.from_, entry.to))
        if entry.kind == "entry" and entry.column is not None:
            by_column.setdefault(entry.column, []).append(count)
    scale = measured.scale
    spans = np.array(ends).reshape(-1, 2, 2) * scale.face.nominal_mm_per_px
    entries = MeasuredEntries(
        counts=np.array(counts, dtype=np.float64).reshape(-1, len(SignCounts._fields)),
        lengths=np.hypot(*(spans[:, 1] - spans[:, 0]).T),
        pointing=np.full(len(counts), measured.pointing_mm),
    )
    pitch = None if measured.pitch is None else float(measured.pitch.pitch.mean())
    prior = expect_full_digit(pitch, scaled=scale.known)
    ratio = measured.mapped.face.local(np.zeros(2))
    return Writing(by_column, fit_sign_widths(entries, prior, ratio, rng), tuple(faults))


def _columns_with_entries(measured: MeasuredView, writing: Writing) -> list[tuple[str, Floats, Floats]]:
    """Return the surviving columns that hold signs: left boundary, width, and what the widest entry needs."""
    full = writing.widths.full
    if full is None:
        return []
    found = []
    for column in measured.columns:
        entries = [count for count in writing.by_column.get(column.left.id, []) if sum(count)]
        if entries:
            found.append((column.left.id, column.width, find_widest(entries, writing.widths) * full))
    return found


def _learn(measured: MeasuredView, writing: Writing, rng: np.random.Generator) -> Clearance:
    """Learn the scribe's clearance from the surviving columns."""
    columns = _columns_with_entries(measured, writing)
    none = np.empty((len(writing.widths.ratios), 0))
    widths = np.stack([width for _, width, _ in columns]).T if columns else none
    widest = np.stack([need for _, _, need in columns]).T if columns else none
    return learn_clearance(np.maximum(widths, 1e-6), widest, rng)


def _rank(
    record: Record, whole: Whole | None, writing: Writing, clearance: Clearance, rng: np.random.Generator
) -> tuple[tuple[RankingRow, ...], list[Notice]]:
    """Rank the record's candidates against the lost space."""
    if not record.candidates:
        return (), [Missing("ranking", "needs candidates")]
    full = writing.widths.full
    if whole is None or whole.lost_space is None or full is None:
        return (), [Missing("ranking", "needs the lost space and a sign width")]
    proposals = [
        Proposal(candidate.name, tuple(column.entries for column in candidate.columns))
        for candidate in record.candidates
    ]
    space = Space(whole.lost_space, full, clearance.mu, clearance.tau)
    ranking = rank(proposals, space, whole.width, writing.widths, rng)
    return tuple(_row(row) for row in ranking.rows), list(ranking.notices)


def _row(row: Ranked) -> RankingRow:
    """Return one candidate as the results show it."""
    width = row.width
    return RankingRow(
        name=row.name,
        plain_count=None if width is None else width.plain_count,
        required=None if width is None else Quantity("sign widths", width.required),
        predicted=None if row.predicted is None else Quantity("sign widths", row.predicted),
        widest_line=() if width is None else width.widest_line,
        probability_too_wide=row.probability_too_wide,
        weight=row.weight,
        verdict=row.verdict,
        contradicted_lines=(),
    )


def _sign_width_result(widths: SignWidths, *, known: bool) -> SignWidthResult:
    """Return the widths of signs as the results show them."""
    units, tens, blank, mean_sign = (Quantity("1", ratio) for ratio in widths.ratios.T[1:].copy())
    full = None if widths.full is None or not known else Quantity("mm", widths.full)
    return SignWidthResult(full, units, tens, blank, mean_sign, widths.entries)


def _clearance_result(measured: MeasuredView, writing: Writing, clearance: Clearance) -> ClearanceResult:
    """Return the clearance as the results show it."""
    names = [name for name, _, _ in _columns_with_entries(measured, writing)]
    return ClearanceResult(
        columns=tuple(
            ColumnClearance(name, Quantity("1", ratio.copy()))
            for name, ratio in zip(names, clearance.ratios.T, strict=True)
        ),
        typical=Quantity("1", clearance.typical),
        spread=Quantity("1", clearance.tau),
    )


def _capacity(measured: MeasuredView, whole: Whole | None, widths: SignWidths) -> Capacity | None:
    """Return the lost space in sign widths, and heights in lines."""
    if whole is None:
        return None
    across = None
    if whole.lost_space is not None and widths.full is not None:
        across = Quantity("sign widths", whole.lost_space / widths.full)
    return Capacity(across, _lines(measured, whole))


def _lines(measured: MeasuredView, whole: Whole) -> LinesResult:
    """Return the whole height and the lost height in lines of this pitch."""
    height = whole.reconstructed.height
    if measured.pitch_mm is None or height is None or whole.lost_height is None:
        return LinesResult(None, None)
    return LinesResult(
        lost=Quantity("lines", whole.lost_height / measured.pitch_mm),
        face=Quantity("lines", height.draws / measured.pitch_mm),
    )
