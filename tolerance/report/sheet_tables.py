"""Cells and tables of our workbooks: one look for all of them, and texts that stay texts."""

from __future__ import annotations

import math
import textwrap
from typing import TYPE_CHECKING

from openpyxl.cell.cell import Cell as SheetCell
from openpyxl.styles import Alignment, Border, Font, PatternFill, Side
from openpyxl.utils import get_column_letter
from openpyxl.worksheet.properties import PageSetupProperties

from tolerance.report.sheet_text import clean_text
from tolerance.report.tables import Cell, Column, Table

if TYPE_CHECKING:
    from openpyxl.worksheet.worksheet import Worksheet

INK, HEAD_FILL, HAIRLINE = "1D2433", "DBE3EC", "B4BAC8"
LARGEST_EXACT = 10**15  # a cell holds 15 digits
LIKE_A_FORMULA = ("=", "+", "-", "@", "\t", "\r")
NARROWEST, WIDEST = 9, 58  # letters, of a column; the filter button takes some
PAGE = 240.0  # letters across a printed page at most; a wider table goes on on further ones
ROW = 15.0  # points, one row of letters of the usual size


def write_table(sheet: Worksheet, table: Table, *, top: int) -> None:
    """Headings in row `top`, filterable, and the rows below them."""
    widths = [_width(table, column) for column in range(len(table.columns))]
    for column, heading in enumerate(table.columns, start=1):
        cell = put(sheet, top, column, heading.head)
        cell.font = lettering(bold=True)
        cell.fill = PatternFill("solid", start_color=HEAD_FILL)
        cell.border = Border(bottom=Side(style="thin", color=HAIRLINE))
        cell.alignment = _alignment(table, column - 1, widths[column - 1], heading=True)
        sheet.column_dimensions[get_column_letter(column)].width = widths[column - 1]
    sheet.row_dimensions[top].height = ROW * max(
        _head_rows(heading, width) for heading, width in zip(table.columns, widths, strict=True))
    alignments = [_alignment(table, column, width) for column, width in enumerate(widths)]
    for row, cells in enumerate(table.rows, start=top + 1):
        for column, (heading, value) in enumerate(zip(table.columns, cells, strict=True), start=1):
            cell = put(sheet, row, column, value)
            cell.alignment = alignments[column - 1]
            if isinstance(value, int | float):
                cell.number_format = number_format(heading)
        lines = max(_rows_of(value, width) for value, width in zip(cells, widths, strict=True))
        if lines > 1:
            sheet.row_dimensions[row].height = ROW * lines
    last = get_column_letter(len(table.columns))
    sheet.auto_filter.ref = f"A{top}:{last}{max(top + len(table.rows), top + 1)}"
    sheet.sheet_view.showGridLines = False
    sheet.page_setup.orientation = "landscape"
    sheet.page_setup.fitToHeight = 0
    sheet.page_setup.fitToWidth = math.ceil(sum(widths) / PAGE)
    sheet.print_title_cols = "A:A"
    sheet.sheet_properties.pageSetUpPr = PageSetupProperties(fitToPage=True)
    sheet.print_title_rows = f"{top}:{top}"


def number_format(column: Column) -> str:
    """How a spreadsheet shows a column's numbers."""
    if column.digits is None:
        return "General"
    places = f"0.{'0' * column.digits}" if column.digits else "0"
    return f"{places}%" if column.unit == "share" else places


def put(sheet: Worksheet, row: int, column: int, value: Cell) -> SheetCell:
    """Write one cell. Text stays text, also where it begins like a formula."""
    cell = sheet.cell(row=row, column=column)
    if isinstance(value, int) and abs(value) > LARGEST_EXACT:
        value = str(value)  # all of its digits
    assert isinstance(cell, SheetCell)
    if isinstance(value, str):
        cell.value = clean_text(value)
        cell.data_type = "s"
        if value.startswith(LIKE_A_FORMULA):
            cell.quotePrefix = True
    elif value is not None:
        cell.value = value
    return cell


def lettering(size: float = 11.0, *, bold: bool = False, italic: bool = False, color: str = INK) -> Font:
    """The letters of our sheets."""
    return Font(name="Calibri", size=size, bold=bold, italic=italic, color=color)


def _alignment(table: Table, column: int, width: float, *, heading: bool = False) -> Alignment:
    """Columns of numbers stand on the right, heading included; text on the left, away from the numbers before it.

    Headings, and texts too long for the widest column, go on in further rows of their cell.
    """
    numbers = any(isinstance(row[column], int | float) for row in table.rows)
    numbers = numbers and not any(isinstance(row[column], str) for row in table.rows)
    return Alignment(vertical="top", horizontal="right" if numbers else "left", indent=0 if numbers else 1,
                     wrap_text=heading or width >= WIDEST)


def _width(table: Table, column: int) -> float:
    """Letters that the cells of a column need; its heading may take three rows."""
    heading = table.columns[column]
    longest_word = max(len(word) for word in heading.head.split())
    cells = max((len(_shown(heading, row[column])) for row in table.rows), default=0)
    return min(max(NARROWEST, len(heading.head) / 2.0 + 2, longest_word + 4, cells + 3), WIDEST)


def _rows_of(value: Cell, width: float) -> int:
    """Rows that a text takes in a column of that width; only the widest columns go on in further ones."""
    return len(textwrap.wrap(value, int(width) - 3)) if isinstance(value, str) and width >= WIDEST else 1


def _head_rows(column: Column, width: float) -> int:
    """Rows that a heading takes when it is wrapped into its column."""
    return len(textwrap.wrap(column.head, max(int(width) - 3, 1)))


def _shown(column: Column, value: Cell) -> str:
    if isinstance(value, float) and column.digits is not None:
        return f"{100.0 * value:.{column.digits}f}%" if column.unit == "share" else f"{value:.{column.digits}f}"
    return "" if value is None else f"{value:.8g}" if isinstance(value, float) else str(value)
