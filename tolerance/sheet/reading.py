"""A filled sheet read back: what is recognized is taken, and what is not is said with the address of its cell.

The table is found by its headings, wherever it has been moved to: on whatever sheet, in whatever order of columns,
with blank rows between. No formula is evaluated.
"""

from __future__ import annotations

import difflib
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from openpyxl import load_workbook
from openpyxl.utils import get_column_letter

from tolerance.errors import InputError, as_toml
from tolerance.measurements.archive import safe_content
from tolerance.scenario.properties import members
from tolerance.scenario.tables import Scenario, Variation
from tolerance.sheet.cells import CellError, SeenCell, Typed, basis_named, typed_of, unit_named
from tolerance.sheet.layout import ABSOLUTE, HEADINGS, Heading, heading_of, name_of, plain, units_for

MOST_ROWS, MOST_COLUMNS, HEAD_ROWS = 1000, 100, 60  # looked at on a sheet; rows in which the headings may stand
LEAST_HEADINGS = 3
_ANSWERS = tuple(heading.key for heading in HEADINGS if heading.answer and heading.key != "unit")

Grid = tuple[tuple[SeenCell, ...], ...]


@dataclass(frozen=True, slots=True)
class Note:
    """Something that could not be taken: the cell ("Tolerances!H7", or the sheet alone) and why."""

    address: str
    said: str

    def __str__(self) -> str:
        return f"{self.address}: {self.said}"


@dataclass(frozen=True, slots=True)
class Answer:
    """What a row says of one variation. `places` : address of each cell that was taken, by key."""

    variation: Variation
    tolerance: Typed | None = None
    basis: str | None = None
    cpk: float | None = None
    mean: Typed | None = None
    deviation: Typed | None = None
    tighter: Typed | None = None
    price: float | None = None
    remarks: str = ""
    places: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Reply:
    """A filled sheet: an answer for each row that holds one, what could not be read, and the sheet it stands on.

    rows : the variations that have a row, answered or not.
    """

    sheet: str
    rows: tuple[Variation, ...]
    answers: tuple[Answer, ...]
    notes: tuple[Note, ...]


def read_reply(path: Path, scenario: Scenario) -> Reply:
    """The answers in a filled sheet to the variations of `scenario`.

    Raises InputError where the file is no XLSX that is safe to read, or has no table with our headings.
    """
    grids = _grids(path)
    found = [(name, *_headings(grid)) for name, grid in grids.items()]
    best = max(found, key=lambda one: len(one[2]), default=None)
    if best is None or len(best[2]) < LEAST_HEADINGS or "name" not in best[2].values():
        wanted = ", ".join(f'"{heading.words}"' for heading in HEADINGS if heading.key in ("name", "tolerance", "unit"))
        raise InputError(f"{path}: no sheet in it has the headings of the sheet that was sent, such as {wanted}")
    name, head, columns = best
    notes: list[Note] = []
    return _Table(name, grids[name], head, _without_repeats(grids[name], head, columns, notes), scenario, notes).reply()


def _grids(path: Path) -> dict[str, Grid]:
    """The cells of every sheet, by its name."""
    content = safe_content(path)
    try:
        values = load_workbook(content, read_only=True, data_only=True, keep_links=False)
        content.seek(0)
        texts = load_workbook(content, read_only=True, data_only=False, keep_links=False)
        return {sheet.title: _grid(sheet, texts[sheet.title]) for sheet in values.worksheets}
    except (KeyError, ValueError, TypeError, AttributeError, SyntaxError, IndexError, OSError, EOFError):
        raise InputError(f"{path}: is not a readable XLSX workbook") from None


def _grid(values: Any, texts: Any) -> Grid:
    rows = []
    span = {"max_row": MOST_ROWS, "max_col": MOST_COLUMNS}
    values.reset_dimensions()
    texts.reset_dimensions()
    pairs = zip(values.iter_rows(**span), texts.iter_rows(**span), strict=False)
    for number, (row, formulas) in enumerate(pairs, start=1):
        rows.append(tuple(
            SeenCell(f"{values.title}!{get_column_letter(column)}{number}", cell.value,
                     str(getattr(cell, "number_format", "General") or "General"),
                     formula=getattr(formula, "data_type", "n") == "f")
            for column, (cell, formula) in enumerate(zip(row, formulas, strict=False), start=1)))
    return tuple(rows)


def _headings(grid: Grid) -> tuple[int, dict[int, str]]:
    """The row with most of our headings, and the key of each column that has one."""
    best: tuple[int, dict[int, str]] = (0, {})
    for number, row in enumerate(grid[:HEAD_ROWS]):
        keys = {column: heading.key for column, cell in enumerate(row) if (heading := _heading(cell))}
        if len(keys) > len(best[1]):
            best = (number, keys)
    return best


def _heading(cell: SeenCell) -> Heading | None:
    return heading_of(cell.value) if isinstance(cell.value, str) else None


def _without_repeats(grid: Grid, head: int, columns: Mapping[int, str], notes: list[Note]) -> dict[str, int]:
    """Column by key. Of a heading that stands twice neither is taken; unknown and missing columns are told."""
    kept: dict[str, int] = {}
    for heading in HEADINGS:
        places = [column for column, key in columns.items() if key == heading.key]
        if len(places) == 1:
            kept[heading.key] = places[0]
        elif len(places) > 1:
            where = " and ".join(grid[head][place].address.rpartition("!")[2] for place in places)
            notes.append(Note(grid[head][places[0]].address, f'the heading "{heading.words}" stands in {where}; '
                              "neither column is taken"))
        elif heading.answer:
            sheet = grid[head][0].address.rpartition("!")[0]
            notes.append(Note(sheet, f'there is no column headed "{heading.words}"; nothing is taken for it'))
    if "name" not in kept:
        raise InputError(f'the heading "{HEADINGS[0].words}" stands more than once: rows cannot be told')
    for column, cell in enumerate(grid[head]):
        below = any(not row[column].blank for row in grid[head + 1:] if column < len(row))
        if column not in columns and below:
            words = as_toml(cell.value) if not cell.blank else "without a heading"
            notes.append(Note(cell.address, f"a column {words} is not known; it is left aside"))
    return kept


@dataclass(slots=True)
class _Table:
    """The table while it is read; `notes` grows."""

    sheet: str
    grid: Grid
    head: int
    columns: Mapping[str, int]
    scenario: Scenario
    notes: list[Note]

    def reply(self) -> Reply:
        known = {plain(name_of(variation.of)): variation for variation in self.scenario.variations}
        answers: dict[str, Answer] = {}
        for row in self.grid[self.head + 1:]:
            name = self._cell(row, "name")
            filled = [key for key in _ANSWERS if (cell := self._cell(row, key)) and not cell.blank]
            if name is None or name.blank:
                if filled:
                    place = self._cell(row, filled[0])
                    self._note(place, "an answer in a row without a dimension; it is left aside")
                continue
            label = plain(str(name.value))
            variation = known.get(label)
            if variation is None:
                self._unknown(name, known)
            elif label in answers:
                self._note(name, f"{as_toml(name.value)} stands in an earlier row too; this row is left aside")
            else:
                answers[label] = self._answer(row, variation)
        filled_in = tuple(answer for answer in answers.values() if answer.places)
        return Reply(self.sheet, tuple(answer.variation for answer in answers.values()), filled_in, tuple(self.notes))

    def _answer(self, row: Sequence[SeenCell], variation: Variation) -> Answer:
        units = units_for(members(self.scenario, variation))
        places: dict[str, str] = {}
        unit = self._unit(row, units)

        def take(key: str, read: Callable[[SeenCell], Any]) -> Any:
            cell = self._cell(row, key)
            if cell is None or cell.blank:
                return None
            try:
                value = read(cell)
            except CellError as reason:
                self._note(cell, str(reason))
                return None
            places[key] = cell.address
            return value

        def amount(cell: SeenCell) -> Typed:
            return _amount(cell, unit, units)

        def half_width(cell: SeenCell) -> Typed:
            return _above_zero(amount(cell))

        basis = take("basis", _basis)
        cpk = take("cpk", _cpk)
        if basis is not None and basis[1] is not None and cpk is None:
            cpk = basis[1].number
        return Answer(
            variation, tolerance=take("tolerance", half_width), basis=None if basis is None else basis[0], cpk=cpk,
            mean=take("mean", amount), deviation=take("deviation", half_width), tighter=take("tighter", half_width),
            price=take("price", _price), remarks=take("remarks", lambda cell: str(cell.value).strip()) or "",
            places=places,
        )

    def _unit(self, row: Sequence[SeenCell], units: tuple[str, ...]) -> str:
        """The unit of the row; "" where it says none, or none that the row takes."""
        cell = self._cell(row, "unit")
        if cell is None or cell.blank:
            return ""
        unit = unit_named(str(cell.value))
        if unit not in units:
            self._note(cell, f"{as_toml(cell.value)} is not a unit of this row; it takes {', '.join(units)}")
            return ""
        return unit

    def _unknown(self, name: SeenCell, known: Mapping[str, Variation]) -> None:
        near = difflib.get_close_matches(plain(str(name.value)), list(known), n=1)
        meant = f'; is "{name_of(known[near[0]].of)}" meant?' if near else ""
        self._note(name, f"{as_toml(name.value)} is no dimension of the scenario{meant} The row is left aside")

    def _cell(self, row: Sequence[SeenCell], key: str) -> SeenCell | None:
        column = self.columns.get(key)
        return row[column] if column is not None and column < len(row) else None

    def _note(self, cell: SeenCell | None, said: str) -> None:
        if cell is not None:
            self.notes.append(Note(cell.address, said))


def _amount(cell: SeenCell, unit: str, units: tuple[str, ...]) -> Typed:
    """The number of a cell in the unit typed there, else the row's."""
    typed = typed_of(cell)
    own = typed.unit or unit
    if not own and units == (ABSOLUTE,):
        own = ABSOLUTE
    if not own:
        raise CellError(f"has no unit, and its row none that is known: {', '.join(units)}")
    if own not in units:
        raise CellError(f'has the unit "{own}"; this row takes {", ".join(units)}')
    return Typed(typed.number, own)


def _above_zero(typed: Typed) -> Typed:
    if typed.number <= 0.0:
        raise CellError(f"must be above 0; it is {typed.number:g}")
    return typed


def _basis(cell: SeenCell) -> tuple[str, Typed | None]:
    return basis_named(str(cell.value))


def _cpk(cell: SeenCell) -> float:
    typed = typed_of(cell)
    if typed.unit or not 0.0 < typed.number <= 20.0:
        raise CellError("must be a plain number above 0 and up to 20")
    return typed.number


def _price(cell: SeenCell) -> float:
    typed = typed_of(cell)
    if typed.number < 0.0 or typed.unit == "%":
        raise CellError("must be a price per panel of 0 or more")
    return typed.number
