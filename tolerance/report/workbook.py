"""The workbook of a run: summary, lines, drivers, the scenario as understood, and what re-makes the run."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING

from openpyxl import Workbook
from openpyxl.formatting.rule import Rule
from openpyxl.styles import Alignment, Font, PatternFill
from openpyxl.styles.differential import DifferentialStyle
from openpyxl.utils import get_column_letter

from tolerance.report.charts import Placed, draw_charts
from tolerance.report.files import put_workbook_in_place
from tolerance.report.lots_tables import (
    acceptance_sentence,
    acceptance_table,
    level_driver_table,
    level_table,
    reading_table,
)
from tolerance.report.measured import intervals_of, measured_table
from tolerance.report.note_text import note_table
from tolerance.report.sheet_tables import INK, ROW, lettering, put, write_table
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
from tolerance.report.wording import CAUTION, LengthUnit, headline_text, length_text, share_range_text, trimmed

if TYPE_CHECKING:
    from pathlib import Path

    from openpyxl.worksheet.worksheet import Worksheet

    from tolerance.noted import NoteResult
    from tolerance.results import RunResult
    from tolerance.scenario.tables import Scenario

FAIL, FAIL_FILL = "A3184B", "F3D5DF"
NOTE_SHEET = "Drawing note"
NOTE_COLUMNS = 9  # of the impedance table, over which the notes go
LONGEST_TEXT = 32_000  # letters that a cell takes, with some room
RECORD_WIDTH = 120  # letters, of the values of the run record: whole lines of a scenario


def write_workbook(result: RunResult, scenario: Scenario, path: Path, note: NoteResult | None = None) -> Path:
    """Write the workbook, whole or not at all. Raises UnfinishedError where it cannot be written."""
    return put_workbook_in_place(path, workbook(result, scenario, note))


def workbook(result: RunResult, scenario: Scenario, note: NoteResult | None = None) -> Workbook:
    """The workbook, not yet written. note : for the fabrication drawing, which gets a sheet of its own."""
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
        write_table(placed[name].sheet, table, top=1)
        placed[name].sheet.freeze_panes = "B2"
    _acceptance_sheet(book, result)
    if note is not None:
        _note_sheet(book.create_sheet(NOTE_SHEET, book.sheetnames.index("Stackup")), note, scenario.report.lengths)
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
        put(sheet, 1, 1, acceptance_sentence(result.acceptance)).font = lettering(12, bold=True)
        write_table(sheet, acceptance_table(result.acceptance), top=3)
        sheet.freeze_panes = "A4"


def _note_sheet(sheet: Worksheet, note: NoteResult, lengths: LengthUnit) -> None:
    """The impedance table for the fabrication drawing, and the notes below it."""
    table = note_table(note, lengths)
    put(sheet, 1, 1, f"Impedance table: {note.title}").font = lettering(14, bold=True)
    sheet.row_dimensions[1].height = 1.5 * 14
    write_table(sheet, table, top=3)
    sheet.auto_filter.ref = None
    across = min(len(table.columns), NOTE_COLUMNS)
    letters = sum(sheet.column_dimensions[get_column_letter(column)].width for column in range(1, across + 1))
    for row, text in enumerate(note.notes, start=len(table.rows) + 5):
        words = f"{row - len(table.rows) - 4}. {text}"
        put(sheet, row, 1, words).alignment = Alignment(vertical="top", wrap_text=True)
        sheet.merge_cells(start_row=row, start_column=1, end_row=row, end_column=across)
        sheet.row_dimensions[row].height = ROW * (len(textwrap.wrap(words, int(0.95 * letters))) + 0.5)
    sheet.freeze_panes = "B4"


def _summary_sheet(sheet: Worksheet, result: RunResult, scenario: Scenario) -> Placed:
    missing = [line.name for line in result.lines if line.inside.value < result.target_yield]
    aim = f"{trimmed(100.0 * result.target_yield, 3)} %"
    ends = share_range_text(result.inside)
    sentences = [
        (result.title, lettering(16, bold=True)),
        (f"{headline_text(result.inside)} of the coupons pass on every line (95 % interval {ends} %; "
         f"{result.coupons:,} coupons, seed {result.seed}).", lettering(13, bold=True)),
        (f"{len(missing)} of {len(result.lines)} lines {'MISS' if len(missing) != 1 else MISSES} the target yield "
         f"of {aim}." if missing else f"Every line meets the target yield of {aim}.",
         lettering(12, bold=bool(missing), color=FAIL if missing else INK)),
        (f"{len(scenario.layers)} layers, {length_text(board_thickness(scenario), scenario.report.lengths)} thick"
         + (f"; {result.impossible:,} coupons cannot exist and count as failing" if result.impossible else "")
         + f". Yield: share of coupons inside the limits; its ends: 95 % interval of {intervals_of(result)}.",
         lettering()),
        (CAUTION, lettering(italic=True)),
    ]
    for row, (sentence, font) in enumerate(sentences, start=1):
        put(sheet, row, 1, sentence).font = font
        sheet.row_dimensions[row].height = 1.5 * float(font.size or 11.0)
    placed = Placed(sheet, summary_table(result), len(sentences) + 2)
    write_table(sheet, placed.table, top=placed.top)
    _mark_misses(placed, target_yield=result.target_yield)
    sheet.freeze_panes = f"B{placed.top + 1}"
    return placed


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
    write_table(sheet, Table((Column("item", "item"), Column("value", "value")), tuple(rows)), top=1)
    sheet.column_dimensions["B"].width = RECORD_WIDTH
    for number, (_, value) in enumerate(rows, start=2):
        sheet.row_dimensions[number].height = ROW * max(len(textwrap.wrap(str(value), RECORD_WIDTH)), 1)
    sheet.freeze_panes = "B2"


def _pieces(line: str) -> list[str]:
    """A line of text in pieces that a cell takes."""
    return [line[start:start + LONGEST_TEXT] for start in range(0, max(len(line), 1), LONGEST_TEXT)]
