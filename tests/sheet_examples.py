"""A board whose fabricator is asked, the sheet as it goes out, and ways of filling and spoiling it."""

from __future__ import annotations

from collections.abc import Callable
from functools import cache
from pathlib import Path

from openpyxl import load_workbook
from openpyxl.utils import get_column_letter
from openpyxl.worksheet.worksheet import Worksheet

from tests.scenario_texts import HEAD, LINES, SIX_LAYERS
from tolerance.exchanged import Request
from tolerance.report.request import write_request
from tolerance.scenario import Scenario, load, parse
from tolerance.sheet.layout import HEADINGS, TABLE_SHEET, heading_of
from tolerance.study.exchange import ask

VARIATIONS = """
[[variations]]
of = "P1.thickness"
tolerance = "10 %"

[[variations]]
of = "P*.dk"
tolerance = 0.1
together = true

[[variations]]
of = ["L1.etch", "L3.etch"]
tolerance = "15 um"

[[variations]]
of = "C1.thickness"
shape = "uniform"
low = "110 um"
high = "130 um"

[[variations]]
of = "P2.df"
tolerance = "10 %"
"""

TEXT = HEAD + SIX_LAYERS.replace('thickness = "300 um"\ndk = 3.9', 'thickness = "300 um"\ndk = 3.9\ndf = 0.02') \
    + LINES + VARIATIONS
COUPONS = 256


@cache
def asked() -> Request:
    """What is asked about the board."""
    return ask(parse(TEXT), coupons=COUPONS, seed=1)


def scenario_in(folder: Path) -> Scenario:
    """The board in a file of its own."""
    path = folder / "orchard.toml"
    path.write_text(TEXT, encoding="utf-8")
    return load(path)


def sheet_in(folder: Path, *, hide_targets: bool = False) -> Path:
    """The sheet as it goes out."""
    return write_request(asked(), folder / "ask.xlsx", hide_targets=hide_targets)


def edited(path: Path, edit: Callable[[Worksheet], object]) -> Path:
    """The sheet after somebody worked on its table."""
    book = load_workbook(path)
    edit(book[TABLE_SHEET])
    reply = path.with_name("reply.xlsx")
    book.save(reply)
    return reply


def address(sheet: Worksheet, name: str, key: str) -> str:
    """The cell of a column in the row of a dimension."""
    heads = {heading.key: get_column_letter(column) for column, cell in enumerate(sheet[5], start=1)
             if (heading := heading_of(str(cell.value)))}
    row = next(cell.row for cell in sheet["A"] if cell.value == name)
    assert key in {heading.key for heading in HEADINGS}
    return f"{heads[key]}{row}"


def fill(sheet: Worksheet, name: str, /, **cells: object) -> None:
    """Fill cells of a row, by the keys of their columns."""
    for key, value in cells.items():
        sheet[address(sheet, name, key)] = value  # type: ignore[assignment]
