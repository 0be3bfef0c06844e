"""A sweep as JSON text and on the terminal."""

from __future__ import annotations

import json
import textwrap
from pathlib import Path
from typing import TYPE_CHECKING

from rich.text import Text

from tolerance.report.printed import print_table, say, text_table
from tolerance.report.wording import share_with_range, two_rows
from tolerance.results import Interval
from tolerance.swept import SweptRow, shown_value

if TYPE_CHECKING:
    from collections.abc import Sequence

    from rich.console import Console

    from tolerance.swept import SweepResult

MOST_ROWS = 40  # on the terminal
MOST_FAILURES = 10
NAME_WIDTH, VALUES_WIDTH = 20, 24
UNBROKEN = "\N{NO-BREAK SPACE}"


def sweep_json(result: SweepResult) -> str:
    """All rows as one JSON object; a result is that of `tolerance run`."""
    rows = [{"scenario": row.source, "swept": dict(row.swept), "failed": row.result is None,
             "message": row.message or None, "result": row.result} for row in result.rows]
    return json.dumps({"rows": rows}, indent=2, allow_nan=False)


def print_sweep(result: SweepResult, console: Console) -> None:
    """A row a scenario: what was swept, the yield of all lines together, the lowest line."""
    several = len({row.source for row in result.rows}) > 1
    if result.names:
        say(console, f"Swept, in this order: {'; '.join(result.names)}.")
    heads = (("scenario", several), ("swept values", bool(result.names)))
    table = text_table(*((head, True) for head, shown in heads if shown), ("all lines\ntogether [%]", False),
                       ("lowest line [%]", True))
    for row in result.rows[:MOST_ROWS]:
        cells = (two_rows(Path(row.source).stem, NAME_WIDTH), _values(row, result.names))
        table.add_row(*(Text(cell) for cell, (_, shown) in zip(cells, heads, strict=True) if shown), *_figures(row))
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


def _values(row: SweptRow, names: Sequence[str]) -> str:
    shown = [str(shown_value(row.swept[name])) if name in row.swept else "-" for name in names]
    text = ", ".join(value.replace(" ", UNBROKEN) for value in shown)
    return "\n".join(textwrap.wrap(text, VALUES_WIDTH)).replace(UNBROKEN, " ")


def _figures(row: SweptRow) -> tuple[str, str]:
    if row.result is None:
        return "FAILED", ""
    inside = Interval(**row.result["yield"])
    lowest = min(row.result["lines"], key=lambda line: float(line["yield"]["value"]))
    misses = " MISSES" if lowest["yield"]["value"] < row.result["target_yield"] else ""
    figure = share_with_range(Interval(**lowest["yield"])).replace(" %", "").partition(" [")[0]
    return share_with_range(inside).replace(" %", ""), f"{figure}{misses}\n{two_rows(lowest['name'], NAME_WIDTH)}"
