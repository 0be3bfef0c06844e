"""`fit`: what a table of readings says, column by column."""

from __future__ import annotations

import json
import re
from collections.abc import Sequence
from pathlib import Path

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.errors import InputError, as_toml
from tolerance.fitted import ColumnLimits, FitResult, FittedColumn
from tolerance.measurements.readings import measure_of, numbers_of
from tolerance.measurements.tables import Cell, MeasuredTable, TableError, is_blank, read_table
from tolerance.process.measured import measured_law
from tolerance.scenario.properties import MEASURE
from tolerance.statistics.nested import Component, shares, variance_components
from tolerance.statistics.tolerance_intervals import (
    capability,
    content_of_range,
    deviation_interval,
    howe_factor,
    mean_interval,
)
from tolerance.statistics.yields import binomial_interval
from tolerance.units import MeasureName, QuantityError, read_quantity, unit_factor

FEWEST = 3
LEVELS = ("lot", "panel")  # headings that name levels, outermost first
LABELS = (*LEVELS, "coupon", "sample", "trace", "board", "serial", "no", "no.", "number", "row", "date", "operator")
_DIGITS = 6


def fit(
    path: Path, *, column: str | None = None, sheet: str | None = None, lower: str | None = None,
    upper: str | None = None,
) -> FitResult:
    """What the table at `path` says of `column`, or of every column of readings.

    lower, upper : limits with their unit, or in that of the heading. Raises InputError.
    """
    if sheet is not None and path.suffix.lower() != ".xlsx":
        raise InputError(f"--sheet {as_toml(sheet)}: only with an XLSX file")
    try:
        table = read_table(path, sheet=sheet)
        headings, left_out = ([column], ()) if column is not None else _headings(table)
        if not headings:
            raise TableError("has no column of readings; name one with --column")
        if len(headings) > 1 and (lower is not None or upper is not None):
            raise TableError("has several columns of readings; say with --column which one the limits are for")
        columns = tuple(_fitted(table, heading, path, sheet, lower, upper) for heading in headings)
    except TableError as problem:
        raise InputError(f"{path}: {problem}") from None
    return FitResult(path.name, sheet, columns, tuple(left_out))


def _headings(table: MeasuredTable) -> tuple[list[str], Sequence[str]]:
    """Columns of readings, and those that are labels or hold nothing but text."""
    named = [name for name in table.headings if name]
    left_out = [name for name in named if name.lower() in LABELS
                or not any(_has_digits(cell) for _, cell in table.column(name))]
    return [name for name in named if name not in left_out], left_out


def _has_digits(cell: Cell) -> bool:
    return not is_blank(cell) and (not isinstance(cell, str) or bool(re.match(r"\s*[+-]?[.,]?[0-9]", cell)))


def _fitted(
    table: MeasuredTable, heading: str, path: Path, sheet: str | None, lower: str | None, upper: str | None,
) -> FittedColumn:
    measure, unit = measure_of(heading)
    try:
        factor = float(unit_factor(unit, measure)) if unit else 1.0
        values = np.array(numbers_of(table.column(heading), heading=heading, measure=measure)) / factor
    except TableError as problem:
        wrong = str(problem)
        raise TableError(wrong if wrong.startswith("must be") else f'column "{heading}": {wrong}') from None
    if len(values) < FEWEST:
        raise TableError(f'column "{heading}": at least {FEWEST} readings are needed; it has {len(values)}')
    law, mean, deviation = measured_law(values), mean_interval(values), deviation_interval(values)
    half = howe_factor(len(values)) * deviation.value
    components = _components(table, values)
    parts = tuple(shares(components).items()) if len(components) > 1 else ()
    return FittedColumn(
        heading=heading, unit=unit, count=len(values), mean=mean, deviation=deviation, lowest=float(np.min(values)),
        highest=float(np.max(values)), method=law.method, p_normal=law.p_normal, p_lognormal=law.p_lognormal,
        tolerance_low=mean.value - half, tolerance_high=mean.value + half,
        range_content=content_of_range(len(values)), components=components, shares=parts,
        limits=_limits(values, _limit(lower, "--lower", measure, factor), _limit(upper, "--upper", measure, factor)),
        suggestion=_suggestion(heading, path.name, sheet, parts, mean.value, deviation.value, unit),
    )


def _components(table: MeasuredTable, values: FloatArray) -> tuple[Component, ...]:
    named = {name.lower(): name for name in table.headings if table.headings.count(name) == 1}
    levels = [(level, [str(cell) for _, cell in table.column(named[level])]) for level in LEVELS if level in named]
    return variance_components(values, levels)


def _limit(text: str | None, option: str, measure: MeasureName, factor: float) -> float | None:
    """The limit in the unit of the column."""
    if text is None:
        return None
    try:
        value = float(text)
    except ValueError:
        try:
            value = read_quantity(text, measure) / factor
        except QuantityError as reason:
            raise InputError(f"{option} {json.dumps(text)}: must be a number in the unit of the column, or a quantity "
                             f"({reason})") from None
    if not np.isfinite(value):
        raise InputError(f"{option} {text}: must be finite")
    return value


def _limits(values: FloatArray, low: float | None, high: float | None) -> ColumnLimits | None:
    if low is None and high is None:
        return None
    if low is not None and high is not None and low >= high:
        raise InputError("--upper must be above --lower")
    cp, cpk = capability(values, low=low, high=high)
    outside = int(np.count_nonzero((values < (-np.inf if low is None else low))
                                   | (values > (np.inf if high is None else high))))
    return ColumnLimits(low, high, cp, cpk, outside, binomial_interval(outside, len(values)))


def _suggestion(
    heading: str, file: str, sheet: str | None, parts: Sequence[tuple[str, float]], mean: float, deviation: float,
    unit: str,
) -> str:
    """A variation to paste. What varies is a guess by the heading, told as such."""
    of, sure = _property(heading)
    level = _level_text(parts)
    lines = [
        "[[variations]]",
        f"of     = {json.dumps(of, ensure_ascii=False)}" + ("" if sure else "   # put in what this column is"),
        'shape  = "measured"', f"file   = {json.dumps(file, ensure_ascii=False)}",
        *([f"sheet  = {json.dumps(sheet, ensure_ascii=False)}"] if sheet is not None else []),
        f"column = {json.dumps(heading, ensure_ascii=False)}", *([level] if level else []),
        f"# or, with {mean:.{_DIGITS}g}{f' {unit}' if unit else ''} as the nominal, a normal law with its half-width:",
        f"# tolerance = {_tolerance_text(3.0 * deviation, unit)}   # 3 deviations of the readings",
    ]
    return "\n".join(lines)


def _tolerance_text(value: float, unit: str) -> str:
    if unit == "%":
        return f"{value / 100.0:.4g}"  # an absolute share; a percentage would be of the nominal
    return f'"{value:.4g} {unit}"' if unit else f"{value:.4g}"


def _property(heading: str) -> tuple[str, bool]:
    """LAYER.PROPERTY as the heading has it, and whether it has it whole."""
    words = "|".join(sorted(MEASURE, key=len, reverse=True))
    match = re.match(rf"(?:(?P<layer>.+?)[. _])?(?P<item>{words})\b", heading, re.IGNORECASE)
    if match is None:
        return "LAYER.PROPERTY", False
    layer = match["layer"]
    return f"{layer or 'LAYER'}.{match['item'].lower()}", layer is not None


def _level_text(parts: Sequence[tuple[str, float]]) -> str:
    rounded = {name: round(share, 3) for name, share in parts}
    if not any(rounded.get(name) for name in LEVELS):
        return ""
    rounded["coupon"] = round(1.0 - sum(rounded.get(name, 0.0) for name in LEVELS), 3)
    return "level  = { " + ", ".join(f"{name} = {share:g}" for name, share in rounded.items() if share > 0.0) + " }"
