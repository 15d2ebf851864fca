"""The sheet as a table for a spreadsheet: one number a row, whatever it is about."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterator

from layout.quantity import Summary
from layout.sheet.content import Cell, Content

COLUMNS = ("section", "table", "of", "quantity", "value", "sd", "low", "high", "unit", "text")
FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r")
"""A spreadsheet takes a text that begins so for a formula and runs it (common practice, no source)."""


def to_csv(content: Content) -> str:
    """Set the sheet as CSV (RFC 4180) with a header, one row for each number and each sentence.

    Numbers stay numbers; a text that a spreadsheet would take for a formula is preceded by an apostrophe.
    """
    out = io.StringIO()
    writer = csv.writer(out)
    writer.writerow(COLUMNS)
    writer.writerows([_harmless(cell) for cell in row] for row in _rows(content))
    return out.getvalue()


def _rows(content: Content) -> Iterator[tuple[object, ...]]:
    """Yield the heading, then every section's numbers and sentences in order."""
    yield _text("heading", "", "", "name", content.name)
    for label, text in content.facts:
        yield _text("heading", "", "", label.lower(), text)
    for section in content.sections:
        for table in section.tables:
            for about, *cells in table.rows:
                for head, cell in zip(table.columns[1:], cells, strict=True):
                    if isinstance(cell, Summary):
                        numbers = cell.to_json()
                        yield (section.title, table.title, about, head, *numbers.values(), "")
                    elif cell is not None:
                        yield _text(section.title, table.title, about, head, cell)
        for sentence in section.sentences:
            yield _text(section.title, "", "", "", sentence)
    yield _text("provenance", "", "", "", content.provenance)


def _text(section: str, table: str, about: Cell, quantity: str, text: str) -> tuple[object, ...]:
    """Return a row that holds no number."""
    return (section, table, about, quantity, None, None, None, None, "", text)


def _harmless(cell: object) -> object:
    """Return a cell that no spreadsheet runs."""
    return f"'{cell}" if isinstance(cell, str) and cell.startswith(FORMULA_STARTS) else cell
