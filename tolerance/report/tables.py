"""Headed rows with units: what text, sheet and figures all read, so that the three never disagree.

A share is kept as a fraction of 1 and shown in percent; every other number stands in the unit of its column.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from tolerance.report.wording import (
    doubt_text,
    fixed,
    headline_text,
    percent,
    percent_digits,
    share_text,
    trimmed,
    variable_words,
)

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from tolerance.results import Driver, Interval, LineResult, RunResult

Cell = str | int | float | None

MEETS = "meets"
MISSES = "MISSES"


@dataclass(frozen=True, slots=True)
class Column:
    """A column: the key it has in the JSON, its heading, the unit, and the digits shown after the point.

    `unit` "share" marks a fraction that is shown in percent; `digits` None leaves numbers as they are.
    """

    key: str
    heading: str
    unit: str = ""
    digits: int | None = None

    @property
    def head(self) -> str:
        """Heading with unit, "mean [ohm]"; shares need none, each shows its percent sign."""
        return f"{self.heading} [{self.unit}]" if self.unit not in ("", "share") else self.heading


@dataclass(frozen=True, slots=True)
class Table:
    """Columns, and rows of as many cells."""

    columns: tuple[Column, ...]
    rows: tuple[tuple[Cell, ...], ...]

    @staticmethod
    def of(columns: tuple[Column, ...], rows: list[dict[str, Cell]]) -> Table:
        """From rows by key. KeyError where a row lacks a column."""
        return Table(columns, tuple(tuple(row[column.key] for column in columns) for row in rows))


@dataclass(frozen=True, slots=True)
class LineWords:
    """One line's answer in words and rounded numbers, the same in terminal and figure."""

    target: str
    limits: str
    nominal: str
    mean: str
    deviation: str
    inside: str
    headline: str
    inside_range: str
    below: str
    above: str
    cpk: str
    verdict: str


def verdict(inside: float, target_yield: float) -> str:
    """The word for a yield against its target."""
    return MISSES if inside < target_yield else MEETS


def line_words(line: LineResult, target_yield: float) -> LineWords:
    """What is said of a line wherever it is said. What fails gets no more digits than what passes, or two."""
    most = max(percent_digits(line.inside, target=target_yield), 2)
    below, above = (percent(share.value, min(percent_digits(share), most)) for share in (line.below, line.above))
    return LineWords(
        target=trimmed(line.target, 2),
        limits=f"{trimmed(line.low_limit, 2)} to {trimmed(line.high_limit, 2)}",
        nominal=fixed(line.nominal, 2),
        mean=fixed(line.mean.value, 2),
        deviation=fixed(line.deviation.value, 2),
        inside=share_text(line.inside, target=target_yield),
        headline=headline_text(line.inside, target=target_yield),
        inside_range=doubt_text(line.inside, target=target_yield),
        below=below,
        above=above,
        cpk=fixed(None if line.cpk is None else line.cpk.value, 2),
        verdict=verdict(line.inside.value, target_yield),
    )


def ranking(driver: Driver) -> Interval:
    """The measure that ranks a driver: Shapley effect where inputs are correlated, else the total effect."""
    return driver.total if driver.shapley is None else driver.shapley


def ranking_name(lines: Sequence[LineResult]) -> str:
    """What the measure that ranks drivers is called: one for all lines of a run."""
    correlated = any(driver.shapley is not None for line in lines for driver in line.drivers)
    return "Shapley effect" if correlated else "total effect"


def driver_words(line: LineResult, count: int) -> str:
    """The largest drivers in a row: "P1.thickness 51 %, L1.etch 30 %"."""
    largest = [(variable_words(driver.variable), ranking(driver).value) for driver in line.drivers[:count]]
    return ", ".join(f"{name} {percent(value, 0)}" for name, value in largest) or "none"


LINE_COLUMNS = (
    Column("name", "line"), Column("verdict", "verdict"),
    Column("yield", "yield", "share", 2), Column("yield_low", "yield, low end", "share", 2),
    Column("yield_high", "yield, high end", "share", 2),
    Column("target_ohm", "target", "ohm", 2), Column("low_limit_ohm", "low limit", "ohm", 2),
    Column("high_limit_ohm", "high limit", "ohm", 2), Column("nominal_ohm", "nominal", "ohm", 2),
    Column("mean_ohm", "mean", "ohm", 2), Column("mean_ohm_low", "mean, low end", "ohm", 3),
    Column("mean_ohm_high", "mean, high end", "ohm", 3),
    Column("std_ohm", "deviation", "ohm", 3), Column("std_ohm_low", "deviation, low end", "ohm", 3),
    Column("std_ohm_high", "deviation, high end", "ohm", 3),
    Column("below", "below limit", "share", 2), Column("below_low", "below, low end", "share", 2),
    Column("below_high", "below, high end", "share", 2),
    Column("above", "above limit", "share", 2), Column("above_low", "above, low end", "share", 2),
    Column("above_high", "above, high end", "share", 2),
    Column("cp", "Cp", "", 2), Column("cp_low", "Cp, low end", "", 3), Column("cp_high", "Cp, high end", "", 3),
    Column("cpk", "Cpk", "", 2), Column("cpk_low", "Cpk, low end", "", 3), Column("cpk_high", "Cpk, high end", "", 3),
    Column("needed_limit", "limit that meets the target yield", "share", 2),
    Column("needed_limit_low", "that limit, low end", "share", 2),
    Column("needed_limit_high", "that limit, high end", "share", 2),
    Column("impossible", "impossible coupons", "", 0),
    Column("kind", "kind"), Column("layer", "layer"), Column("references", "reference planes"),
    Column("solver_runs", "field solver runs", "", 0), Column("degree", "polynomial degree", "", 0),
    Column("certified", "verdicts"), Column("coupons_solved", "coupons near limits solved", "", 0),
    Column("held_out_error_ohm", "held-out error", "ohm", 4),
    Column("held_out_largest_ohm", "largest held-out error", "ohm", 4),
)

SUMMARY_COLUMNS = (
    Column("name", "line"), Column("target_ohm", "target", "ohm", 2),
    Column("low_limit_ohm", "low limit", "ohm", 2), Column("high_limit_ohm", "high limit", "ohm", 2),
    Column("mean_ohm", "mean", "ohm", 2), Column("std_ohm", "deviation", "ohm", 2),
    Column("yield", "yield", "share", 2), Column("yield_low", "yield, low end", "share", 2),
    Column("yield_high", "yield, high end", "share", 2), Column("verdict", "verdict"),
    Column("below", "below limit", "share", 2), Column("above", "above limit", "share", 2),
    Column("cpk", "Cpk", "", 2), Column("drivers", "largest drivers, share of the variance"),
)

DRIVER_COLUMNS = (
    Column("line", "line"), Column("rank", "rank", "", 0), Column("variable", "variable"),
    Column("total", "total effect", "share", 1), Column("total_low", "total, low end", "share", 1),
    Column("total_high", "total, high end", "share", 1),
    Column("first", "first-order effect", "share", 1), Column("first_low", "first-order, low end", "share", 1),
    Column("first_high", "first-order, high end", "share", 1),
)

SHAPLEY_COLUMNS = (
    Column("shapley", "Shapley effect", "share", 1), Column("shapley_low", "Shapley, low end", "share", 1),
    Column("shapley_high", "Shapley, high end", "share", 1),
)


def line_table(result: RunResult) -> Table:
    """One row a line: all that is known of it."""
    return Table.of(LINE_COLUMNS, [_line_row(line, result.target_yield) for line in result.lines])


def summary_table(result: RunResult, drivers: int = 3) -> Table:
    """One row a line: what is read first."""
    rows = [_line_row(line, result.target_yield) | {"drivers": driver_words(line, drivers)} for line in result.lines]
    return Table.of(SUMMARY_COLUMNS, rows)


def driver_table(result: RunResult) -> Table:
    """One row for each line and driver, ranked within the line."""
    with_shapley = any(driver.shapley is not None for line in result.lines for driver in line.drivers)
    rows: list[dict[str, Cell]] = []
    for line in result.lines:
        for rank, driver in enumerate(line.drivers, start=1):
            shapley = {column.key: None for column in SHAPLEY_COLUMNS} if driver.shapley is None \
                else ends("shapley", driver.shapley)
            rows.append({"line": line.name, "rank": rank, "variable": driver.variable,
                         **ends("total", driver.total), **ends("first", driver.first), **shapley})
    return Table.of(DRIVER_COLUMNS + (SHAPLEY_COLUMNS if with_shapley else ()), rows)


def limit_table(result: RunResult) -> Table:
    """One row for each limit: the yield of all lines together were all held to it, and of each line."""
    curves = [("all lines together", result.by_limit), *((line.name, line.by_limit) for line in result.lines)]
    columns = (Column("limit", "limit, half-width", "share", 1),
               *(Column(f"yield {number}", name, "share", 2) for number, (name, _) in enumerate(curves)))
    values = np.stack([result.by_limit.limit, *(curve.value for _, curve in curves)], axis=1)
    return Table(columns, tuple(tuple(row) for row in values.tolist()))


def _line_row(line: LineResult, target_yield: float) -> dict[str, Cell]:
    return {
        "name": line.name, "verdict": verdict(line.inside.value, target_yield), "kind": line.kind,
        "layer": line.layer, "references": ", ".join(line.references),
        "target_ohm": float(line.target), "low_limit_ohm": float(line.low_limit),
        "high_limit_ohm": float(line.high_limit), "nominal_ohm": float(line.nominal),
        **ends("mean_ohm", line.mean), **ends("std_ohm", line.deviation), **ends("yield", line.inside),
        **ends("below", line.below), **ends("above", line.above), **ends("cp", line.cp), **ends("cpk", line.cpk),
        **ends("needed_limit", line.by_limit.needed),
        "impossible": int(line.impossible), "solver_runs": int(line.prediction.solver_runs),
        "certified": "the solver's" if line.certificate.certified else "predicted",
        "coupons_solved": int(line.certificate.solved),
        "degree": int(line.prediction.degree), "held_out_error_ohm": float(line.prediction.held_out_error),
        "held_out_largest_ohm": float(line.prediction.held_out_largest),
    }


def ends(name: str, interval: Interval | None) -> Mapping[str, Cell]:
    """Cells of an estimate and the ends of its interval, empty where there is none or one is not finite."""
    if interval is None:
        return {name: None, f"{name}_low": None, f"{name}_high": None}
    values = {name: interval.value, f"{name}_low": interval.low, f"{name}_high": interval.high}
    return {key: float(value) if math.isfinite(value) else None for key, value in values.items()}
