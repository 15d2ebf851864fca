"""What the parts of a record must agree on: names, places, marks and outlines.

The model sees one value at a time; here are the rules that tie several together. Each
function yields the faults of one part, so that a reader learns of all of them at once.
"""

from __future__ import annotations

import itertools
from collections import Counter, defaultdict
from collections.abc import Iterable, Iterator
from pathlib import PurePosixPath, PureWindowsPath

from layout.errors import Fault
from layout.record.crossings import find_crossings, mend_crossings, pieces_of, tiny_px
from layout.record.faults import shown
from layout.record.model import (
    TABLET_EDGE,
    CandidateColumn,
    Entry,
    Gap,
    Known,
    Mark,
    Photograph,
    Point,
    Record,
    View,
)

MOST_OUTLINE_POINTS = 20_000
MARK_DECIMALS = 2
READING_DECIMALS = 6

Placed = tuple[str, Point]
Box = tuple[float, float, float, float]
TwoEnded = Iterable[Known | Entry | Gap]


def inconsistencies(record: Record) -> list[Fault]:
    """Return what in a well-formed record contradicts itself, in the order of the file."""
    return [
        *_presence(record),
        *_photographs(record.photographs),
        *itertools.chain.from_iterable(_view(record, number) for number in range(len(record.views))),
        *_repeated("lost.sides", [("", side) for side in record.lost.sides], "side"),
        *_proposals(record),
        *_gaps(record),
    ]


def _presence(record: Record) -> Iterator[Fault]:
    """Hold that there is a photograph and a view."""
    for part, name in ((record.photographs, "photograph"), (record.views, "view")):
        if not part:
            yield Fault(f"{name}s", f"needs one {name} or more, has none")


def _photographs(photographs: tuple[Photograph, ...]) -> Iterator[Fault]:
    """Hold that photographs have names of their own and lie beside the record."""
    places = [(f"photographs[{k}].id", each.id) for k, each in enumerate(photographs)]
    yield from _repeated("", places, "id")
    for k, each in enumerate(photographs):
        yield from _beside_the_record(f"photographs[{k}].file", each.file)


def _view(record: Record, number: int) -> Iterator[Fault]:
    """Return the faults of one view."""
    view, place = record.views[number], f"views[{number}]"
    photograph = _photograph_of(record, view)
    if photograph is None:
        known = _listed(each.id for each in record.photographs)
        yield Fault(
            f"{place}.photograph", f"no photograph is called {shown(view.photograph)}; there are: {known}"
        )
    else:
        yield from _points(view, photograph, place)
    if view.scale.lens is not None:
        yield from _beside_the_record(f"{place}.scale.lens", view.scale.lens)
    yield from _marks(view.scale.marks, f"{place}.scale.marks")
    yield from _lengths(view.scale.known, f"{place}.scale.known")
    yield from _outline(view, place)
    yield from _rulings(view, place)
    yield from _lengths(view.writing, f"{place}.writing")


def _points(view: View, photograph: Photograph, place: str) -> Iterator[Fault]:
    """Hold that points lie on the photograph, and what was traced on the face in the view's region."""
    whole, on_photograph = _whole(photograph), _name_of(photograph)
    if view.region is None:
        yield from _outside(_traced(view, place), whole, on_photograph)
    else:
        x, y, region_width, region_height = view.region
        if x < 0 or y < 0 or x + region_width > whole[2] or y + region_height > whole[3]:
            yield Fault(
                f"{place}.region", f"{list(view.region)} reaches beyond {on_photograph}; make it smaller"
            )
        region = f"the view's region {list(view.region)}; move the point or widen the region"
        yield from _outside(_traced(view, place), view.region, region)
    # a bar, and a length that was measured on the object, may lie beside the region
    yield from _outside(_scale_points(view, place), whole, on_photograph)


def _listed(names: Iterable[str]) -> str:
    """List names as they are, but for those that no terminal should be sent."""
    return ", ".join(name if name.isprintable() else shown(name) for name in names)


def _photograph_of(record: Record, view: View) -> Photograph | None:
    """Return the photograph that a view shows, if the record has it."""
    return next((each for each in record.photographs if each.id == view.photograph), None)


def _whole(photograph: Photograph) -> Box:
    """Return the box of a whole photograph."""
    return 0.0, 0.0, float(photograph.size[0]), float(photograph.size[1])


def _name_of(photograph: Photograph) -> str:
    """Name a photograph by its size."""
    return f"the photograph ({photograph.size[0]} x {photograph.size[1]})"


def _outside(points: Iterable[Placed], box: Box, name: str) -> Iterator[Fault]:
    """Name the points outside; pixel centres are whole numbers, so that a box begins half a pixel before."""
    left, top, width, height = box
    for place, (x, y) in points:
        if not (left - 0.5 <= x <= left + width - 0.5 and top - 0.5 <= y <= top + height - 0.5):
            yield Fault(place, f"({x}, {y}) lies outside {name}")


def _traced(view: View, place: str) -> Iterator[Placed]:
    """Return the points that were traced on the face, each with its place."""
    for part in ("outline", "rulings"):
        for k, traced in enumerate(getattr(view, part)):
            for j, point in enumerate(traced.points):
                yield f"{place}.{part}[{k}].points[{j}]", point
    yield from _ends(view.writing, f"{place}.writing")


def _scale_points(view: View, place: str) -> Iterator[Placed]:
    """Return the points that give the scale, each with its place."""
    for k, mark in enumerate(view.scale.marks):
        yield f"{place}.scale.marks[{k}].at", mark.at
    yield from _ends(view.scale.known, f"{place}.scale.known")


def _ends(lengths: TwoEnded, place: str) -> Iterator[Placed]:
    """Return both ends of what has two."""
    for k, each in enumerate(lengths):
        yield f"{place}[{k}].from", each.from_
        yield f"{place}[{k}].to", each.to


def _lengths(lengths: TwoEnded, place: str) -> Iterator[Fault]:
    """Hold that what has two ends has a length."""
    for k, each in enumerate(lengths):
        if each.from_ == each.to:
            yield Fault(f"{place}[{k}]", f"begins and ends at {each.from_}; set 'to' to the other end")


def _marks(marks: tuple[Mark, ...], place: str) -> Iterator[Fault]:
    """Hold that marks of one bar stand apart, read apart, and are all of a bar or all of a target."""
    bars: dict[str, list[int]] = defaultdict(list)
    for k, mark in enumerate(marks):
        bars[mark.bar].append(k)
    for bar, members in bars.items():
        if len({isinstance(marks[k].mm, tuple) for k in members}) > 1:
            yield Fault(
                f"{place}[{members[0]}].mm", f"bar {bar!r} mixes numbers and [X, Y]; give each its own name"
            )
            continue
        for k, first in _repeats([marks[k].at for k in members], MARK_DECIMALS):
            text = f"stands where {place}[{members[first]}] of bar {bar!r} stands; move or delete one"
            yield Fault(f"{place}[{members[k]}].at", text)
        for k, first in _repeats([_plane(marks[k].mm) for k in members], READING_DECIMALS):
            text = f"reads what {place}[{members[first]}] of bar {bar!r} reads; correct or delete one"
            yield Fault(f"{place}[{members[k]}].mm", text)


def _plane(mm: float | Point) -> Point:
    """Return a reading as a point of the plane."""
    return mm if isinstance(mm, tuple) else (mm, 0.0)


def _repeats(points: list[Point], decimals: int) -> Iterator[tuple[int, int]]:
    """Yield each point that an earlier one equals to so many decimals, and the earlier one."""
    seen: dict[Point, int] = {}
    for k, (x, y) in enumerate(points):
        first = seen.setdefault((round(x, decimals), round(y, decimals)), k)
        if first != k:
            yield k, first


def _outline(view: View, place: str) -> Iterator[Fault]:
    """Hold that an outline does not cross itself; what is tiny is mended later and no fault."""
    count = sum(len(piece.points) for piece in view.outline)
    if count > MOST_OUTLINE_POINTS:
        yield Fault(
            f"{place}.outline", f"needs {MOST_OUTLINE_POINTS} points or fewer, has {count}; thin them out"
        )
        return
    pieces, _ = mend_crossings(pieces_of(view), tiny_px(view))
    for crossing in find_crossings(pieces):
        (i, a), (j, b) = crossing.first, crossing.second
        at = f"({crossing.at[0]:.1f}, {crossing.at[1]:.1f})"
        text = f"the outline crosses itself at {at}, behind outline[{i}].points[{a}]; retrace one of the two"
        yield Fault(f"{place}.outline[{j}].points[{b}]", text)


def _rulings(view: View, place: str) -> Iterator[Fault]:
    """Hold that rulings have names of their own, and that writing refers to them."""
    yield from _repeated(
        "", [(f"{place}.rulings[{k}].id", each.id) for k, each in enumerate(view.rulings)], "id"
    )
    for k, ruling in enumerate(view.rulings):
        if ruling.id == TABLET_EDGE:
            yield Fault(
                f"{place}.rulings[{k}].id", f"{TABLET_EDGE!r} means the tablet's edge; take another id"
            )
    columns = [ruling.id for ruling in view.rulings if ruling.runs == "vertical"]
    for k, entry in enumerate(view.writing):
        if entry.column not in (None, TABLET_EDGE, *columns):
            known = _listed([*columns, TABLET_EDGE])
            text = f"no vertical ruling is called {shown(entry.column)}; there are: {known}"
            yield Fault(f"{place}.writing[{k}].column", text)


def _proposals(record: Record) -> Iterator[Fault]:
    """Hold that candidates have names of their own, and a pool its numbers in order."""
    places = [(f"candidates[{k}].name", each.name) for k, each in enumerate(record.candidates)]
    yield from _repeated("", places, "name")
    for k, candidate in enumerate(record.candidates):
        yield from _columns(candidate.columns, f"candidates[{k}].columns")
    yield from _columns(record.pool.columns, "pool.columns")
    fewest, most = record.pool.together
    if fewest > most:
        yield Fault("pool.together", f"needs [fewest, most], has [{fewest}, {most}]; swap them")


def _columns(columns: tuple[CandidateColumn, ...], place: str) -> Iterator[Fault]:
    """Hold that a column is given or computed, not both."""
    for k, column in enumerate(columns):
        if column.rule is not None and column.entries:
            yield Fault(f"{place}[{k}]", "has both 'entries' and 'rule'; keep one of them")


def _gaps(record: Record) -> Iterator[Fault]:
    """Hold that a gap stands in a view of this record, on its photograph."""
    yield from _lengths(record.gaps, "gaps")
    for k, gap in enumerate(record.gaps):
        if gap.view >= len(record.views):
            yield Fault(f"gaps[{k}].view", f"needs a view from 0 to {len(record.views) - 1}, has {gap.view}")
        elif photograph := _photograph_of(record, record.views[gap.view]):
            ends = ((f"gaps[{k}].from", gap.from_), (f"gaps[{k}].to", gap.to))
            yield from _outside(ends, _whole(photograph), _name_of(photograph))


def _repeated(place: str, named: list[tuple[str, str]], what: str) -> Iterator[Fault]:
    """Name what stands twice where each may stand once."""
    counts = Counter(name for _, name in named)
    for name, count in counts.items():
        if count > 1:
            last = [where for where, each in named if each == name][-1]
            yield Fault(last or place, f"the {what} {shown(name)} stands {count} times; each needs its own")


def _beside_the_record(place: str, file: str) -> Iterator[Fault]:
    """Hold that a file is named relative to the record and does not leave its folder."""
    posix, windows = PurePosixPath(file), PureWindowsPath(file)
    leaves = posix.is_absolute() or windows.drive or ".." in windows.parts
    if leaves or not file.isprintable():
        yield Fault(place, f"needs a file beside the record, named from its folder, has {shown(file)}")
