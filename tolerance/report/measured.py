"""Measured data in words, as a table and for the JSON: what was read, and what was made of it."""

from __future__ import annotations

from typing import TYPE_CHECKING

from tolerance.report.tables import Cell, Column, Table
from tolerance.report.wording import METRES_IN, LengthUnit, fixed

if TYPE_CHECKING:
    from tolerance.results import MeasuredInput, RunResult

_COLUMNS = (
    Column("of", "property"), Column("file", "file"), Column("sheet", "sheet"), Column("column", "column"),
    Column("readings", "readings", "", 0), Column("mean", "mean"), Column("std", "deviation"),
    Column("lowest", "lowest"), Column("highest", "highest"), Column("unit", "unit"), Column("law", "law taken"),
    Column("p_normal", "p, normal", "", 3), Column("p_lognormal", "p, lognormal", "", 3),
)


def measured_table(result: RunResult, lengths: LengthUnit) -> Table:
    """One row for each property that varies as measured."""
    rows = [_row(one, lengths) for one in result.measured]
    filled = tuple(column for column in _COLUMNS if any(row[column.key] is not None for row in rows))
    return Table.of(filled, rows)


def measured_object(one: MeasuredInput) -> dict[str, object]:
    """The same for the JSON; numbers in the unit that stands beside them."""
    return dict(_row(one, "um"))


def measured_sentences(result: RunResult) -> list[str]:
    """What was taken for each property, and what its readings cannot say."""
    tables: dict[tuple[str, str | None, str], list[MeasuredInput]] = {}
    for one in result.measured:
        tables.setdefault((one.file, one.sheet, one.column), []).append(one)
    return [_sentence(same[0], ", ".join(one.of for one in same)) for same in tables.values()]


def intervals_of(result: RunResult) -> str:
    """What the intervals of a run allow for."""
    if not result.measured:
        return "the computation alone"
    return "the computation and of the number of readings (of drivers: of the computation alone)"


def _sentence(one: MeasuredInput, properties: str) -> str:
    sheet = f", sheet {one.sheet}" if one.sheet is not None else ""
    beyond = 100.0 / (one.readings + 1)
    return (f'{properties}: {one.readings} readings of "{one.column}" in {one.file}{sheet}; {law_words(one)}. About '
            f"{beyond:.2g} % on each side lies beyond the outermost reading, where the law is an assumption.")


def law_words(one: MeasuredInput) -> str:
    """The law that was taken, and why."""
    normal = "" if one.p_normal is None else f" (test of a normal: p {_p_words(one.p_normal)})"
    if one.method == "smoothed":
        return f"their smoothed quantiles{normal}"
    if one.method == "lognormal":
        return f"a lognormal fitted{normal}"
    return f"a normal fitted{normal}"


def _p_words(p_value: float) -> str:
    return "below 0.001" if p_value < 0.001 else fixed(p_value, 3)


def _row(one: MeasuredInput, lengths: LengthUnit) -> dict[str, Cell]:
    is_length = one.measure in ("length", "copper length")
    scale = METRES_IN[lengths] if is_length else 1.0
    sizes = {"mean": one.mean, "std": one.deviation, "lowest": one.lowest, "highest": one.highest}
    return {
        "of": one.of, "file": one.file, "sheet": one.sheet, "column": one.column, "readings": one.readings,
        **{key: float(f"{value / scale:.7g}") for key, value in sizes.items()},
        "unit": lengths if is_length else "-", "law": law_words(one),
        "p_normal": one.p_normal, "p_lognormal": one.p_lognormal,
    }
