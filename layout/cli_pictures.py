"""The commands that look into photographs: ticks, target, lens, rectify."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from layout.console import emit, say, waiting
from layout.errors import CallError
from layout.files import write_whole

if TYPE_CHECKING:
    from layout.image.target import FoundMark
    from layout.image.ticks import Divisions

LENS_ENDING = ".lens.json"

PhotoFile = Annotated[Path, typer.Argument(metavar="PHOTO", help="JPEG, PNG, TIFF", readable=False)]
PhotoFiles = Annotated[list[Path], typer.Argument(metavar="PHOTO...", help="JPEG, PNG, TIFF", readable=False)]
RecordFile = Annotated[
    Path, typer.Argument(metavar="RECORD", help="a record, NAME.fragment.json", readable=False)
]


def ticks(
    photograph: PhotoFile,
    from_: Annotated[
        str | None, typer.Option("--from", metavar="X,Y", help="a point on the bar, roughly")
    ] = None,
    to: Annotated[str | None, typer.Option("--to", metavar="X,Y", help="another, past the divisions")] = None,
    step: Annotated[float | None, typer.Option(help="mm from one division to the next [1]")] = None,
    first: Annotated[float, typer.Option(help="what the division nearest to --from reads, mm")] = 0.0,
    bar: Annotated[str, typer.Option(help="the bar's name in the record")] = "a",
    printed: Annotated[
        str | None, typer.Option(metavar="W,H", help="the card's check lengths as measured, mm [100,60]")
    ] = None,
    as_json: Annotated[bool, typer.Option("--json", help="print the marks as a record holds them")] = False,
) -> None:
    """Find the divisions of a bar between two rough points.

    Without points, the scale card that 'layout target' makes is looked for.
    """
    from layout.image.card import CHECK_MM, HEIGHT
    from layout.image.photograph import read_photograph
    from layout.image.target import find_card
    from layout.image.ticks import find_divisions

    if (from_ is None) != (to is None):
        message = "needs both --from and --to, or neither to look for the scale card"
        raise CallError(message)
    lengths = None if printed is None else _place(printed, "--printed")
    ends = None if from_ is None or to is None else (_place(from_, "--from"), _place(to, "--to"))
    with waiting("reading the photograph"):
        pixels = read_photograph(photograph)
        try:
            if ends is None:
                corners = find_card(pixels, printed_mm=(CHECK_MM, HEIGHT) if lengths is None else lengths)
            else:
                found = find_divisions(pixels, *ends, step=1.0 if step is None else step, first=first)
        except CallError as error:
            raise CallError(error.message, file=photograph) from None
    if ends is None:
        if not corners:
            message = "shows no scale card; point at a bar with --from X,Y --to X,Y"
            raise CallError(message, file=photograph)
        marks, text = _card_marks(corners), _card_text(corners)
    else:
        marks, text = _bar_marks(found, bar), _bar_text(found)
        if step is None and found.kind == "blocks":
            say(
                f"{photograph}: blocks are taken to be 1 mm wide; give --step 5 or --step 10 if they are wider"
            )
    emit(json.dumps(marks, ensure_ascii=False, indent=2) + "\n" if as_json else text)


def _place(text: str, option: str) -> tuple[float, float]:
    """Return two numbers that were typed with a comma between them."""
    try:
        x, y = (float(part) for part in text.split(","))
    except ValueError:
        message = f"{option}: needs two numbers, as in 512,3720.5; has {text!r}"
        raise CallError(message) from None
    return x, y


def _mark(bar: str, at: tuple[float, float], mm: Any, sd_px: float) -> dict[str, Any]:  # noqa: ANN401 - either form
    """Return a mark as a record holds it."""
    return {"bar": bar, "at": [round(at[0], 3), round(at[1], 3)], "mm": mm, "sd_px": round(sd_px, 3)}


def _bar_marks(found: Divisions, bar: str) -> list[dict[str, Any]]:
    """Return the divisions as marks."""
    return [_mark(bar, one.at, round(one.mm, 6), one.sd_px) for one in found.marks]


def _bar_text(found: Divisions) -> str:
    """Return the divisions as a person reads them."""
    first, last = found.marks[0].mm, found.marks[-1].mm
    lines = [
        f"{found.kind}, {found.step:g} mm apart: {len(found.marks)} seen from {first:g} to {last:g} mm",
        f"pitch {found.pitch_px:.3f} px, scatter {found.scatter_px:.3f} px, "
        f"here {found.step / found.pitch_px:.6f} mm per px",
    ]
    if found.missing:
        lines.append("not seen: " + ", ".join(f"{mm:g}" for mm in found.missing) + " mm")
    if found.kind == "blocks":
        side = "dark" if found.spread_px > 0 else "bright"
        lines.append(f"{side} blocks came out {abs(found.spread_px):.2f} px too wide; the marks allow for it")
    lines.append(f"{'mm':>8} {'x':>10} {'y':>10} {'sd px':>7}")
    lines += [f"{one.mm:8g} {one.at[0]:10.2f} {one.at[1]:10.2f} {one.sd_px:7.3f}" for one in found.marks]
    return "\n".join(lines) + "\n"


def _card_marks(corners: list[FoundMark]) -> list[dict[str, Any]]:
    """Return the corners of the card's markers as marks of a flat target."""
    return [_mark("card", one.at_px, [round(mm, 6) for mm in one.mm], one.sd_px) for one in corners]


def _card_text(corners: list[FoundMark]) -> str:
    """Return the card's corners as a person reads them."""
    markers = len({one.marker for one in corners})
    lines = [
        f"scale card: {markers} of 4 markers seen",
        f"{'X mm':>8} {'Y mm':>8} {'x':>10} {'y':>10} {'sd px':>7}",
    ]
    lines += [
        f"{one.mm[0]:8.2f} {one.mm[1]:8.2f} {one.at_px[0]:10.2f} {one.at_px[1]:10.2f} {one.sd_px:7.3f}"
        for one in corners
    ]
    return "\n".join(lines) + "\n"


def target(
    file: Annotated[
        Path, typer.Option("--output", "-o", metavar="FILE", help=".pdf or .svg", readable=False)
    ],
) -> None:
    """Make a scale card to print for the photographer.

    Print it at 100 % and check it with a ruler. It stands beside the object, never on the clay.
    """
    from layout.image.card import card_pdf, draw_card

    if file.suffix not in (".pdf", ".svg"):
        message = "a scale card is written as .pdf or .svg; name such a file"
        raise CallError(message, file=file)
    write_whole(file, card_pdf() if file.suffix == ".pdf" else draw_card().encode())
    say(f"{file}: written; print it at 100 % and check both lengths with a ruler")


def lens(
    photographs: PhotoFiles,
    file: Annotated[
        Path, typer.Option("--output", "-o", metavar="NAME.lens.json", help="the lens file", readable=False)
    ],
    columns: Annotated[int | None, typer.Option(help="inner corners of the chessboard across")] = None,
    rows: Annotated[int | None, typer.Option(help="and down")] = None,
) -> None:
    """Calibrate a lens from photographs of a chessboard or of the scale card.

    Five or more, from several sides, with the zoom and focus of the photographs that are to be measured.
    """
    from layout.image.chessboard import calibrate
    from layout.lens import write_lens

    if not file.name.endswith(LENS_ENDING) or file.name == LENS_ENDING:
        message = f"a lens file's name ends in {LENS_ENDING}, as in camera-60mm{LENS_ENDING}"
        raise CallError(message, file=file)
    with waiting("looking for the pattern"):
        found = calibrate(photographs, columns=columns, rows=rows)
    write_lens(found.lens, file)
    for name, why in found.unused:
        say(f"{name}: not used: {why}")
    for name in found.doubtful:
        say(f"{name}: fits badly; look at it again, or leave it out")
    one = found.lens
    emit(
        f"{file}\n"
        f"pictures used {len(one.pictures)} of {len(photographs)}, reprojection error {one.rms_px:.3f} px (RMS)\n"
        f"focal length {one.focal_px[0]:.1f} px, standard uncertainty {one.focal_sd_px[0]:.1f} px\n"
        f"optical axis at ({one.centre_px[0]:.1f}, {one.centre_px[1]:.1f})\n"
    )


def rectify(
    record: RecordFile,
    file: Annotated[Path, typer.Option("--output", "-o", metavar="FILE", help=".tif", readable=False)],
    per_mm: Annotated[float, typer.Option(help="pixels per mm, in tenths")] = 20.0,
    view: Annotated[int, typer.Option(help="which view of the record, from 0")] = 0,
) -> None:
    """Write the face as a picture of known resolution, seen square and free of distortion.

    Its pixels per centimetre stand in the file, so that a drawing program shows it at its true size.
    """
    from layout.image.photograph import read_photograph
    from layout.lens import read_lenses
    from layout.record.files import read
    from layout.rectify import rectify as resample
    from layout.rectify import to_tiff

    if file.suffix not in (".tif", ".tiff"):
        message = "a rectified picture is written as .tif; name such a file"
        raise CallError(message, file=file)
    found = read(record)
    if not 0 <= view < len(found.views):
        message = f"needs a view from 0 to {len(found.views) - 1}, has {view}"
        raise CallError(message, file=record)
    photograph = record.parent / found.photograph_of(found.views[view]).file
    with waiting("resampling the photograph"):
        lenses = read_lenses(found, record.parent)
        named = lenses.get(found.views[view].scale.lens or "")
        try:
            rectified = resample(found, view, read_photograph(photograph), per_mm, named)
        except CallError as error:
            raise CallError(error.message, file=record) from None
        write_whole(file, to_tiff(rectified))
    height, width = rectified.pixels.shape[:2]
    say(f"{file}: written, {width} x {height} pixels at {per_mm:g} per mm")
