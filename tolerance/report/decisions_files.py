"""Decisions as files: one workbook and one figure each, whole or not at all."""

from __future__ import annotations

from collections.abc import Callable, Hashable
from pathlib import Path
from typing import TYPE_CHECKING

import pandas as pd
from openpyxl import Workbook

from tolerance.decided import CenterResult, CompareResult, PromiseResult, TightenResult
from tolerance.report.decisions_plot import compare_page, front_page, promise_page, tighten_page, widths_page
from tolerance.report.figures import picture
from tolerance.report.files import put_in_place, put_workbook_in_place, remove_earlier
from tolerance.report.sheet_tables import write_table
from tolerance.report.tables import Cell, Column, Table
from tolerance.report.wording import METRES_IN, LengthUnit

if TYPE_CHECKING:
    from matplotlib.figure import Figure

Decision = TightenResult | CenterResult | PromiseResult | CompareResult
SHARES = ("yield", "gain", "loss", "difference", "limit", "tightest", "all line", "lowest_line_yield")
LENGTHS = ("width", "gap", "best_width", "best_gap", "on_target_width")


def write_decision(result: Decision, folder: Path, lengths: LengthUnit) -> list[Path]:
    """Write the workbook and the figure into `folder` (made if missing). Raises UnfinishedError where it cannot be."""
    job, sheets, page = _parts(result, lengths)
    book = Workbook()
    first = book.active
    assert first is not None
    book.remove(first)
    for name, frame in sheets:
        sheet = book.create_sheet(name)
        write_table(sheet, table_of_frame(frame, lengths), top=1)
        sheet.freeze_panes = "B2"
    written = [put_workbook_in_place(folder / f"{job}.xlsx", book),
               put_in_place(folder / f"{job}.png", picture(page()))]
    remove_earlier(folder, written, job=job)
    return written


def _parts(
    result: Decision, lengths: LengthUnit,
) -> tuple[str, list[tuple[str, pd.DataFrame]], Callable[[], Figure]]:
    """Name, sheets and figure of a decision."""
    if isinstance(result, TightenResult):
        sheets = [("Tolerances", result.table), ("Yield against tolerance", result.curve_table)]
        if result.offers is None:
            return "tighten", sheets, lambda: tighten_page(result)
        return "tighten", [*sheets, ("Cost and yield", result.front_table)], lambda: front_page(result)
    if isinstance(result, CenterResult):
        return "center", [("Centre", result.table)], lambda: widths_page(result, lengths)
    if isinstance(result, PromiseResult):
        sheets = [("Limits", result.table), ("Yield against limit", result.curve_table)]
        return "promise", sheets, lambda: promise_page(result)
    return "compare", [("Compared", result.table)], lambda: compare_page(result)


def table_of_frame(frame: pd.DataFrame, lengths: LengthUnit) -> Table:
    """A data frame as headed rows: lengths in the unit asked for, shares shown in percent."""
    columns = tuple(_column(str(name), lengths) for name in frame.columns)
    factors = [1.0 / METRES_IN[lengths] if column.unit == lengths else 1.0 for column in columns]
    rows = tuple(tuple(_cell(value, factor) for value, factor in zip(row, factors, strict=True))
                 for row in frame.itertuples(index=False, name=None))
    return Table(columns, rows)


def _column(name: str, lengths: LengthUnit) -> Column:
    words = name.removesuffix("_ohm").replace("_", " ")
    if name in LENGTHS:
        return Column(name, words, lengths, 2)
    if name.endswith("_ohm"):
        return Column(name, words, "ohm", 2)
    if name.endswith("factor"):
        return Column(name, words, "", 3)
    if name.startswith(SHARES):
        return Column(name, words, "share", 2)
    return Column(name, words, "" if name in ("variation", "line", "cost", "offers", "file") else "share", None
                  if name in ("cost",) else 2)


def _cell(value: Hashable, factor: float) -> Cell:
    if isinstance(value, bool) or type(value).__name__ == "bool_":
        return "yes" if value else "no"
    if isinstance(value, str | int):
        return value
    if value is None or not isinstance(value, float) or value != value:  # a gap that is not there
        return None
    return float(value) * factor
