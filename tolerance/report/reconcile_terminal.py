"""Measured coupons against the prediction, on the terminal."""

from __future__ import annotations

from typing import TYPE_CHECKING

from rich.text import Text

from tolerance.report.printed import name_width, print_table, say, text_table
from tolerance.report.reconcile_words import fit_sentence, moved_words, tied_sentence, verdict_sentence
from tolerance.report.wording import CAUTION, LengthUnit, fixed, percent, share_text, two_rows, variable_words

if TYPE_CHECKING:
    from pathlib import Path

    from rich.console import Console

    from tolerance.reconciled import Reconciled

SHIFTS_SHOWN, LEAST_LEARNED = 6, 0.1


def print_reconciled(result: Reconciled, lengths: LengthUnit, console: Console, written: Path | None) -> None:
    """Fit, offsets, causes, shifts, and the yields to come."""
    say(console, result.title, style="bold")
    _print_lines(result, console)
    for lot in (*result.lots, result.everything):
        say(console, fit_sentence(lot), style="" if lot.fits else "bold")
    say(console, verdict_sentence(result, lengths), style="bold")
    _print_shifts(result, lengths, console)
    tied = tied_sentence(result)
    if tied:
        say(console, tied)
    _print_yields(result, console)
    say(console, f"{result.readings} readings, repeatability {fixed(result.repeatability, 2)} ohm. Intervals of shifts "
                 f"hold 90 %, those of offsets 95 %. Coupons scatter with {percent(result.scatter, 0)} of the variance "
                 f"given. {CAUTION}")
    if written is not None:
        say(console, f"Written: {written}")


def _print_lines(result: Reconciled, console: Console) -> None:
    table = text_table(("line", True), ("readings", False), ("mean\n[ohm]", False),
                       ("off the\nprediction\n[ohm]", False), ("in deviations\nof a lot", False))
    for line in result.everything.lines:
        ends = f"[{fixed(line.off.low, 2)}, {fixed(line.off.high, 2)}]"
        table.add_row(Text(two_rows(line.line, name_width(console))), str(line.readings), fixed(line.mean, 2),
                      f"{fixed(line.off.value, 2)} {ends}", fixed(line.score, 1))
    print_table(console, table)


def _print_shifts(result: Reconciled, lengths: LengthUnit, console: Console) -> None:
    known = [shift for shift in result.shifts if shift.learned >= LEAST_LEARNED][:SHIFTS_SHOWN]
    if not known:
        say(console, "The readings say next to nothing of any single dimension.")
        return
    table = text_table(("most plausible shift, all together", True), ("from the middle of what is given", True),
                       ("learned\n[%]", False))
    for shift in known:
        table.add_row(Text(two_rows(variable_words(shift.variable), 34)),
                      Text(moved_words(shift.members[0], lengths)), fixed(100.0 * shift.learned, 0))
    print_table(console, table)


def _print_yields(result: Reconciled, console: Console) -> None:
    table = text_table(("yield of the lots to come [%]", True), ("as\ngiven", False), ("like these\nlots", False),
                       ("shifted, else\nas given", False))
    for each in result.yields:
        table.add_row(Text(two_rows(each.name, name_width(console))),
                      *(share_text(one).removesuffix(" %") for one in (each.given, each.alike, each.shifted)))
    print_table(console, table)
