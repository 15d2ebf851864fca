"""The sheet's parts as they appear in a terminal."""

from __future__ import annotations

import io
import sys

from rich import box
from rich.console import Console, Group
from rich.padding import Padding
from rich.table import Table as RichTable
from rich.text import Text

from layout.console import printable
from layout.quantity import Summary
from layout.sheet.content import Cell, Content, Section, Table
from layout.sheet.numbers import NO_NUMBER, interval, number, shown

PIPE_WIDTH = 110
"""How wide the tables are where no terminal says how wide it is."""


def to_text(content: Content, sections: tuple[str, ...]) -> str:
    """Set some sections of the sheet for the terminal to which stdout leads, or for a file or pipe.

    Parameters
    ----------
    content
        The sheet.
    sections
        The ids of the sections to set; ``"view"`` stands for every view.
    """
    terminal = sys.stdout.isatty()
    out = io.StringIO()
    console = Console(
        file=out,
        force_terminal=terminal,
        width=None if terminal else PIPE_WIDTH,
        highlight=False,
        emoji=False,
        markup=False,
    )
    console.print(Text(printable(content.name), style="bold"))
    for section in content.sections:
        if section.id.split("-")[0] in sections:
            console.print()
            console.print(_section(section))
    return "\n".join(line.rstrip() for line in out.getvalue().splitlines()) + "\n"


def _section(section: Section) -> Group:
    """Set a section: its title, its tables, its sentences."""
    return Group(
        Text(section.title, style="bold"),
        *(_table(table) for table in section.tables),
        *(Padding(Text(printable(sentence)), (0, 0, 0, 2)) for sentence in section.sentences),
    )


def _table(table: Table) -> RichTable:
    """Set a table."""
    rich = RichTable(
        title=Text(printable(table.title)), title_justify="left", box=box.SIMPLE_HEAD, title_style="dim"
    )
    for index, head in enumerate(table.columns):
        rich.add_column(head, no_wrap=index > 0, overflow="fold")
    for row in table.rows:
        rich.add_row(*(Text(_cell(cell, table)) for cell in row))
    return rich


def _cell(cell: Cell, table: Table) -> str:
    """Write a cell; a table of many columns has the interval below the number."""
    if not isinstance(cell, Summary):
        return NO_NUMBER if cell is None else printable(cell)
    between = "\n" if len(table.columns) > 4 else "  "
    text = number(cell) if table.unit else shown(cell)
    return f"{text}{between}{interval(cell)}".rstrip()
