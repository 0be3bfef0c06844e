"""The workbook that goes to the fabricator: what is asked, how to fill it in, and the lines unless they are hidden."""

from __future__ import annotations

from typing import TYPE_CHECKING

from openpyxl import Workbook
from openpyxl.styles import Alignment, Border, Font, PatternFill, Side
from openpyxl.utils import get_column_letter
from openpyxl.worksheet.datavalidation import DataValidation
from openpyxl.worksheet.properties import PageSetupProperties

from tolerance.report.files import put_workbook_in_place
from tolerance.report.sheet_tables import put
from tolerance.report.sheet_text import clean_text
from tolerance.report.wording import LengthUnit, length_text, percent, trimmed
from tolerance.scenario.amounts import Amount
from tolerance.scenario.properties import MEASURE
from tolerance.sheet.layout import (
    BASES,
    HEADINGS,
    HELP_SHEET,
    LENGTHS,
    LINES_SHEET,
    PROPERTY_WORDS,
    TABLE_SHEET,
    Heading,
    name_of,
    units_for,
    usual_unit,
)

if TYPE_CHECKING:
    from pathlib import Path

    from openpyxl.worksheet.worksheet import Worksheet

    from tolerance.exchanged import Request, RequestRow
    from tolerance.scenario.properties import Property
    from tolerance.scenario.tables import Line, Scenario, Variation

INK, HEAD_FILL, ANSWER_HEAD, ANSWER_FILL, HAIRLINE = "1D2433", "DBE3EC", "F3E3B8", "FFFBEE", "B4BAC8"
HEAD_ROW = 5
DECIDES, COUNTS = 0.10, 0.01  # of all weights: above the first a row decides, above the second it counts
LEAST_SHOWN = 0.005  # of a line's variance: less is not worth a word
WIDTHS = {"name": 24, "words": 34, "nominal": 22, "importance": 12, "lines": 30, "assumed": 15, "assumed_basis": 20,
          "tolerance": 12, "unit": 9, "basis": 12, "cpk": 8, "mean": 14, "deviation": 14, "tighter": 12, "price": 13,
          "remarks": 32}
_SHAPE_WORDS = {"uniform": "limits, all between alike", "triangular": "limits, middle likelier",
                "truncated_normal": "normal, cut there", "measured": "measured"}


def write_request(request: Request, path: Path, *, hide_targets: bool = False) -> Path:
    """Write the workbook, whole or not at all. hide_targets : no targets, limits or line names in it."""
    return put_workbook_in_place(path, request_workbook(request, hide_targets=hide_targets))


def request_workbook(request: Request, *, hide_targets: bool = False) -> Workbook:
    """The workbook, not yet written."""
    book = Workbook()
    book.properties.creator = "tolerance"
    book.properties.title = clean_text(request.scenario.title)
    sheet = book.active
    assert sheet is not None
    headings = tuple(heading for heading in HEADINGS if not (hide_targets and heading.key == "lines"))
    sheet.title = TABLE_SHEET
    _table_sheet(sheet, request, headings)
    _help_sheet(book.create_sheet(HELP_SHEET), headings, hide_targets=hide_targets)
    if not hide_targets:
        _lines_sheet(book.create_sheet(LINES_SHEET), request.scenario)
    return book


def _table_sheet(sheet: Worksheet, request: Request, headings: tuple[Heading, ...]) -> None:
    scenario = request.scenario
    put(sheet, 1, 1, scenario.title).font = _font(16, bold=True)
    put(sheet, 2, 1, "How closely do you hold these? Please fill in the yellow columns as far as you can, the first "
        "rows first, and send the file back.").font = _font(12)
    put(sheet, 3, 1, f"What each column means stands on the sheet \"{HELP_SHEET}\". An empty cell says: our assumption "
        "may stand.").font = _font()
    for column, heading in enumerate(headings, start=1):
        cell = put(sheet, HEAD_ROW, column, heading.words)
        cell.font = _font(bold=True)
        cell.fill = PatternFill("solid", start_color=ANSWER_HEAD if heading.answer else HEAD_FILL)
        cell.alignment = Alignment(wrap_text=True, vertical="top", horizontal="left")
        cell.border = _line()
        sheet.column_dimensions[get_column_letter(column)].width = WIDTHS[heading.key]
    sheet.row_dimensions[HEAD_ROW].height = 48
    for number, row in enumerate(request.rows, start=HEAD_ROW + 1):
        texts = _texts(scenario, row)
        for column, heading in enumerate(headings, start=1):
            cell = put(sheet, number, column, texts.get(heading.key))
            cell.alignment = Alignment(wrap_text=True, vertical="top", horizontal="left")
            cell.border = _box() if heading.answer else _line()
            if heading.answer:
                cell.fill = PatternFill("solid", start_color=ANSWER_FILL)
        longest = max(-(-len(str(texts.get(heading.key) or "")) // (WIDTHS[heading.key] - 3)) for heading in headings)
        sheet.row_dimensions[number].height = 15.5 * max(longest, 1)
    _checks(sheet, request, headings)
    sheet.freeze_panes = f"B{HEAD_ROW + 1}"
    _page(sheet, f"{HEAD_ROW}:{HEAD_ROW}")


def _checks(sheet: Worksheet, request: Request, headings: tuple[Heading, ...]) -> None:
    """Lists to choose from, and numbers that warn where they cannot be meant; a unit may be typed behind a number."""
    first, last = HEAD_ROW + 1, HEAD_ROW + max(len(request.rows), 1)
    letters = {heading.key: get_column_letter(column) for column, heading in enumerate(headings, start=1)}

    def add(check: DataValidation, where: str, title: str, prompt: str) -> None:
        check.promptTitle, check.prompt, check.showInputMessage = title, prompt, True
        check.errorTitle, check.showErrorMessage = title, True
        sheet.add_data_validation(check)
        check.add(where)

    basis = DataValidation(type="list", formula1=f'"{",".join(BASES)}"', allow_blank=True, errorStyle="stop",
                           error=f"One of: {', '.join(BASES)}.")
    add(basis, f"{letters['basis']}{first}:{letters['basis']}{last}", "What the tolerance is", "Choose from the list.")
    above_zero = {"tolerance": "Half of the whole width, above 0.", "cpk": "Such as 1.33.",
                  "deviation": "One standard deviation, above 0.", "tighter": "Half of the whole width, above 0."}
    for key, prompt in above_zero.items():
        check = DataValidation(type="decimal", operator="greaterThan", formula1="0", allow_blank=True,
                               errorStyle="warning", error="Not a number above 0. Keep it only if a unit is in it.")
        add(check, f"{letters[key]}{first}:{letters[key]}{last}", _heading(key).words[:32], prompt)
    mean = DataValidation(type="decimal", operator="between", formula1="-10000", formula2="10000", allow_blank=True,
                          errorStyle="warning", error="Not a number. Keep it only if a unit is in it.")
    add(mean, f"{letters['mean']}{first}:{letters['mean']}{last}", _heading("mean").words[:32],
        "With its sign: -2 where your mean lies 2 below the nominal.")
    price = DataValidation(type="decimal", operator="greaterThanOrEqual", formula1="0", allow_blank=True,
                           errorStyle="warning", error="Not a price of 0 or more.")
    add(price, f"{letters['price']}{first}:{letters['price']}{last}", _heading("price").words[:32],
        "What the tighter tolerance costs more, per panel.")
    for number, row in enumerate(request.rows, start=first):
        units = DataValidation(type="list", formula1=f'"{",".join(units_for(row.members))}"', allow_blank=True,
                               errorStyle="stop", error=f"One of: {', '.join(units_for(row.members))}.")
        add(units, f"{letters['unit']}{number}", "Unit", "Of the numbers in this row.")


def _heading(key: str) -> Heading:
    return next(heading for heading in HEADINGS if heading.key == key)


def _texts(scenario: Scenario, row: RequestRow) -> dict[str, str]:
    lengths = scenario.report.lengths
    variation = row.variation
    return {
        "name": name_of(variation.of), "words": _words(row.members),
        "nominal": _nominals(row.members, lengths), "importance": importance(row.weight),
        "lines": ", ".join(f"{name} {percent(share, 0)}" for name, share in row.lines[:3] if share >= LEAST_SHOWN),
        "assumed": assumed_tolerance(variation, row.members, lengths), "assumed_basis": assumed_basis(variation),
        "unit": usual_unit(variation, row.members, lengths),
    }


def importance(weight: float) -> str:
    """A row's weight in a word."""
    return "decides" if weight >= DECIDES else "counts" if weight >= COUNTS else "little"


def _words(members: tuple[Property, ...]) -> str:
    """ "thickness of P1, P3; Dk of P1"."""
    layers: dict[str, list[str]] = {}
    for member in members:
        layers.setdefault(member.property, []).append(member.layer)
    return "; ".join(f"{PROPERTY_WORDS[name]} {', '.join(each)}" for name, each in layers.items())


def _nominals(members: tuple[Property, ...], lengths: LengthUnit) -> str:
    if all(member.property == "etch" for member in members):
        return "as drawn"
    shown = [_value(member.nominal, member, lengths) for member in members]
    if len(set(shown)) == 1:
        return shown[0]
    several = len({member.property for member in members}) > 1
    return ", ".join(f"{member.name if several else member.layer} {text}"
                     for member, text in zip(members, shown, strict=True))


def _value(value: float, member: Property, lengths: LengthUnit) -> str:
    measure = MEASURE[member.property]
    if measure in LENGTHS:
        return length_text(value, lengths)
    return percent(value, 1) if measure == "share" else trimmed(value, 4)


def assumed_tolerance(variation: Variation, members: tuple[Property, ...], lengths: LengthUnit) -> str:
    """ "+-10 %" or "2.5 to 3.5", with the shift of the mean where one is assumed."""
    member = members[0]
    if variation.low is not None and variation.high is not None:
        text = f"{_value(variation.low, member, lengths)} to {_value(variation.high, member, lengths)}"
    else:
        text = "" if variation.tolerance is None else f"+-{_amount(variation.tolerance, member, lengths)}"
    if variation.shift is not None and variation.shift.value:
        text += f", mean {'+' if variation.shift.value > 0.0 else ''}{_amount(variation.shift, member, lengths)}"
    return text


def _amount(amount: Amount, member: Property, lengths: LengthUnit) -> str:
    return f"{trimmed(100.0 * amount.value, 3)} %" if amount.relative else _value(amount.value, member, lengths)


def assumed_basis(variation: Variation) -> str:
    """How the half-width is read, in words."""
    if variation.cpk is not None:
        return f"Cpk {trimmed(variation.cpk, 3)}"
    if variation.shape in ("uniform", "triangular", "measured"):
        return _SHAPE_WORDS[variation.shape]
    words = f"{trimmed(variation.sigmas_or_default, 3)} sigma"
    extra = {"truncated_normal": ", nothing beyond", "lognormal": ", skewed high"}.get(variation.shape, "")
    return words + extra


def _help_sheet(sheet: Worksheet, headings: tuple[Heading, ...], *, hide_targets: bool) -> None:
    put(sheet, 1, 1, "How to fill in the sheet").font = _font(16, bold=True)
    sentences = [
        f"Only the yellow columns of \"{TABLE_SHEET}\" are yours; fill in what you know and leave the rest empty.",
        "Numbers may have decimal points or commas, and a unit typed behind them (8 um, 7 %). Columns may be moved and "
        "hidden, rows skipped; please keep the headings and our names of the dimensions.",
        "Your numbers are read by a program. Whatever it cannot read we shall ask you about, by its cell.",
    ]
    if not hide_targets:
        sentences.append(f"\"{LINES_SHEET}\" shows the lines whose impedance is controlled.")
    for number, sentence in enumerate(sentences, start=2):
        put(sheet, number, 1, sentence).alignment = Alignment(wrap_text=True, vertical="top")
        sheet.merge_cells(start_row=number, start_column=1, end_row=number, end_column=3)
        sheet.row_dimensions[number].height = 15.5 * (1 + len(sentence) // 115)
    top = len(sentences) + 3
    rows: list[tuple[str, str, str]] = [("Column", "Filled in by", "Meaning")]
    rows += [(heading.words, "you" if heading.answer else "us", heading.explained) for heading in headings]
    for number, cells in enumerate(rows, start=top):
        for column, text in enumerate(cells, start=1):
            cell = put(sheet, number, column, text)
            cell.alignment = Alignment(wrap_text=True, vertical="top")
            cell.border = _line()
            if number == top:
                cell.font = _font(bold=True)
                cell.fill = PatternFill("solid", start_color=HEAD_FILL)
            elif cells[1] == "you":
                cell.fill = PatternFill("solid", start_color=ANSWER_FILL)
        sheet.row_dimensions[number].height = 15.5 * (1 + len(cells[2]) // 78)
    for letter, width in (("A", 30), ("B", 13), ("C", 88)):
        sheet.column_dimensions[letter].width = width
    _page(sheet, f"{top}:{top}")


def _lines_sheet(sheet: Worksheet, scenario: Scenario) -> None:
    heads = ("Line", "Layer", f"Drawn width [{scenario.report.lengths}]", f"Gap [{scenario.report.lengths}]",
             "Target [ohm]", "Limit, +- [%]")
    for column, head in enumerate(heads, start=1):
        cell = put(sheet, 1, column, head)
        cell.font = _font(bold=True)
        cell.fill = PatternFill("solid", start_color=HEAD_FILL)
        cell.alignment = Alignment(wrap_text=True, vertical="top")
        cell.border = _line()
        sheet.column_dimensions[get_column_letter(column)].width = 30 if column == 1 else 20
    for number, line in enumerate(scenario.lines, start=2):
        for column, value in enumerate(_line_cells(scenario, line), start=1):
            put(sheet, number, column, value).border = _line()
    sheet.freeze_panes = "A2"
    _page(sheet, "1:1")


def _line_cells(scenario: Scenario, line: Line) -> tuple[str | float | None, ...]:
    unit = 1e-6 if scenario.report.lengths == "um" else 25.4e-6
    gap = None if line.gap is None else round(line.gap / unit, 3)
    return (line.name, line.layer, round(line.width / unit, 3), gap, float(line.target),
            round(100.0 * scenario.limit_of(line), 6))


def _page(sheet: Worksheet, titles: str) -> None:
    sheet.sheet_view.showGridLines = False
    sheet.page_setup.orientation = "landscape"
    sheet.page_setup.fitToHeight = 0
    sheet.sheet_properties.pageSetUpPr = PageSetupProperties(fitToPage=True)
    sheet.print_title_rows = titles


def _line() -> Border:
    return Border(bottom=Side(style="thin", color=HAIRLINE))


def _box() -> Border:
    side = Side(style="thin", color=HAIRLINE)
    return Border(left=side, right=side, top=side, bottom=side)


def _font(size: float = 11.0, *, bold: bool = False) -> Font:
    return Font(name="Calibri", size=size, bold=bold, color=INK)
