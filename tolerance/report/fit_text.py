"""What a table of readings says, on the terminal and as JSON."""

from __future__ import annotations

import json
import math
from typing import TYPE_CHECKING

from rich.text import Text

from tolerance.report.wording import fixed, percent, share_with_range

if TYPE_CHECKING:
    from rich.console import Console

    from tolerance.fitted import ColumnLimits, FitResult, FittedColumn
    from tolerance.results import Interval

_LAWS = {"smoothed": "their smoothed quantiles", "normal": "a fitted normal", "lognormal": "a fitted lognormal"}


def print_fit(result: FitResult, console: Console) -> None:
    """Every column: its figures, what they promise, and a variation to paste."""
    sheet = f", sheet {result.sheet}" if result.sheet is not None else ""
    _say(console, f"{result.file}{sheet}", style="bold")
    for column in result.columns:
        _say(console, "")
        _say(console, f'{column.heading}: {column.count} readings', style="bold")
        for sentence in _sentences(column):
            _say(console, sentence)
        _say(console, "")
        console.print(Text(column.suggestion), soft_wrap=True)
    if result.left_out:
        _say(console, "")
        _say(console, f"Not taken for readings: {', '.join(result.left_out)}.")


def fit_json(result: FitResult) -> str:
    """The same as one JSON object; every value in the `unit` of its column. ValueError where one is not finite."""
    return json.dumps({
        "file": result.file, "sheet": result.sheet, "left_out": list(result.left_out),
        "columns": [_column(column) for column in result.columns],
    }, indent=2, allow_nan=False)


def _say(console: Console, sentence: str, *, style: str = "") -> None:
    console.print(Text(sentence, style=style))


def _sentences(column: FittedColumn) -> list[str]:
    unit, digits = f" {column.unit}" if column.unit else "", _digits(column.deviation.value)

    def ends(interval: Interval) -> str:
        return f"{fixed(interval.value, digits)}{unit} [{fixed(interval.low, digits)}, {fixed(interval.high, digits)}]"

    return [
        f"Mean {ends(column.mean)}, deviation {ends(column.deviation)}; from {fixed(column.lowest, digits)} to "
        f"{fixed(column.highest, digits)}{unit}. In brackets: 95 % intervals, for independent readings of a normal.",
        *_levels(column, unit, digits),
        *([] if column.limits is None else _limits(column.limits, unit)),
        f"Law that a measured variation takes: {_LAWS[column.method]} (test of a normal, Shapiro and Wilk: "
        f"p {_p_words(column.p_normal)}; of a lognormal: {_p_words(column.p_lognormal)}).",
        f"Were they normal, 95 % of all readings lie from {fixed(column.tolerance_low, digits)} to "
        f"{fixed(column.tolerance_high, digits)}{unit}, with 95 % confidence (Howe).",
        f"Whatever their law, at least {percent(column.range_content, 1)} of all lie between the smallest and the "
        f"largest of these, with 95 % confidence (Wilks; 93 readings give 95 %, 473 give 99 %).",
    ]


def _levels(column: FittedColumn, unit: str, digits: int) -> list[str]:
    if not column.shares:
        return []
    parts = ", ".join(
        f"{one.level} {fixed(math.sqrt(max(one.variance, 0.0)), digits)}{unit} ({percent(share, 0)} of the variance)"
        for one, (_, share) in zip(column.components, column.shares, strict=True))
    negative = [one.level for one in column.components if one.variance < 0.0]
    none = f" The estimate for {' and '.join(negative)} came out below nought and counts as none." if negative else ""
    outer = column.components[0]
    told = [f"Deviation by level: {parts}.{none} With {outer.groups} {outer.level}s the share of that level is rough."]
    if any(share > 0.0 for name, share in column.shares if name != "coupon"):
        told.append("The intervals above take readings for independent, and are too narrow for readings that share a "
                    "lot or a panel.")
    return told


def _limits(limits: ColumnLimits, unit: str) -> list[str]:
    span = " to ".join(f"{value:g}" if value is not None else "open" for value in (limits.low, limits.high))
    words = [f"{name} {fixed(value.value, 2)} [{fixed(value.low, 2)}, {fixed(value.high, 2)}]"
             for name, value in (("Cp", limits.cp), ("Cpk", limits.cpk)) if value is not None]
    told = f"{', '.join(words)}; " if words else "no Cpk, because nothing varies; "
    return [f"Limits {span}{unit}: {told}{limits.outside} readings outside, {share_with_range(limits.share_outside)}."]


def _digits(deviation: float) -> int:
    """Digits after the point that leave three of the deviation."""
    return 4 if deviation <= 0.0 else min(max(2 - math.floor(math.log10(deviation)), 0), 9)


def _p_words(p_value: float | None) -> str:
    return "none" if p_value is None else "below 0.001" if p_value < 0.001 else fixed(p_value, 3)


def _interval(interval: Interval | None) -> dict[str, float] | None:
    return None if interval is None else {"value": interval.value, "low": interval.low, "high": interval.high}


def _column(column: FittedColumn) -> dict[str, object]:
    limits = column.limits
    by_level = dict(column.shares)
    return {
        "column": column.heading, "unit": column.unit, "readings": column.count, "mean": _interval(column.mean),
        "std": _interval(column.deviation), "lowest": column.lowest, "highest": column.highest, "law": column.method,
        "p_normal": column.p_normal, "p_lognormal": column.p_lognormal,
        "tolerance_interval": {"content": 0.95, "confidence": 0.95, "low": column.tolerance_low,
                               "high": column.tolerance_high},
        "range_content": {"content": column.range_content, "confidence": 0.95},
        "levels": [{"level": one.level, "groups": one.groups, "degrees": one.degrees, "mean_square": one.mean_square,
                    "variance": one.variance, "share": by_level.get(one.level)} for one in column.components]
        if column.shares else [],
        "limits": None if limits is None else {
            "lower": limits.low, "upper": limits.high, "cp": _interval(limits.cp), "cpk": _interval(limits.cpk),
            "outside": limits.outside, "share_outside": _interval(limits.share_outside)},
        "suggestion": column.suggestion,
    }
