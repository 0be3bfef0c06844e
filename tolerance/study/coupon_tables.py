"""Tables of what came back: impedances of coupons, and microsections, against a scenario's names."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.errors import InputError, as_toml
from tolerance.measurements.readings import numbers_of, unit_of
from tolerance.measurements.tables import MeasuredTable, TableError, is_blank, read_table
from tolerance.process.draws import ETCH, Process
from tolerance.scenario.keys import close_match
from tolerance.scenario.properties import MEASURE
from tolerance.scenario.tables import Scenario

MOST_TOLD = 6


@dataclass(frozen=True, slots=True)
class CouponTable:
    """Readings one after another: names of lines, values [ohm], lots and panels ("" where the table has none)."""

    lines: tuple[str, ...]
    values: FloatArray
    lots: tuple[str, ...]
    panels: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class SectionReading:
    """A microsection: a property of the process and its value [SI]; an etch is finished less drawn width."""

    property: str
    value: float


def read_coupons(path: Path, scenario: Scenario, *, sheet: str | None = None) -> CouponTable:
    """Impedances of coupons: columns line, value, and if they are there lot and panel. Raises InputError."""
    table = _table(path, sheet)
    columns = _columns(table, path, needed=("line", "value"))
    lines = tuple(_text(cell) for _, cell in table.column(columns["line"]))
    known = dict.fromkeys(line.name for line in scenario.lines)
    wrong = [f"row {row.number}: no line is called {as_toml(name)}{close_match(name, known)}"
             for row, name in zip(table.rows, lines, strict=True) if name not in known]
    heading = columns["value"]
    try:
        values = np.array(numbers_of(table.column(heading), measure="resistance",
                                     heading=heading if unit_of(heading, "resistance") else "value ohm"))
    except TableError as problem:
        raise InputError("; ".join([f"{path}: {problem}", *wrong[:MOST_TOLD]])) from None
    wrong += [f"row {row.number} holds {value:g} ohm; an impedance must be above 0 ohm" for row, value in
              zip(table.rows, values, strict=True) if value <= 0.0]
    _refuse(path, wrong)
    names = {key: tuple(_text(cell) for _, cell in table.column(columns[key])) if key in columns
             else ("",) * len(lines) for key in ("lot", "panel")}
    return CouponTable(lines, values, names["lot"], names["panel"])


def read_sections(
    path: Path, scenario: Scenario, process: Process, *, sheet: str | None = None,
) -> tuple[SectionReading, ...]:
    """Microsections: columns property and value; a property that varies, or LINE.width. Raises InputError."""
    table = _table(path, sheet)
    columns = _columns(table, path, needed=("property", "value"))
    varying = {member.name: member.property for variable in process.variables for member, _ in variable.members}
    found: list[SectionReading] = []
    wrong: list[str] = []
    for row, cell in table.column(columns["property"]):
        name = _text(cell)
        own, width = _property_of(name, scenario)
        if own not in varying:
            known = [*varying, *(f"{line.name}.width" for line in scenario.lines)]
            wrong.append(f"row {row}: {as_toml(name)} is nothing that varies{close_match(name, known)}")
            continue
        value = next(each for number, each in table.column(columns["value"]) if number == row)
        try:
            number, = numbers_of([(row, value)], heading=columns["value"], measure=MEASURE[varying[own]])
        except TableError as problem:
            wrong.append(str(problem))
            continue
        found.append(SectionReading(own, number - width))
    _refuse(path, wrong)
    return tuple(found)


def _property_of(name: str, scenario: Scenario) -> tuple[str, float]:
    """The property that a name means, and what is taken off its value: a line's width is the drawn one and etch."""
    for line in scenario.lines:
        if name == f"{line.name}.width":
            return f"{line.layer}.{ETCH}", line.width
    return name, 0.0


def _table(path: Path, sheet: str | None) -> MeasuredTable:
    try:
        return read_table(path, sheet=sheet)
    except TableError as problem:
        raise InputError(f"{path}: {problem}") from None


def _columns(table: MeasuredTable, path: Path, *, needed: Sequence[str]) -> dict[str, str]:
    """Heading by key: the heading begins with the key, "value [ohm]"."""
    found: dict[str, str] = {}
    for key in ("line", "value", "lot", "panel", "property"):
        headings = [name for name in table.headings
                    if name.casefold().replace("[", " ").replace("(", " ").split()[:1] == [key]]
        if len(headings) > 1:
            raise InputError(f"{path}: several columns are headed {key}: {', '.join(map(as_toml, headings))}")
        if headings:
            found[key] = headings[0]
    missing = [key for key in needed if key not in found]
    if missing:
        named = ", ".join(as_toml(name) for name in table.headings if name)
        raise InputError(f"{path}: needs a column headed {' and one headed '.join(missing)}; it has {named}")
    return found


def _text(cell: object) -> str:
    if isinstance(cell, float) and cell.is_integer():
        return str(int(cell))
    return "" if cell is None or (isinstance(cell, str) and is_blank(cell)) else str(cell).strip()


def _refuse(path: Path, wrong: Sequence[str]) -> None:
    if wrong:
        more = f"; and {len(wrong) - MOST_TOLD} more" if len(wrong) > MOST_TOLD else ""
        raise InputError(f"{path}: " + "; ".join(wrong[:MOST_TOLD]) + more)
