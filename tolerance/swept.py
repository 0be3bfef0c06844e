"""What a sweep comes to: a row for each scenario, done or failed, and the tables a user sees."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import pandas as pd

from tolerance.errors import as_toml

MOST_LINES_ACROSS = 200  # lines that have columns of their own; more stand in the table of lines only
_OF_LINE = ("nominal_ohm", "mean_ohm", "std_ohm", "below", "above", "cpk")


@dataclass(frozen=True, slots=True)
class SweptRow:
    """One scenario of a sweep.

    source : path of its file.  swept : values by the paths of their keys.  result : of the run, as in the JSON
    of `tolerance run`; None where the row failed, and `message` says why.
    """

    source: str
    swept: Mapping[str, object]
    result: Mapping[str, Any] | None
    message: str = ""


@dataclass(frozen=True, slots=True)
class SweepResult:
    """All rows, in the order of the files and of their values."""

    rows: tuple[SweptRow, ...]

    @property
    def failed(self) -> int:
        """Rows without a result."""
        return sum(row.result is None for row in self.rows)

    @property
    def names(self) -> tuple[str, ...]:
        """Paths of the swept keys of all rows."""
        return tuple(dict.fromkeys(name for row in self.rows for name in row.swept))

    @property
    def table(self) -> pd.DataFrame:
        """One row a scenario, the figures of its lines side by side; the unit of a column stands in its name."""
        across = _line_names(self.rows)
        rows = [_row(row, self.names) for row in self.rows]
        if len(across) <= MOST_LINES_ACROSS:
            rows = [start | _lines_across(row, across) for start, row in zip(rows, self.rows, strict=True)]
        return pd.DataFrame(rows)

    @property
    def line_table(self) -> pd.DataFrame:
        """One row for each scenario and line."""
        return pd.DataFrame([
            {"row": number, "scenario": row.source, **_shown_values(row, self.names), "line": line["name"],
             "target_ohm": line["target_ohm"], "low_limit_ohm": line["low_limit_ohm"],
             "high_limit_ohm": line["high_limit_ohm"], **_figures(line), "largest_driver": _largest(line)}
            for number, row in enumerate(self.rows, start=1) for line in _lines(row)])


def _row(row: SweptRow, names: Sequence[str]) -> dict[str, object]:
    result = row.result or {}
    found = result.get("yield", {})
    lines = [line["yield"]["value"] for line in _lines(row)]
    return {
        "scenario": row.source, "title": result.get("title"), **_shown_values(row, names),
        "seed": result.get("seed"), "coupons": result.get("coupons"),
        "yield": found.get("value"), "yield_low": found.get("low"), "yield_high": found.get("high"),
        "lowest_line_yield": min(lines, default=None),
        "lines_that_miss": sum(value < result["target_yield"] for value in lines) if row.result is not None else None,
        "solver_runs": result.get("solver_runs"), "failed": row.result is None,
        "message": row.message.replace("\n", "; ") or None,
    }


def _shown_values(row: SweptRow, names: Sequence[str]) -> dict[str, object]:
    return {name: shown_value(row.swept.get(name)) for name in names}


def shown_value(value: object) -> str | float | int | None:
    """A swept value as a cell shows it: texts and numbers as they are, anything else as in the scenario."""
    if value is None or (isinstance(value, (str, int, float)) and not isinstance(value, bool)):
        return value
    return as_toml(value)


def _line_names(rows: Sequence[SweptRow]) -> tuple[str, ...]:
    return tuple(dict.fromkeys(line["name"] for row in rows for line in _lines(row)))


def _lines(row: SweptRow) -> Iterator[Mapping[str, Any]]:
    yield from () if row.result is None else row.result["lines"]


def _lines_across(row: SweptRow, names: Sequence[str]) -> dict[str, object]:
    figures = {line["name"]: _figures(line) for line in _lines(row)}
    heads = ("yield", "yield_low", "yield_high", *_OF_LINE)
    return {f"{name}: {head}": figures[name][head] if name in figures else None for name in names for head in heads}


def _figures(line: Mapping[str, Any]) -> dict[str, float | None]:
    found = line["yield"]
    return {"yield": found["value"], "yield_low": found["low"], "yield_high": found["high"],
            **{name: line[name] for name in _OF_LINE}}


def _largest(line: Mapping[str, Any]) -> str | None:
    return line["drivers"][0]["variable"] if line["drivers"] else None
