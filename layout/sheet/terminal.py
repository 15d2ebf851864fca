"""The sheet's parts as they appear in a terminal."""

from __future__ import annotations

import io
import shutil
import sys

from rich import box
from rich.console import Console
from rich.padding import Padding
from rich.table import Table as RichTable
from rich.text import Text

from layout.console import printable
from layout.quantity import Summary
from layout.sheet.content import Cell, Content, Table
from layout.sheet.numbers import NO_NUMBER, interval, number, shown

PIPE_WIDTH = 110
"""How wide the tables are where no terminal says how wide it is."""
NARROWEST = 80
"""On a narrower terminal lines are broken by the terminal, which cuts nothing off."""
NARROWEST_NAME = 10
GAP = 2
"""Between two columns."""
MANY = 4
"""A table of more columns than this has each interval below its number."""


def to_text(content: Content, sections: tuple[str, ...]) -> str:
    """Set some sections of the sheet for the terminal to which stdout leads, or for a file or pipe.

    Parameters
    ----------
    content
        The sheet.
    sections
        The ids of the sections to set; ``"view"`` stands for every view.
    """
    out = io.StringIO()
    width = max(NARROWEST, shutil.get_terminal_size((PIPE_WIDTH, 0)).columns)
    console = Console(file=out, force_terminal=sys.stdout.isatty(), width=width, highlight=False)
    console.print(Text(printable(content.name), style="bold"))
    for section in content.sections:
        if section.id.split("-")[0] in sections:
            console.print()
            console.print(Text(section.title, style="bold"))
            for table in section.tables:
                console.print(_table(table, width), "", crop=False)
            for sentence in section.sentences:
                console.print(Padding(Text(printable(sentence)), (0, 0, 0, 2)))
    return "\n".join(line.rstrip() for line in out.getvalue().rstrip().splitlines()) + "\n"


def _table(table: Table, width: int) -> RichTable:
    """Set a table; heads and the names in the first column may be broken into lines, numbers never."""
    rich = RichTable(
        title=Text(printable(table.title)),
        title_justify="left",
        title_style="dim",
        box=box.SIMPLE_HEAD,
        padding=(0, GAP - 1, 0, 0),
        show_edge=False,
    )
    texts = [[_cell(cell, table) for cell in row] for row in table.rows]
    names, *others = zip(*texts, strict=True)
    widths = [
        max(len(part) for text in (*column, "\n".join(head.split())) for part in text.splitlines())
        for head, column in zip(table.columns[1:], others, strict=True)
    ]
    room = max(NARROWEST_NAME, width - sum(widths) - (GAP * len(table.columns) - 1))
    rich.add_column(
        table.columns[0], width=min(room, max(map(len, (table.columns[0], *names)))), overflow="fold"
    )
    for head, column_width in zip(table.columns[1:], widths, strict=True):
        rich.add_column(head, width=column_width)
    for row in texts:
        rich.add_row(*map(Text, row))
    return rich


def _cell(cell: Cell, table: Table) -> str:
    """Write a cell; a table of many columns has the interval below the number."""
    if not isinstance(cell, Summary):
        return NO_NUMBER if cell is None else printable(cell)
    between = "\n" if len(table.columns) > MANY else "  "
    text = number(cell) if table.unit else shown(cell)
    return f"{text}{between}{interval(cell)}".rstrip()
