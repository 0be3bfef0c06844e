"""The workbook of a run: summary, lines, drivers, the scenario as understood, and what re-makes the run."""

from __future__ import annotations

import math
import textwrap
from typing import TYPE_CHECKING

from openpyxl import Workbook
from openpyxl.cell.cell import Cell as SheetCell
from openpyxl.formatting.rule import Rule
from openpyxl.styles import Alignment, Border, Font, PatternFill, Side
from openpyxl.styles.differential import DifferentialStyle
from openpyxl.utils import get_column_letter
from openpyxl.worksheet.properties import PageSetupProperties

from tolerance.report.charts import Placed, draw_charts
from tolerance.report.files import put_in_place
from tolerance.report.lots_tables import (
    acceptance_sentence,
    acceptance_table,
    level_driver_table,
    level_table,
    reading_table,
)
from tolerance.report.measured import intervals_of, measured_table
from tolerance.report.sheet_text import clean_text
from tolerance.report.tables import (
    MISSES,
    Cell,
    Column,
    Table,
    driver_table,
    limit_table,
    line_table,
    summary_table,
)
from tolerance.report.understood import board_thickness, correlation_table, drawn_table, stackup_table, variation_table
from tolerance.report.weights import group_table, lever_table
from tolerance.report.wording import CAUTION, headline_text, length_text, share_range_text, trimmed

if TYPE_CHECKING:
    from pathlib import Path

    from openpyxl.worksheet.worksheet import Worksheet

    from tolerance.results import RunResult
    from tolerance.scenario.tables import Scenario

INK, FAIL, FAIL_FILL, HEAD_FILL, HAIRLINE = "1D2433", "A3184B", "F3D5DF", "DBE3EC", "B4BAC8"
LIKE_A_FORMULA = ("=", "+", "-", "@", "\t", "\r")
LONGEST_TEXT = 32_000  # letters that a cell takes, with some room
NARROWEST, WIDEST = 9, 58  # letters, of a column; the filter button takes some
RECORD_WIDTH = 120  # letters, of the values of the run record: whole lines of a scenario
PAGE = 240.0  # letters across a printed page at most; a wider table goes on on further ones
ROW = 15.0  # points, one row of letters of the usual size


def write_workbook(result: RunResult, scenario: Scenario, path: Path) -> Path:
    """Write the workbook, whole or not at all. Raises UnfinishedError where it cannot be written."""
    return put_in_place(path, workbook(result, scenario).save)


def workbook(result: RunResult, scenario: Scenario) -> Workbook:
    """The workbook, not yet written."""
    book = Workbook()
    book.properties.creator = "tolerance"
    book.properties.title = clean_text(result.title)
    first = book.active
    assert first is not None
    book.remove(first)
    placed = {"Summary": _summary_sheet(book.create_sheet("Summary"), result, scenario)}
    charts = book.create_sheet("Charts")
    for name, table in _tables(result, scenario):
        placed[name] = Placed(book.create_sheet(name), table, 1)
        _write_table(placed[name].sheet, table, top=1)
        placed[name].sheet.freeze_panes = "B2"
    _acceptance_sheet(book, result)
    _mark_misses(placed["Lines"], target_yield=result.target_yield)
    draw_charts(charts, summary=placed["Summary"], drivers=placed["Drivers"], by_limit=placed["Yield by limit"],
                target=f"{trimmed(100.0 * result.target_yield, 3)} %")
    _record_sheet(book.create_sheet("Run record"), result)
    return book


def _tables(result: RunResult, scenario: Scenario) -> list[tuple[str, Table]]:
    """The tables that have a sheet of their own, by its name, in their order."""
    tables = [("Lines", line_table(result)), ("Drivers", driver_table(result)), ("Yield by limit", limit_table(result))]
    tables += [(name, table) for name, table in (("Yield levers", lever_table(result)),
                                                 ("Groups of drivers", group_table(result))) if table.rows]
    if result.nested is not None:
        tables += [("Levels", level_table(result)), ("Levels by variable", level_driver_table(result))]
    if result.reading is not None:
        tables.append(("Test", reading_table(result)))
    tables += [("Stackup", stackup_table(scenario)), ("Drawn lines", drawn_table(scenario)),
               ("Variations", variation_table(scenario))]
    if result.measured:
        tables.append(("Measured data", measured_table(result, scenario.report.lengths)))
    if scenario.correlations:
        tables.append(("Correlations", correlation_table(scenario)))
    return tables


def _acceptance_sheet(book: Workbook, result: RunResult) -> None:
    """What the sampling plan does to lots, where there is one; it stands after the test."""
    if result.acceptance is not None:
        sheet = book.create_sheet("Lot acceptance", book.sheetnames.index("Stackup"))
        _put(sheet, 1, 1, acceptance_sentence(result.acceptance)).font = _font(12, bold=True)
        _write_table(sheet, acceptance_table(result.acceptance), top=3)
        sheet.freeze_panes = "A4"


def _summary_sheet(sheet: Worksheet, result: RunResult, scenario: Scenario) -> Placed:
    missing = [line.name for line in result.lines if line.inside.value < result.target_yield]
    aim = f"{trimmed(100.0 * result.target_yield, 3)} %"
    ends = share_range_text(result.inside)
    sentences = [
        (result.title, _font(16, bold=True)),
        (f"{headline_text(result.inside)} of the coupons pass on every line (95 % interval {ends} %; "
         f"{result.coupons:,} coupons, seed {result.seed}).", _font(13, bold=True)),
        (f"{len(missing)} of {len(result.lines)} lines {'MISS' if len(missing) != 1 else MISSES} the target yield "
         f"of {aim}." if missing else f"Every line meets the target yield of {aim}.",
         _font(12, bold=bool(missing), color=FAIL if missing else INK)),
        (f"{len(scenario.layers)} layers, {length_text(board_thickness(scenario), scenario.report.lengths)} thick"
         + (f"; {result.impossible:,} coupons cannot exist and count as failing" if result.impossible else "")
         + f". Yield: share of coupons inside the limits; its ends: 95 % interval of {intervals_of(result)}.",
         _font()),
        (CAUTION, _font(italic=True)),
    ]
    for row, (sentence, font) in enumerate(sentences, start=1):
        _put(sheet, row, 1, sentence).font = font
        sheet.row_dimensions[row].height = 1.5 * float(font.size or 11.0)
    placed = Placed(sheet, summary_table(result), len(sentences) + 2)
    _write_table(sheet, placed.table, top=placed.top)
    _mark_misses(placed, target_yield=result.target_yield)
    sheet.freeze_panes = f"B{placed.top + 1}"
    return placed


def _write_table(sheet: Worksheet, table: Table, *, top: int) -> None:
    """Headings in row `top`, filterable, and the rows below them."""
    widths = [_width(table, column) for column in range(len(table.columns))]
    for column, heading in enumerate(table.columns, start=1):
        cell = _put(sheet, top, column, heading.head)
        cell.font = _font(bold=True)
        cell.fill = PatternFill("solid", start_color=HEAD_FILL)
        cell.border = Border(bottom=Side(style="thin", color=HAIRLINE))
        cell.alignment = _alignment(table, column - 1, widths[column - 1], heading=True)
        sheet.column_dimensions[get_column_letter(column)].width = widths[column - 1]
    sheet.row_dimensions[top].height = ROW * max(
        _head_rows(heading, width) for heading, width in zip(table.columns, widths, strict=True))
    alignments = [_alignment(table, column, width) for column, width in enumerate(widths)]
    for row, cells in enumerate(table.rows, start=top + 1):
        for column, (heading, value) in enumerate(zip(table.columns, cells, strict=True), start=1):
            cell = _put(sheet, row, column, value)
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


def _alignment(table: Table, column: int, width: float, *, heading: bool = False) -> Alignment:
    """Columns of numbers stand on the right, heading included; text on the left, away from the numbers before it.

    Headings, and texts too long for the widest column, go on in further rows of their cell.
    """
    numbers = any(isinstance(row[column], int | float) for row in table.rows)
    numbers = numbers and not any(isinstance(row[column], str) for row in table.rows)
    return Alignment(vertical="top", horizontal="right" if numbers else "left", indent=0 if numbers else 1,
                     wrap_text=heading or width >= WIDEST)


def number_format(column: Column) -> str:
    """How a spreadsheet shows a column's numbers."""
    if column.digits is None:
        return "General"
    places = f"0.{'0' * column.digits}" if column.digits else "0"
    return f"{places}%" if column.unit == "share" else places


def _width(table: Table, column: int) -> float:
    """Letters that the cells of a column need; its heading may take three rows."""
    heading = table.columns[column]
    longest_word = max(len(word) for word in heading.head.split())
    cells = max((len(_shown(heading, row[column])) for row in table.rows), default=0)
    return min(max(NARROWEST, len(heading.head) / 2.0, longest_word + 4, cells + 3), WIDEST)


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


def _mark_misses(placed: Placed, *, target_yield: float) -> None:
    """Mark yield and verdict of the lines under the target; the verdict says so in words too."""
    first, last = placed.top + 1, placed.top + max(len(placed.table.rows), 1)
    letter = get_column_letter(placed.column("yield"))
    for key in ("name", "yield", "verdict"):
        marked = get_column_letter(placed.column(key))
        look = DifferentialStyle(font=Font(bold=True, color=FAIL), fill=PatternFill(bgColor=FAIL_FILL))
        rule = Rule(type="expression", dxf=look,
                    formula=[f"AND(ISNUMBER(${letter}{first}),${letter}{first}<{target_yield!r})"])
        placed.sheet.conditional_formatting.add(f"{marked}{first}:{marked}{last}", rule)


def _record_sheet(sheet: Worksheet, result: RunResult) -> None:
    record = result.record
    rows: list[tuple[Cell, ...]] = [
        ("title", result.title), ("scenario file", record.scenario_path), ("seed", result.seed),
        ("coupons", result.coupons), ("independent replicates", record.replicates),
        ("target yield", result.target_yield), ("field solver runs", record.solver_runs),
        ("of them from the cache", record.from_cache),
        ("largest held-out error [ohm]", max((line.prediction.held_out_largest for line in result.lines), default=0.0)),
        *((f"setting: {name}", value) for name, value in record.settings.items()),
        *((f"version: {name}", value) for name, value in record.versions.items()),
        *((f"seconds: {name}", round(float(value), 3)) for name, value in record.seconds.items()),
        *(("scenario text", text) for line in record.scenario_text.splitlines() for text in _pieces(line)),
    ]
    _write_table(sheet, Table((Column("item", "item"), Column("value", "value")), tuple(rows)), top=1)
    sheet.column_dimensions["B"].width = RECORD_WIDTH
    for number, (_, value) in enumerate(rows, start=2):
        sheet.row_dimensions[number].height = ROW * max(len(textwrap.wrap(str(value), RECORD_WIDTH)), 1)
    sheet.freeze_panes = "B2"


def _pieces(line: str) -> list[str]:
    """A line of text in pieces that a cell takes."""
    return [line[start:start + LONGEST_TEXT] for start in range(0, max(len(line), 1), LONGEST_TEXT)]


def _put(sheet: Worksheet, row: int, column: int, value: Cell) -> SheetCell:
    """Write one cell. Text stays text, also where it begins like a formula."""
    cell = sheet.cell(row=row, column=column)
    assert isinstance(cell, SheetCell)
    if isinstance(value, str):
        cell.value = clean_text(value)
        cell.data_type = "s"
        if value.startswith(LIKE_A_FORMULA):
            cell.quotePrefix = True
    elif value is not None:
        cell.value = value
    return cell


def _font(size: float = 11.0, *, bold: bool = False, italic: bool = False, color: str = INK) -> Font:
    return Font(name="Calibri", size=size, bold=bold, italic=italic, color=color)
