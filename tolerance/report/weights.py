"""Headed rows and words of what weighs on the yield: levers, groups of drivers, failures too rare to be counted."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import TYPE_CHECKING

from tolerance.report.tables import Cell, Column, Table, ends
from tolerance.report.wording import fixed, shorten, variable_words

if TYPE_CHECKING:
    from tolerance.results import Interval, Lever, LineResult, RunResult, Tail

LEAST_SHOWN = 5e-5  # gain of yield below which nobody would pay for it
LONGEST_NAME = 34
MILLION = 1e6

LEVER_COLUMNS = (
    Column("line", "line"), Column("rank", "rank", "", 0), Column("variable", "variable"),
    Column("gain_if_halved", "yield gained with its spread halved", "share", 3),
    Column("gain_if_halved_low", "gained, low end", "share", 3),
    Column("gain_if_halved_high", "gained, high end", "share", 3),
    Column("by_mean", "yield gained for each deviation its mean moves up", "share", 3),
    Column("by_mean_low", "by mean, low end", "share", 3), Column("by_mean_high", "by mean, high end", "share", 3),
    Column("by_log_deviation", "yield gained by the logarithm of its deviation", "share", 3),
    Column("by_log_deviation_low", "by deviation, low end", "share", 3),
    Column("by_log_deviation_high", "by deviation, high end", "share", 3),
    Column("order_probability", "probability that it gains no less than the next", "share", 1),
    Column("variance_rank", "rank by variance", "", 0),
)

GROUP_COLUMNS = (
    Column("line", "line"), Column("of", "all of one"), Column("name", "name"),
    Column("total", "total effect", "share", 1), Column("total_low", "total, low end", "share", 1),
    Column("total_high", "total, high end", "share", 1), Column("variables", "variables"),
)


def lever_table(result: RunResult) -> Table:
    """One row for each line and variable, the largest gain of the line first."""
    rows: list[dict[str, Cell]] = []
    for line in result.lines:
        by_variance = {driver.variable: rank for rank, driver in enumerate(line.drivers, start=1)}
        for rank, lever in enumerate(line.levers.each if line.levers else (), start=1):
            rows.append({
                "line": line.name, "rank": rank, "variable": lever.variable, **ends("gain_if_halved", lever.halved),
                **ends("by_mean", lever.by_mean), **ends("by_log_deviation", lever.by_deviation),
                "order_probability": float(lever.order), "variance_rank": by_variance.get(lever.variable),
            })
    return Table.of(LEVER_COLUMNS, rows)


def group_table(result: RunResult) -> Table:
    """One row for each line and layer, and for each line and kind of material."""
    rows: list[dict[str, Cell]] = [
        {"line": line.name, "of": group.of, "name": group.name, **ends("total", group.total),
         "variables": ", ".join(group.variables)}
        for line in result.lines for group in line.groups]
    return Table.of(GROUP_COLUMNS, rows)


def gain_words(lever: Lever) -> str:
    """A gain of yield in points: "+1.31"."""
    gain = 100.0 * lever.halved.value
    return f"{'+' if gain > 0.0 else '-'}{fixed(abs(gain), 2)}"


def worthwhile(line: LineResult, count: int) -> list[Lever]:
    """The levers with the largest gains, as far as those are worth a word."""
    levers = line.levers.each if line.levers else ()
    return [lever for lever in levers[:count] if lever.halved.value >= LEAST_SHOWN]


def lever_words(line: LineResult, count: int) -> list[str]:
    """What halving a spread would gain: "P1.thickness +1.31"."""
    return [f"{shorten(variable_words(lever.variable), LONGEST_NAME)} {gain_words(lever)}"
            for lever in worthwhile(line, count)]


def in_ppm(interval: Interval) -> Interval:
    """A share in parts per million."""
    return replace(interval, value=MILLION * interval.value, low=MILLION * interval.low, high=MILLION * interval.high)


def ppm_words(tail: Tail) -> str:
    """0.0171 ppm [0.0163, 0.0179]."""
    ppm = in_ppm(tail.failing)
    half = max(ppm.high - ppm.value, ppm.value - ppm.low)
    digits = min(max(math.ceil(-math.log10(half / 2.0)), 0), 20) if half > 0.0 else 3
    if digits > 6:
        return f"{ppm.value:.1e} ppm [{ppm.low:.1e}, {ppm.high:.1e}]"
    return f"{fixed(ppm.value, digits)} ppm [{fixed(ppm.low, digits)}, {fixed(ppm.high, digits)}]"
