"""What is sound in a record, what is missing for which result, and which photographs have changed."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from layout.errors import CallError, Fault, PhotographError
from layout.image.photograph import probe, sha256_of
from layout.lens import read_lens
from layout.notices import Missing
from layout.record.crossings import find_crossings, mend_outlines, pieces_of
from layout.record.model import Edge, Photograph, Record, Ruling, View

FACES = ("obverse", "reverse")
LEAST_EDGE_POINTS = 3


@dataclass(frozen=True)
class Check:
    """What a check of a record found.

    Attributes
    ----------
    sound
        What is there and as it should be, one sentence each.
    faults
        What should be looked at, though it hinders no measurement, each with its place.
    missing
        The results that cannot be given yet, and what to add for them.
    """

    sound: tuple[str, ...]
    faults: tuple[Fault, ...]
    missing: tuple[Missing, ...]

    @property
    def findings(self) -> int:
        """Return how many things there are to do."""
        return len(self.faults) + len(self.missing)

    def lines(self) -> list[str]:
        """Return the check as lines to print."""
        return [
            *(f"sound    {sentence}" for sentence in self.sound),
            *(f"look at  {fault}" for fault in self.faults),
            *(f"missing  {one.result}: {one.text}" for one in self.missing),
        ]


def check(record: Record, folder: str | Path) -> Check:
    """Check a record that was read, and the photographs beside it.

    Parameters
    ----------
    record
        A record; what is malformed was refused when it was read.
    folder
        The record's folder, from which its photographs are named.
    """
    sound: list[str] = []
    faults: list[Fault] = []
    missing: list[Missing] = []
    for number, photograph in enumerate(record.photographs):
        found = list(_photograph_faults(photograph, f"photographs[{number}]", Path(folder)))
        faults += found
        if not found:
            width, height = photograph.size
            sound.append(
                f"photographs[{number}]: {photograph.file} is the one traced, {width} x {height} pixels"
            )
    for result, needs in _needs(record):
        if needs:
            missing.append(Missing(result, f"needs {'; and '.join(needs)}"))
        else:
            sound.append(f"{result}: can be measured")
    faults += _lens_faults(record, Path(folder))
    faults += _outline_faults(record)
    return Check(tuple(sound), tuple(faults), tuple(missing))


def _photograph_faults(photograph: Photograph, place: str, folder: Path) -> Iterator[Fault]:
    """Say where a photograph is not the one that was traced."""
    path = folder / photograph.file
    try:
        size, sha256 = probe(path), sha256_of(path)
    except PhotographError as error:
        yield Fault(f"{place}.file", f"{photograph.file}: {error.message}")
        return
    if size != photograph.size:
        traced = "{} x {}".format(*photograph.size)
        text = f"{path.name} has {size[0]} x {size[1]} pixels, not {traced}; put back the one that was traced"
        yield Fault(f"{place}.size", text)
    if photograph.sha256 is None:
        yield Fault(f"{place}.sha256", f"not recorded; {path.name} has {sha256}")
    elif sha256 != photograph.sha256:
        text = f"{path.name} has changed since it was traced: its SHA-256 is {sha256}; put the old one back"
        yield Fault(f"{place}.sha256", text)


def _lens_faults(record: Record, folder: Path) -> Iterator[Fault]:
    """Say where a lens file cannot be read or belongs to other photographs."""
    for number, view in enumerate(record.views):
        if view.scale.lens is None:
            continue
        try:
            read_lens(folder / view.scale.lens).for_size(record.photograph_of(view).size)
        except CallError as error:
            yield Fault(f"views[{number}].scale.lens", f"{view.scale.lens}: {error.message}")


def _has_scale(view: View) -> bool:
    """Say whether a view has one source of scale or more."""
    marks = Counter(mark.bar for mark in view.scale.marks)
    return view.scale.ppi is not None or view.scale.known != () or max(marks.values(), default=0) >= 2


def _outline_points(view: View) -> int:
    """Count the points of a view's outline."""
    return sum(len(piece.points) for piece in view.outline)


def _lines(view: View) -> list[Ruling]:
    """Return the rulings through which a line can be laid."""
    return [ruling for ruling in view.rulings if len(set(ruling.points)) >= 2]


def _count(view: View, runs: str) -> int:
    """Count the rulings of one direction through which a line can be laid."""
    return sum(ruling.runs == runs for ruling in _lines(view))


def _keeps(record: Record, *edges: Edge) -> bool:
    """Say whether a piece of one of these edges survives on a face."""
    pieces = (piece for view in record.views for piece in view.outline if view.face in FACES)
    return any(piece.edge in edges and len(piece.points) >= LEAST_EDGE_POINTS for piece in pieces)


def _width_is_known(record: Record) -> bool:
    """Say whether evidence from elsewhere bounds the width."""
    return any(evidence.about == "width" for evidence in record.evidence)


# What each result needs of the record: a test, and what to add. Without a scale there are no millimetres, but
# capacity and ranking are ratios and do without.
OfView = tuple[Callable[[View], bool], str]
OfRecord = tuple[Callable[[Record], bool], str]

MARKS: OfView = (_has_scale, "two marks or more on one bar, a ppi, or a known length")
SCALE: OfView = (_has_scale, "a scale")
OUTLINE: OfView = (lambda view: _outline_points(view) >= 3, "an outline of three points or more")
RULING: OfView = (lambda view: _lines(view) != [], "a ruling of two points or more")
COLUMNS: OfView = (lambda view: _count(view, "vertical") >= 2, "two vertical rulings of two points or more")
LINES: OfView = (lambda view: _count(view, "horizontal") >= 2, "two horizontal rulings of two points or more")

A_SCALE: OfRecord = (lambda record: any(map(_has_scale, record.views)), SCALE[1])
A_SIDE: OfRecord = (
    lambda record: _keeps(record, "left", "right"),
    "a piece of the left or right edge, three points or more",
)
AN_END: OfRecord = (
    lambda record: _keeps(record, "upper", "lower"),
    "a piece of the upper or lower edge, three points or more",
)
LOST_SIDE: OfRecord = (lambda record: record.lost.sides != (), "the side that is lost, in lost.sides")
BOUND: OfRecord = (
    lambda record: len(record.lost.sides) < 2 or _width_is_known(record),
    "evidence about the width, since both sides are lost",
)
BOUNDARY: OfRecord = (
    lambda record: any(_count(view, "vertical") for view in record.views),
    "a vertical ruling of two points or more, the one nearest to the break",
)
ROWS: OfRecord = (lambda record: any(LINES[0](view) for view in record.views), LINES[1])
CANDIDATES: OfRecord = (
    lambda record: any(one.columns for one in record.candidates) or record.pool.columns != (),
    "candidates with columns, or a pool",
)

OF_VIEW: dict[str, tuple[OfView, ...]] = {
    "scale": (MARKS,),
    "preserved": (SCALE, OUTLINE),
}
OF_FACE: dict[str, tuple[OfView, ...]] = {
    "rulings": (SCALE, RULING),
    "columns": (SCALE, COLUMNS),
    "line_pitch": (SCALE, LINES),
}
LOST_SPACE = (A_SIDE, LOST_SIDE, BOUND, BOUNDARY)
OF_TABLET: dict[str, tuple[OfRecord, ...]] = {
    "reconstructed.width": (A_SCALE, A_SIDE),
    "reconstructed.height": (A_SCALE, AN_END),
    "reconstructed.lost_space": (A_SCALE, *LOST_SPACE),
    "capacity.sign_widths": LOST_SPACE,
    "capacity.lines": (AN_END, ROWS),
    "ranking": (*LOST_SPACE, CANDIDATES),
}


def _needs(record: Record) -> Iterator[tuple[str, list[str]]]:
    """Yield each result, in the order of the results file, with what it still needs."""
    for number, view in enumerate(record.views):
        # an edge has neither columns nor lines of its own
        of_view = OF_VIEW | OF_FACE if view.face in FACES else OF_VIEW
        for result, of_this in of_view.items():
            yield f"views[{number}].{result}", [text for is_met, text in of_this if not is_met(view)]
    for result, of_tablet in OF_TABLET.items():
        yield result, [text for is_met, text in of_tablet if not is_met(record)]


def _outline_faults(record: Record) -> Iterator[Fault]:
    """Report tiny crossings, which are mended, and pieces that do not follow one another."""
    mended, caveats = mend_outlines(record)
    for caveat in caveats:
        yield Fault("", caveat.text)
    for number, view in enumerate(mended.views):
        if "break" not in {piece.edge for piece in view.outline}:
            # still open: nothing can be said about its order
            continue
        around = np.vstack([piece for piece in pieces_of(view) if len(piece)] or [np.empty((0, 2))])
        crossings = find_crossings([np.vstack([around, around[:1]])])
        if crossings:
            x, y = crossings[0].at
            text = f"its pieces, joined in order, cross at ({x:.1f}, {y:.1f})"
            mend = "list them as they follow around the fragment, all traced the same way round"
            yield Fault(f"views[{number}].outline", f"{text}; {mend}")
