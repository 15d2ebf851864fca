"""The capacity sheet: one content, set as a page, a table for spreadsheets, or the results themselves."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import TYPE_CHECKING

from layout.errors import CallError

if TYPE_CHECKING:
    from layout.record.model import Record
    from layout.results import Results
    from layout.sheet.content import Content

FORMS = (".html", ".csv", ".json")


def form_of(path: Path) -> str:
    """Return the form that a file's ending asks for.

    Raises
    ------
    CallError
        If no sheet has this ending.
    """
    ending = path.suffix.lower()
    if ending not in FORMS:
        message = f"a sheet ends in {', '.join(FORMS[:-1])} or {FORMS[-1]}, has {path.suffix!r}"
        raise CallError(message, file=path)
    return ending


def to_json(results: Results) -> str:
    """Set the results as the text of a JSON file."""
    return json.dumps(results.to_json(), ensure_ascii=False, indent=2, allow_nan=False) + "\n"


def content_of(record: Record, results: Results, record_path: Path) -> Content:
    """Compose the sheet of a record that was read from a file.

    Raises
    ------
    OSError
        If the record's file cannot be read for its hash.
    """
    from layout.candidates.deciding import decides
    from layout.sheet.content import compose

    sha256 = hashlib.sha256(record_path.read_bytes()).hexdigest()
    return compose(record, results, sha256, decides(results) if results.ranking else None)


def sheet(form: str, record: Record, results: Results, record_path: Path) -> bytes:
    """Set a sheet in one of ``FORMS``; the same record, version and seed give the same bytes.

    The page shows the photograph where it lies beside the record unchanged; it does without otherwise.
    """
    if form == ".json":
        return to_json(results).encode()
    content = content_of(record, results, record_path)
    if form == ".csv":
        from layout.sheet.csv import to_csv

        # spreadsheets take a file for UTF-8 only if it begins with this mark
        return to_csv(content).encode("utf-8-sig")
    from layout.sheet.drawing import draw
    from layout.sheet.html import to_html
    from layout.sheet.picture import embed

    drawing = draw(record, results)
    photograph = None if drawing is None else embed(record, drawing, record_path.parent)
    return to_html(content, drawing, photograph).encode()
