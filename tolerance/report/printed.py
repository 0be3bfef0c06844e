"""What every command prints with: sentences, and tables that fit 80 columns."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from rich import box
from rich.padding import Padding
from rich.table import Table as RichTable
from rich.text import Text

if TYPE_CHECKING:
    from rich.console import Console

NARROWEST_NAME = 15
WIDEST_NAME = 40
OTHER_COLUMNS = 65  # what the widest table needs beside the names


def say(console: Console, sentence: str, *, style: str = "") -> None:
    """Print a sentence."""
    console.print(Text(sentence, style=style))


def text_table(*columns: tuple[str, bool]) -> RichTable:
    """An empty table; a column is its heading and whether it holds text (on the left, may wrap) or numbers."""
    table = RichTable(box=box.SIMPLE_HEAD, show_edge=False, pad_edge=False, padding=(0, 1, 0, 0), header_style="")
    for heading, is_text in columns:
        table.add_column(Text(heading), justify="left" if is_text else "right", no_wrap=not is_text, overflow="fold")
    return table


def filled_table(columns: Sequence[tuple[str, bool]], rows: Sequence[Sequence[str]]) -> RichTable:
    """The same with its rows."""
    table = text_table(*columns)
    for cells in rows:
        table.add_row(*(Text(cell) for cell in cells))
    return table


def print_table(console: Console, table: RichTable) -> None:
    """Print a table between two empty lines."""
    console.print(Padding(table, (1, 0, 1, 0)))


def name_width(console: Console) -> int:
    """Letters that a table leaves for the names of lines."""
    return min(max(console.width - OTHER_COLUMNS, NARROWEST_NAME), WIDEST_NAME)
