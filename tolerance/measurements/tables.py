"""Tables of measured values, CSV or XLSX: headings in the first row that holds anything, a reading in every row below.

Nothing is guessed silently and nothing is left out: what is not a number is told with its row, as a spreadsheet counts
rows. Of an XLSX the values are read that were last saved; no formula is evaluated, one without a saved value is text.
"""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

from tolerance.errors import InputError
from tolerance.measurements.archive import TABLE, has_formulas, why_not

Cell = str | float | None
LARGEST_FILE = 20_000_000  # bytes
MOST_ROWS, MOST_COLUMNS, MOST_CELLS = 200_000, 1_000, 2_000_000
_SEPARATOR_LINE = re.compile(r"sep=(.)")
_EMPTY = "is empty; it needs a row of headings and readings below it"
_NO_SEPARATOR = "\x1f"  # a table of one column


class TableError(InputError):
    """A table that cannot be read; the message names what, and where it stands by its row."""


@dataclass(frozen=True, slots=True)
class Row:
    """The cells of one row; `number` as a spreadsheet counts, from 1."""

    number: int
    cells: tuple[Cell, ...]


@dataclass(frozen=True, slots=True)
class MeasuredTable:
    """Headings, and the rows below them that hold anything."""

    headings: tuple[str, ...]
    rows: tuple[Row, ...]

    def column(self, heading: str) -> tuple[tuple[int, Cell], ...]:
        """(row number, cell) of the column with this heading. TableError where there is none, or more than one."""
        places = [place for place, name in enumerate(self.headings) if name == heading]
        if len(places) != 1:
            named = ", ".join(f'"{name}"' for name in self.headings if name)
            found = "there is none" if not places else f"there are {len(places)}"
            raise TableError(f'must be the heading of a column; of "{heading}" {found} (headings: {named or "none"})')
        place = places[0]
        return tuple((row.number, row.cells[place] if place < len(row.cells) else None) for row in self.rows)


def read_table(path: Path, *, sheet: str | None = None) -> MeasuredTable:
    """The table in a CSV or XLSX file. `sheet`: of an XLSX, its only one if left out. Raises TableError."""
    try:
        if path.is_dir():
            raise TableError("is a folder; a table is a CSV or XLSX file")
        if not path.is_file():
            raise TableError("there is no such file")
        if path.stat().st_size > LARGEST_FILE:
            raise TableError(f"is larger than {LARGEST_FILE // 1_000_000} MB")
        content = path.read_bytes()
    except OSError as problem:
        raise TableError(f"cannot be read: {problem.strerror or problem}") from None
    except ValueError:
        raise TableError("is not the path of a file") from None
    if path.suffix.lower() == ".xlsx":
        return _table(_workbook_rows(content, sheet))
    return _table(_text_rows(content))


def _table(rows: Iterator[Row]) -> MeasuredTable:
    filled = (row for row in rows if any(not is_blank(cell) for cell in row.cells))
    first = next(filled, None)
    if first is None:
        raise TableError(_EMPTY)
    headings = tuple("" if is_blank(cell) else str(cell).strip() for cell in first.cells)
    while headings and not headings[-1]:
        headings = headings[:-1]
    below = tuple(filled)
    for row in below:
        if any(not is_blank(cell) for cell in row.cells[len(headings):]):
            raise TableError(f"row {row.number} has more cells than there are headings (a table separated by commas "
                             "cannot have decimal commas: separate it by semicolons)")
    if not below:
        raise TableError("has headings and no readings below them")
    return MeasuredTable(headings, below)


def is_blank(cell: Cell) -> bool:
    """Whether the cell holds nothing, or nothing but blanks."""
    return cell is None or (isinstance(cell, str) and not cell.strip())


def _text_rows(content: bytes) -> Iterator[Row]:
    if content.startswith((b"PK\x03\x04", b"\xd0\xcf\x11\xe0")):
        raise TableError("is a workbook, whose name must end in .xlsx, or no table at all")
    if content.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise TableError("must be UTF-8 text: it begins as UTF-16 does; save it as CSV UTF-8")
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as problem:
        line = content.count(b"\n", 0, problem.start) + 1
        raise TableError(f"must be UTF-8 text: line {line} holds a byte that is not; save it as CSV UTF-8") from None
    if not text.strip(" ;,\t\r\n\""):
        raise TableError(_EMPTY)
    if "\0" in text:
        raise TableError("must be text; it holds binary data")
    if content.count(b"\n") > MOST_ROWS and b'"' not in content:
        raise TableError(f"has more than {MOST_ROWS} rows")
    separator, skipped = _separator(text)
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=separator, strict=True)
    held = 0
    try:
        for number, cells in enumerate(reader, start=1):
            if number > MOST_ROWS:
                raise TableError(f"has more than {MOST_ROWS} rows")
            held += len(cells)
            if len(cells) > MOST_COLUMNS or held > MOST_CELLS:
                raise TableError(f"has more than {MOST_COLUMNS} columns or {MOST_CELLS} cells")
            if number > skipped:
                yield Row(number, tuple(cells))
    except csv.Error as problem:
        raise TableError(f"line {reader.line_num}: {_csv_words(str(problem))}") from None


def _csv_words(reason: str) -> str:
    """What the reader of CSV complains of, in our words; its own where they are not known."""
    known = {"unexpected end of data": "a quote is opened and never closed",
             "expected after": "something follows a closing quote",
             "field larger than field limit": "a cell is too long: is a quote opened and never closed?"}
    return next((words for part, words in known.items() if part in reason), reason)


def _separator(text: str) -> tuple[str, int]:
    """What separates cells, by the row of headings: the most frequent of ; tab and comma outside quotes; and how many
    rows come before the headings because they say so (`sep=;`)."""
    lines = text.splitlines()
    if lines and (told := _SEPARATOR_LINE.fullmatch(lines[0].strip())):
        return told[1], 1
    headings = re.sub(r'"[^"]*"', "", next((line for line in lines if line.strip(" ;,\t")), ""))
    counts = {mark: headings.count(mark) for mark in (";", "\t", ",")}
    mark = max(counts, key=lambda one: counts[one])
    return (mark if counts[mark] else _NO_SEPARATOR), 0


def _workbook_rows(content: bytes, sheet: str | None) -> Iterator[Row]:
    reason = why_not(content, TABLE)
    if reason:
        raise TableError(reason)
    from openpyxl import load_workbook

    unreadable = (KeyError, ValueError, TypeError, AttributeError, SyntaxError, IndexError, OSError, EOFError)
    def rows(*, stored: bool) -> Iterator[tuple[object, ...]]:
        book = load_workbook(io.BytesIO(content), read_only=True, data_only=stored, keep_links=False)
        chosen = book[_sheet_name(book.sheetnames, sheet)]
        if not hasattr(chosen, "reset_dimensions"):
            raise TableError("holds a chart where a sheet with cells is wanted")
        chosen.reset_dimensions()  # what the file says of its size is not believed
        yield from chosen.iter_rows(values_only=True)

    try:
        stored = rows(stored=True)
        both = zip(stored, rows(stored=False), strict=True) if has_formulas(content) else ((row, row) for row in stored)
        for number, (values, formulas) in enumerate(both, start=1):
            yield Row(number, tuple(_cell(formula if value is None else value)
                                    for value, formula in zip(values, formulas, strict=True)))
    except unreadable:
        raise TableError("is not a readable XLSX file") from None


def _sheet_name(names: Sequence[str], sheet: str | None) -> str:
    listed = ", ".join(f'"{name}"' for name in names)
    if sheet is None and len(names) != 1:
        raise TableError(f"has several sheets, {listed}: say which with `sheet`")
    if sheet is not None and sheet not in names:
        raise TableError(f'has no sheet "{sheet}"; it has {listed}')
    return sheet or names[0]


def _cell(value: object) -> Cell:
    if value is None or isinstance(value, str):
        return value
    if isinstance(value, (int, float)) and not isinstance(value, bool):
        return float(value)
    return str(value)  # a date, a truth value: text, told with its row
