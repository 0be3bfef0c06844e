"""A re-made run in words."""

from __future__ import annotations

from typing import TYPE_CHECKING

from tolerance.report.printed import say

if TYPE_CHECKING:
    from rich.console import Console

    from tolerance.records.again import AgainResult

MOST_FIGURES = 12


def print_again(made: AgainResult, console: Console) -> None:
    """Whether the run is the same, and what is not as it was."""
    result = made.result
    say(console, result.title, style="bold")
    say(console, f"Re-made from its record: seed {result.seed}, {result.coupons:,} coupons, "
                 f"{len(result.lines)} line{'s' * (len(result.lines) != 1)}.")
    for name in made.changed:
        say(console, f"{name} has changed since; the copy in the record was used.")
    for name, then, now in made.made_with:
        say(console, f"Not as it was: {name}: {then} then, {now} now.")
    if made.same:
        say(console, "The same result, to the last bit.")
        return
    say(console, "NOT the same to the last bit" + (
        "." if made.made_with else ", and nothing that is recorded differs: please report it."))
    for figure in made.figures[:MOST_FIGURES]:
        say(console, f"{figure.name}: {figure.then:.10g} then, {figure.now:.10g} now "
                     f"(by {abs(figure.now - figure.then):.1e})")
    if len(made.figures) > MOST_FIGURES:
        say(console, f"and {len(made.figures) - MOST_FIGURES} more figures.")
    if not made.figures:
        say(console, "Yields, means and deviations are the same; what differs is in the other figures.")
