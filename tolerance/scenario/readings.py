"""Measured values that variations name: the file beside the scenario, the column, and what the readings may be."""

from __future__ import annotations

import statistics
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

from tolerance.measurements.readings import MOST_TOLD, numbers_of
from tolerance.measurements.tables import MeasuredTable, TableError, read_table
from tolerance.scenario.documents import Finding
from tolerance.scenario.drafts import Draft, Drafts, kind_of
from tolerance.scenario.keys import Number, Quantity, Range
from tolerance.scenario.properties import MEASURE, Property, matching, properties_of
from tolerance.scenario.tables import Layer, Readings, Sweep, Variation
from tolerance.units import write_quantity

FEWEST = 5  # readings of a column
FARTHEST = 3.0  # times the nominal, or that part of it, beyond which the median is taken for a slip of the unit
_SIDEWAYS = Range(-5e-3, 5e-3)  # [m] etch and registration


@dataclass(frozen=True, slots=True)
class _Place:
    path: Path
    sheet: str | None


def file_finding(draft: Draft[Variation] | Draft[Sweep]) -> Finding | None:
    """What is wrong with `file` itself: it must be a CSV or XLSX in the folder of the scenario, or below it."""
    file = draft.text("file")
    if file is None:
        return None
    place, entry = draft.entry.places["file"], draft.entry
    if file.rpartition(".")[2].lower() not in ("csv", "xlsx"):
        return entry.finding("file", "must be the path of a CSV or XLSX file: its name must end in .csv or .xlsx")
    outside = place.trust.why_not(place.folder, file)
    if outside:
        return entry.finding("file", outside)
    try:
        path = place.folder / file
        if path.is_dir():
            return entry.finding("file", "must be the path of a file; this is a folder")
        if not path.is_file():
            return entry.finding("file", f"must be the path of a file, from the folder of {place.file}: there is none")
    except (OSError, RuntimeError, ValueError):
        return entry.finding("file", "must be the path of a file that can be read")
    return None


def readings_of(drafts: Drafts) -> tuple[tuple[Readings, ...], list[Finding]]:
    """The readings of every property that a measured variation names, and what is wrong with them."""
    known = [item for layer in drafts.layers if layer.model is not None and not layer.bad and layer.text("kind")
             for item in properties_of(layer.model)]
    tables: dict[_Place, MeasuredTable | TableError] = {}
    found: list[Readings] = []
    findings: list[Finding] = []
    for draft in drafts.variations:
        model = draft.model
        if model is None or model.shape != "measured" or model.file is None or model.column is None \
                or file_finding(draft) is not None:
            continue
        place = _Place(draft.entry.places["file"].folder / model.file, model.sheet)
        for item in matching(model.of, known):
            try:
                values = _values(_table(place, tables), model.column, item)
            except TableError as problem:
                findings.append(_finding(draft, model, str(problem)))
                break
            found.append(Readings(item.name, model.file, model.sheet, model.column, values))
    return tuple(found), findings


def _table(place: _Place, tables: dict[_Place, MeasuredTable | TableError]) -> MeasuredTable:
    """The table, each file read once."""
    if place not in tables:
        try:
            tables[place] = read_table(place.path, sheet=place.sheet)
        except TableError as problem:
            tables[place] = problem
    table = tables[place]
    if isinstance(table, TableError):
        raise table
    return table


def _finding(draft: Draft[Variation], model: Variation, reason: str) -> Finding:
    """At the column where the heading is wrong, else at the file, whose rows are told."""
    if reason.startswith("must be the heading"):
        return draft.entry.finding("column", reason)
    sheet = f", sheet {model.sheet}" if model.sheet is not None else ""
    return draft.entry.finding("column", f"{model.file}{sheet}: {reason}")


def _values(table: MeasuredTable, column: str, item: Property) -> tuple[float, ...]:
    cells = table.column(column)
    values = numbers_of(cells, heading=column, measure=MEASURE[item.property])
    outside = list(_outside(item, [row for row, _ in cells], values))
    if outside:
        more = f" and {len(outside) - MOST_TOLD} more rows" if len(outside) > MOST_TOLD else ""
        words = _span(item.property).words(lambda end: _write(item, end))
        raise TableError(f"{item.name} must be {words}; there are {', '.join(outside[:MOST_TOLD])}{more}")
    if len(values) < FEWEST:
        raise TableError(f"has {len(values)} reading{'s' * (len(values) != 1)}; at least {FEWEST} are needed")
    middle = statistics.median(values)
    if item.nominal > 0.0 and not item.nominal / FARTHEST <= middle <= item.nominal * FARTHEST:
        raise TableError(f"the median of the readings, {_write(item, middle)}, is far from the nominal of {item.name}, "
                         f"{_write(item, item.nominal)}: is the unit of the heading right?")
    return values


def _outside(item: Property, rows: list[int], values: tuple[float, ...]) -> Iterator[str]:
    """The readings that the property cannot have, each with its row."""
    span = _span(item.property)
    return (f"{_write(item, value)} in row {row}" for row, value in zip(rows, values, strict=True)
            if not span.holds(value))


def _span(name: str) -> Range:
    kind = kind_of(Layer, name) if name in Layer.model_fields else None
    return kind.range if isinstance(kind, (Quantity, Number)) else _SIDEWAYS


def _write(item: Property, value: float) -> str:
    unit = "um" if MEASURE[item.property] == "copper length" else None
    return write_quantity(value, MEASURE[item.property], unit)
