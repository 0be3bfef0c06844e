"""The talk with a fabricator on the terminal: what is asked, what was taken, and how measured coupons agree."""

from __future__ import annotations

from typing import TYPE_CHECKING

from rich.text import Text

from tolerance.report.printed import name_width, print_table, say, text_table
from tolerance.report.request import assumed_tolerance, importance
from tolerance.report.wording import percent, share_with_range, two_rows
from tolerance.sheet.layout import name_of

if TYPE_CHECKING:
    from pathlib import Path

    from rich.console import Console

    from tolerance.exchanged import Request, Taken

NAME_WIDTH = 30


def print_request(request: Request, console: Console, written: Path | None) -> None:
    """What is asked, the most important first, and where the workbook is."""
    say(console, request.scenario.title, style="bold")
    table = text_table(("what is asked", True), ("assumed", True), ("weight\n[%]", False), ("", True))
    for row in request.rows:
        table.add_row(Text(two_rows(name_of(row.variation.of), 36)),
                      Text(assumed_tolerance(row.variation, row.members, request.scenario.report.lengths)),
                      percent(row.weight, 1).removesuffix(" %"), importance(row.weight))
    print_table(console, table)
    say(console, "Weight: share in the spread of all lines, each in units of its own limit. It is not in the workbook.")
    if written is not None:
        say(console, f"Written: {written}")


def print_taken(taken: Taken, console: Console, written: Path | None) -> None:
    """What changes, what could not be read, and the yield before and after."""
    say(console, taken.title, style="bold")
    if taken.changes:
        table = text_table(("cell", True), ("dimension", True), ("becomes", True))
        for change in taken.changes:
            offered = "offer: " if change.table == "offers" else ""
            table.add_row(Text(change.address), Text(two_rows(name_of(change.of), NAME_WIDTH)),
                          Text(f"{offered}{change.key} = {change.value}"))
        print_table(console, table)
    else:
        say(console, "Nothing changes: no answer was found in the sheet that could be taken.")
    for note in taken.notes:
        say(console, f"Not taken: {note}")
    for of, said in taken.remarks:
        say(console, f"Remark on {name_of(of)}: {said}")
    _print_yields(taken, console)
    if written is not None:
        say(console, f"Written: {written}")


def _print_yields(taken: Taken, console: Console) -> None:
    if taken.after is None:
        say(console, f"Yield of all lines together: {share_with_range(taken.before.inside)}, as before.")
        return
    table = text_table(("line", True), ("yield before [%]", False), ("yield after [%]", False))
    width = name_width(console)
    pairs = [*zip((line.name for line in taken.before.lines), (line.inside for line in taken.before.lines),
                  (line.inside for line in taken.after.lines), strict=True),
             ("all lines together", taken.before.inside, taken.after.inside)]
    for name, old, new in pairs:
        table.add_row(Text(two_rows(name, width)), share_with_range(old).replace(" %", ""),
                      share_with_range(new).replace(" %", ""))
    print_table(console, table)
    say(console, f"Same draws before and after ({taken.before.coupons:,} coupons, seed {taken.before.seed}). In "
                 "brackets: 95 % intervals of the computation alone.")
