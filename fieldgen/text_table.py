"""Tables on the terminal as text."""

from __future__ import annotations

import io

from rich.console import Console
from rich.table import Table
from rich.text import Text

_WIDTH = 100


def new_table(*columns: str, left: tuple[str, ...] = ()) -> Table:
    """Table without lines; numbers stand to the right, the first column and `left` to the left."""
    table = Table(box=None, pad_edge=False, header_style="")
    for index, column in enumerate(columns):
        to_left = index == 0 or column in left
        table.add_column(Text(column), justify="left" if to_left else "right")
    return table


def render(table: Table) -> str:
    """Text of a table, lines without trailing blanks."""
    buffer = io.StringIO()
    Console(file=buffer, width=_WIDTH, highlight=False).print(table)
    return "\n".join(line.rstrip() for line in buffer.getvalue().rstrip().splitlines())
