"""A sweep as JSON text and on the terminal."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TYPE_CHECKING

from rich.text import Text

from tolerance.report.terminal import _print_table as print_table
from tolerance.report.terminal import _say as say
from tolerance.report.terminal import _table as text_table
from tolerance.report.wording import share_with_range, two_rows
from tolerance.results import Interval
from tolerance.swept import SweptRow, shown_value

if TYPE_CHECKING:
    from rich.console import Console

    from tolerance.swept import SweepResult

MOST_ROWS = 40  # on the terminal
MOST_FAILURES = 10
NAME_WIDTH, VALUES_WIDTH = 22, 26


def sweep_json(result: SweepResult) -> str:
    """All rows as one JSON object; a result is that of `tolerance run`."""
    rows = [{"scenario": row.source, "swept": dict(row.swept), "failed": row.result is None,
             "message": row.message or None, "result": row.result} for row in result.rows]
    return json.dumps({"rows": rows}, indent=2, allow_nan=False)


def print_sweep(result: SweepResult, console: Console) -> None:
    """A row a scenario: what was swept, the yield of all lines together, the lowest line."""
    table = text_table(("scenario", True), ("swept", True), ("all lines\ntogether [%]", False),
                       ("lowest line [%]", True))
    for row in result.rows[:MOST_ROWS]:
        table.add_row(Text(two_rows(Path(row.source).stem, NAME_WIDTH)), Text(_values(row)), *_figures(row))
    print_table(console, table)
    if len(result.rows) > MOST_ROWS:
        say(console, f"The first {MOST_ROWS} of {len(result.rows)} scenarios.")
    failed = [(number, row) for number, row in enumerate(result.rows, start=1) if row.result is None]
    for number, row in failed[:MOST_FAILURES]:
        say(console, f"FAILED, scenario {number} ({row.source}): {row.message}")
    if len(failed) > MOST_FAILURES:
        say(console, f"{len(failed) - MOST_FAILURES} more failed; the table has their messages.")
    done = len(result.rows) - result.failed
    say(console, f"{done} of {len(result.rows)} scenarios done. In brackets: 95 % intervals of the computation alone.")


def _values(row: SweptRow) -> str:
    shown = [f"{_short(name)} {shown_value(value)}" for name, value in row.swept.items()]
    return "\n".join(two_rows(one, VALUES_WIDTH) for one in shown)


def _short(path: str) -> str:
    """The paths without their tables: entry and key say enough on a screen."""
    return ", ".join(one.partition(".")[2] or one for one in path.split(", "))


def _figures(row: SweptRow) -> tuple[str, str]:
    if row.result is None:
        return "FAILED", ""
    inside = Interval(**row.result["yield"])
    lowest = min(row.result["lines"], key=lambda line: float(line["yield"]["value"]))
    misses = " MISSES" if lowest["yield"]["value"] < row.result["target_yield"] else ""
    figure = share_with_range(Interval(**lowest["yield"])).replace(" %", "").partition(" [")[0]
    return share_with_range(inside).replace(" %", ""), f"{figure}{misses}\n{two_rows(lowest['name'], NAME_WIDTH)}"
