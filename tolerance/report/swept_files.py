"""The tables of a sweep as files: CSV and a workbook, and Parquet where pyarrow is installed."""

from __future__ import annotations

import csv
import math
import re
from collections.abc import Hashable
from functools import partial
from importlib.util import find_spec
from pathlib import Path
from typing import TYPE_CHECKING

import pandas as pd
from openpyxl import Workbook

from tolerance.report.files import put_in_place, put_workbook_in_place, remove_earlier
from tolerance.report.sheet_tables import write_table
from tolerance.report.sheet_text import plain_cell
from tolerance.report.tables import Cell, Column, Table

if TYPE_CHECKING:
    from tolerance.swept import SweepResult

JOB = "sweep"
MOST_ACROSS = 16_000  # columns of a sheet
_SHARE = re.compile(r"(?:.*: |lowest_line_)?(?:yield(?:_low|_high)?|below|above)|lowest_line_yield")


def write_sweep(result: SweepResult, folder: Path) -> list[Path]:
    """Write the tables into `folder`: a row a scenario, and a row a scenario and line. Raises UnfinishedError."""
    frames = {"sweep": result.table, "sweep-lines": result.line_table}
    written = [put_workbook_in_place(folder / "sweep.xlsx", _workbook(frames))]
    for name, frame in frames.items():
        written.append(put_in_place(folder / f"{name}.csv", partial(_write_csv, frame)))
        if find_spec("pyarrow") is not None:
            written.append(put_in_place(folder / f"{name}.parquet", partial(_write_parquet, frame)))
    remove_earlier(folder, written, job=JOB)
    return written


def _write_csv(frame: pd.DataFrame, path: Path) -> None:
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file)
        writer.writerow([plain_cell(str(name)) for name in frame.columns])
        for row in frame.itertuples(index=False, name=None):
            writer.writerow([_text(value) for value in row])


def _write_parquet(frame: pd.DataFrame, path: Path) -> None:
    """Columns of mixed swept values (numbers and texts) as text: a column has one type there."""
    plain = frame.copy()
    for name in frame.columns:
        if frame[name].dtype == object:
            plain[name] = [_text(value) or None for value in frame[name]]
    plain.to_parquet(path, engine="pyarrow", index=False)


def _text(value: Hashable) -> str:
    cell = _cell(value)
    return "" if cell is None else plain_cell(cell) if isinstance(cell, str) else repr(cell)


def _workbook(frames: dict[str, pd.DataFrame]) -> Workbook:
    book = Workbook()
    first = book.active
    assert first is not None
    book.remove(first)
    for title, frame in zip(("Scenarios", "Lines"), frames.values(), strict=True):
        sheet = book.create_sheet(title)
        columns = tuple(_column(str(name)) for name in frame.columns[:MOST_ACROSS])
        rows = tuple(tuple(_cell(value) for value in row[:MOST_ACROSS])
                     for row in frame.itertuples(index=False, name=None))
        write_table(sheet, Table(columns or (Column("line", "line"),), rows), top=1)
        sheet.freeze_panes = "B2"
    return book


def _column(name: str) -> Column:
    words = name.removesuffix("_ohm").replace("_", " ")
    if name.endswith("_ohm"):
        return Column(name, words, "ohm", 2)
    if _SHARE.fullmatch(name):
        return Column(name, words, "share", 2)
    return Column(name, words, "", 2 if name.endswith("cpk") else None)


def _cell(value: Hashable) -> Cell:
    if isinstance(value, bool) or type(value).__name__ == "bool_":
        return "yes" if value else "no"
    if isinstance(value, str):
        return value
    if value is None or (isinstance(value, float) and math.isnan(value)):
        return None
    if isinstance(value, float):
        return int(value) if value.is_integer() and abs(value) < 2**53 else float(value)
    return value if isinstance(value, int) else str(value)
