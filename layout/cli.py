"""The commands. What is slow to import is imported where it is used.

Results go to stdout, everything else to stderr. Exit 0: done; 1: done, with a finding that the command
exists to report; 2: the input or the call is wrong, which is said in one line for each fault.
"""

from __future__ import annotations

import gc
import json
import os
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from layout import __version__
from layout.cli_pictures import PhotoFiles, RecordFile, lens, rectify, target, ticks
from layout.console import emit, printable, say, speak_utf8, waiting
from layout.errors import CallError, LayoutError
from layout.files import reason, write_whole

if TYPE_CHECKING:
    from layout.record.model import Record
    from layout.results import Results

FINDING, WRONG, INTERRUPTED = 1, 2, 130
DRAWS, SEED = 10_000, 0
RECORD_ENDING = ".fragment.json"
MEASURED = ("summary", "warnings", "view", "whole", "capacity", "assumptions", "missing")
IN_SHORT = ("summary", "warnings", "ranking")

app = typer.Typer(add_completion=False, pretty_exceptions_enable=False, rich_markup_mode=None)

# whether a file can be read is found out by reading it, so that there is one message for it
Folder = Annotated[Path, typer.Argument(metavar="FOLDER", help="where to put it", readable=False)]
NewRecord = Annotated[
    Path, typer.Option("--output", "-o", metavar="RECORD", help="the record to begin", readable=False)
]
SheetFile = Annotated[
    Path, typer.Option("--output", "-o", metavar="FILE", help=".html, .csv or .json", readable=False)
]
AsJson = Annotated[bool, typer.Option("--json", help="print JSON, for programs")]


def main(arguments: list[str] | None = None) -> int:
    """Run the command and return its exit code; what is wrong is said in one line for each fault."""
    speak_utf8()
    # modules being loaded are no garbage: looking for some among them all the time takes a twentieth of a short run
    gc.set_threshold(100_000)
    # looking for plugins of pydantic among all installed packages takes longer than reading a record
    os.environ.setdefault("PYDANTIC_DISABLE_PLUGINS", "__all__")
    try:
        code = app(arguments, prog_name="layout", standalone_mode=False)
    except LayoutError as error:
        return _refuse(error.lines())
    except typer.TyperException as error:
        return _refuse([_usage(error)])
    except KeyboardInterrupt:
        code = INTERRUPTED
    except MemoryError:
        return _refuse(["memory is too small for this; ask for fewer draws"])
    except OSError as error:
        return _refuse([f"{error.filename or 'stdout'}: {reason(error)}"])
    if code == INTERRUPTED:
        say("interrupted; nothing was left half written")
    return code or 0


@app.callback(invoke_without_command=True)
def describe(
    context: typer.Context,
    version: Annotated[bool, typer.Option("--version", help="print the version")] = False,
) -> None:
    """How big was this broken tablet, how much did its lost part hold, and what would have fitted there."""
    if version:
        emit(f"layout {__version__}\n")
        raise typer.Exit
    if context.invoked_subcommand is None:
        emit(f"{context.get_help()}\n")


@app.command()
def demo(folder: Folder = Path("demo")) -> None:
    """Do the whole job on the bundled fragment.

    Measure it, rank its candidates, write its sheets.
    """
    from layout.demo import unpack
    from layout.sheet import FORMS, sheet

    path, kept = unpack(folder)
    for file in kept:
        say(f"{file}: differs from the bundled one and is kept; delete it to start afresh")
    record, results = _measured(path, DRAWS, SEED)
    written = [folder / f"sheet{form}" for form in FORMS]
    for file in written:
        write_whole(file, sheet(file.suffix, record, results, path))
    _print(record, results, path, IN_SHORT)
    emit("\n" + "".join(f"{file}\n" for file in (path, *written)))


@app.command()
def new(
    photographs: PhotoFiles,
    record: NewRecord,
    name: Annotated[str | None, typer.Option(help="museum or excavation number [the file's name]")] = None,
) -> None:
    """Begin a record from photographs.

    It holds their sizes and hashes, and one view of the obverse on the first.
    """
    from layout.record.begin import begin
    from layout.record.files import write

    if not record.name.endswith(RECORD_ENDING) or record.name == RECORD_ENDING:
        message = f"a record's name ends in {RECORD_ENDING}, as in q17{RECORD_ENDING}"
        raise CallError(message, file=record)
    if record.exists():
        message = "there is a record already; name another file, or delete this one first"
        raise CallError(message, file=record)
    with waiting("reading the photographs"):
        begun = begin(name or record.name.removesuffix(RECORD_ENDING), photographs, record.parent)
    write(begun, record)
    for photograph in begun.photographs:
        focal = photograph.focal_length
        if focal is not None:
            say(
                f"{photograph.file}: focal length {focal.px:.0f} px (standard uncertainty {focal.sd:.0f} px) from the "
                "camera data; the distance of the lens will follow from it and the scale"
            )
    say(f"{record}: begun, with {len(photographs)} photograph{'s' if len(photographs) > 1 else ''}")


@app.command()
def check(record: RecordFile) -> int:
    """Say what is sound in a record, and what is missing.

    Exit code 1 tells that something is: for which result, or that a photograph has changed.
    """
    from layout.record.check import check
    from layout.record.files import read

    with waiting("reading the photographs"):
        found = check(read(record), record.parent)
    emit("".join(f"{printable(line)}\n" for line in found.lines()))
    return FINDING if found.findings else 0


@app.command()
def measure(
    record: RecordFile,
    as_json: AsJson = False,
    draws: Annotated[int, typer.Option(min=100, max=1_000_000, help="joint draws")] = DRAWS,
    seed: Annotated[int, typer.Option(min=0, help="of the draws")] = SEED,
) -> None:
    """Measure the fragment, the whole tablet and the lost space."""
    read, results = _measured(record, draws, seed)
    if as_json:
        from layout.sheet import to_json

        emit(to_json(results))
    else:
        _print(read, results, record, MEASURED)


@app.command()
def rank(record: RecordFile, as_json: AsJson = False) -> None:
    """Rank the candidates for the lost columns, best first."""
    read, results = _measured(record, DRAWS, SEED)
    if not results.ranking:
        reasons = [one.text for one in results.missing if one.result.startswith("ranking")]
        message = "; ".join(reasons) or "names no candidates; propose some under candidates or pool"
        raise CallError(message, file=record)
    if as_json:
        from layout.candidates.deciding import decides

        ranking = {"ranking": results.to_json()["ranking"], "decides": decides(results)}
        emit(json.dumps(ranking, ensure_ascii=False, indent=2, allow_nan=False) + "\n")
    else:
        _print(read, results, record, ("ranking",))


@app.command()
def sheet(record: RecordFile, file: SheetFile) -> None:
    """Write the capacity sheet.

    It is a page, a table for spreadsheets, or JSON, by the file's ending.
    """
    from layout.sheet import form_of, sheet

    form = form_of(file)
    if file.name.endswith(RECORD_ENDING) or (file.exists() and file.samefile(record)):
        message = "is a record, which a sheet must not overwrite; name another file"
        raise CallError(message, file=file)
    read, results = _measured(record, DRAWS, SEED)
    with waiting("setting the sheet"):
        write_whole(file, sheet(form, read, results, record))
    say(f"{file}: written")


for command in (ticks, target, lens, rectify):
    app.command()(command)


def _measured(path: Path, draws: int, seed: int) -> tuple[Record, Results]:
    """Read a record and measure it."""
    from layout.record.files import read

    record = read(path)
    with waiting("measuring"):
        from layout.lens import read_lenses
        from layout.pipeline import measure

        return record, measure(record, draws=draws, seed=seed, lenses=read_lenses(record, path.parent))


def _print(record: Record, results: Results, path: Path, sections: tuple[str, ...]) -> None:
    """Print sections of the sheet."""
    from layout.sheet import content_of
    from layout.sheet.terminal import to_text

    emit(to_text(content_of(record, results, path), sections))


def _refuse(lines: list[str]) -> int:
    """Say what is wrong."""
    for line in lines:
        say(line)
    return WRONG


def _usage(error: typer.TyperException) -> str:
    """Return what is wrong with a call, and where to read how it is meant."""
    context: typer.Context | None = getattr(error, "ctx", None)
    command = "layout" if context is None else context.command_path
    text = " ".join(error.format_message().split()).rstrip(".")
    return f"{command.removeprefix('layout').strip() or 'call'}: {text}; see {command} --help"
