"""The sheet as one page: no scripts, nothing from elsewhere, readable on a telephone, printable."""

from __future__ import annotations

from jinja2 import Environment, PackageLoader, StrictUndefined

from layout.quantity import Summary
from layout.sheet.content import Cell, Content, Table
from layout.sheet.drawing import Drawing
from layout.sheet.numbers import NO_NUMBER, interval, number, shown
from layout.sheet.picture import Embedded

WIDE = 4
"""A table of so many columns becomes a stack of cards on a narrow screen."""


def to_html(content: Content, drawing: Drawing | None, photograph: Embedded | None) -> str:
    """Set the sheet as HTML.

    Parameters
    ----------
    content
        What the sheet says. Its texts come from a record, so all of them are escaped.
    drawing
        The drawing, or None where nothing is traced.
    photograph
        The drawing's part of the photograph, or None.
    """
    environment = Environment(
        loader=PackageLoader("layout.sheet"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.globals.update(value=_value, interval=_interval, is_number=_is_number, is_wide=_is_wide)
    page = environment.get_template("sheet.html.j2")
    return page.render(content=content, drawing=drawing, photograph=photograph) + "\n"


def _value(cell: Cell, table: Table) -> str:
    """Return the first line of a cell; a unit that the whole table shares is not repeated."""
    if isinstance(cell, Summary):
        return number(cell) if table.unit else shown(cell)
    return NO_NUMBER if cell is None else cell


def _interval(cell: Cell) -> str:
    """Return the second line of a cell, the interval, or nothing."""
    return interval(cell) if isinstance(cell, Summary) else ""


def _is_number(cell: Cell) -> bool:
    """Return whether a cell is set as a number."""
    return not isinstance(cell, str)


def _is_wide(table: Table) -> bool:
    """Return whether a table is too wide for a narrow screen."""
    return len(table.columns) >= WIDE
