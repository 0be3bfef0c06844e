"""Headed rows about lots and the impedance test, and the same in a few words for the terminal."""

from __future__ import annotations

from typing import TYPE_CHECKING

from tolerance.report.tables import Cell, Column, Table, ends
from tolerance.report.wording import (
    fixed,
    percent,
    percent_digits,
    share_range_text,
    share_text,
    share_with_range,
    trimmed,
    two_rows,
)

if TYPE_CHECKING:
    from tolerance.results import Interval, LineResult, LotAcceptance, NestedYield, ReadingRisks, RunResult

TOGETHER = "all lines together"
LEVELS = ("lot", "panel", "coupon")
SHOWN_QUANTILE = 0.05  # of the lots, on the terminal
SHOWN_GUARD_BAND = 0.001  # false accepts, on the terminal

Heading = tuple[str, bool]  # of a column on the terminal, and whether it holds text
TextTable = tuple[tuple[Heading, ...], list[tuple[str, ...]]]


def level_table(result: RunResult) -> Table:
    """Yields of panels and lots and shares of the variance by level: one row a line, and one for all together."""
    assert result.nested is not None
    named = [(line.name, line) for line in result.lines]
    rows = [_level_row(name, line.nested, line) for name, line in named if line.nested is not None]
    columns = (
        Column("line", "line"), *_share_columns("yield", "yield of coupons", 2),
        *_share_columns("panel_yield", "yield of panels", 2), *_share_columns("lot_yield", "yield of lots", 2),
        *(Column(f"quantile_{share}", f"yield of the worst {trimmed(100.0 * share, 0)} % of lots, at most", "share", 2)
          for share, _ in result.nested.quantiles),
        *(column for name in LEVELS for column in _share_columns(f"variance_{name}", f"variance by {name}", 1)),
    )
    every = _level_row(TOGETHER, result.nested, None)
    every |= ends("yield", result.inside)
    return Table.of(columns, [*rows, every])


def level_driver_table(result: RunResult) -> Table:
    """What each variable does at each level, total effects: one row for each line and variable."""
    columns = (Column("line", "line"), Column("variable", "variable"),
               *(column for name in LEVELS for column in _share_columns(name, f"by {name}", 1)))
    rows: list[dict[str, Cell]] = []
    for line in result.lines:
        for driver in () if line.variance is None else line.variance.drivers:
            row: dict[str, Cell] = {"line": line.name, "variable": driver.variable}
            for name in LEVELS:
                row |= ends(name, getattr(driver, name))
            rows.append(row)
    return Table.of(columns, rows)


def reading_table(result: RunResult) -> Table:
    """What readings make of the coupons, and guard bands against false accepts: one row a line, one for all."""
    assert result.reading is not None
    columns = (
        Column("line", "line"), Column("repeatability", "deviation of a reading", "ohm", 3),
        Column("bias", "bias of a reading", "ohm", 3), Column("guard_band", "guard band", "ohm", 3),
        *_share_columns("yield", "yield, true", 2),
        *_share_columns("as_read", "yield as read", 2), *_share_columns("accepted", "accepted", 2),
        *_share_columns("false_accepts", "false accepts", 3), *_share_columns("false_rejects", "false rejects", 3),
        *(column for each in result.reading.guard_bands for column in _guard_columns(each.wanted)),
    )
    rows = [_test_row(line.name, line.inside, line.reading) for line in result.lines if line.reading is not None]
    return Table.of(columns, [*rows, _test_row(TOGETHER, result.inside, result.reading)])


def acceptance_table(acceptance: LotAcceptance) -> Table:
    """The operating characteristic: one row for each class of lots that occurs, best first."""
    columns = (
        Column("above", "share of failing coupons in the lot, above", "share", 1), Column("up_to", "up to", "share", 1),
        Column("failing", "mean of them", "share", 2), Column("share_of_lots", "lots like that", "share", 2),
        *_share_columns("accepted", "accepted", 2), Column("as_known", "accepted, were readings true", "share", 2),
    )
    return Table.of(columns, [
        {"above": point.above, "up_to": point.up_to, "failing": point.failing, "share_of_lots": point.share_of_lots,
         **ends("accepted", point.accepted), "as_known": point.as_known}
        for point in acceptance.curve])


def text_tables(result: RunResult, name_width: int) -> list[TextTable]:
    """Lots and test on the terminal: no table without levels and [test]."""
    tables: list[TextTable] = []
    heads: tuple[Heading, ...]
    if result.nested is not None:
        heads = (("line", True), ("variance by\nlot, panel, coupon\n[%]", False), ("all pass\non a panel\n[%]", False),
                 ("all pass\nin a lot\n[%]", False), ("worst 5 %\nof lots\n[%]", False))
        rows = [_level_words(two_rows(line.name, name_width), line.nested, line)
                for line in result.lines if line.nested is not None]
        tables.append((heads, [*rows, _level_words(two_rows(TOGETHER, name_width), result.nested, None)]))
    if result.reading is not None:
        heads = (("line", True), ("yield as read\naccepted\n[%]", False),
                 ("false\naccepts\n[%]", False), ("false\nrejects\n[%]", False),
                 ("guard band\nfor 0.1 %\n[ohm]", False))
        rows = [_test_words(two_rows(line.name, name_width), line.reading)
                for line in result.lines if line.reading is not None]
        tables.append((heads, [*rows, _test_words(two_rows(TOGETHER, name_width), result.reading)]))
    return tables


def sentences(result: RunResult) -> list[str]:
    """What is said of lots, of readings and of their acceptance."""
    said = []
    if result.lots is not None and result.nested is not None:
        lots = result.lots
        said.append(f"Drawn as {lots.lots:,} lots of {lots.panels_per_lot} panels with {lots.coupons_per_panel} "
                    f"coupons. Every coupon passes on {share_with_range(result.nested.panel)} of the panels, "
                    f"and in {share_with_range(result.nested.lot)} of the lots.")
    if result.reading is not None:
        reading = result.reading.reading
        said.append(f"A reading scatters by {trimmed(reading.repeatability, 3)} ohm and is off by "
                    f"{trimmed(reading.bias, 3)} ohm; guard band {trimmed(reading.guard_band, 3)} ohm. "
                    "False accepts lie outside the limits and are read inside (less the guard band), false rejects the "
                    "reverse: shares of all coupons. A guard band for 0.1 % holds false accepts to that.")
    if result.acceptance is not None:
        said.append(acceptance_sentence(result.acceptance))
    return said


def acceptance_sentence(acceptance: LotAcceptance) -> str:
    """The sampling plan and what it does, in two sentences."""
    plan = acceptance.plan
    digits = percent_digits(acceptance.accepted)
    quality = "No lot is ever accepted." if acceptance.quality is None else (
        f"Of the coupons in accepted lots {share_with_range(acceptance.quality)} pass.")
    return (f"With {plan.sample_size} of {acceptance.size.coupons} coupons measured and at most {plan.accept_number} "
            f"failing, a lot is accepted with a chance of {share_with_range(acceptance.accepted)} "
            f"({percent(acceptance.if_independent, digits)} by the formula for independent coupons). {quality}")


def _share_columns(key: str, heading: str, digits: int) -> tuple[Column, Column, Column]:
    return (Column(key, heading, "share", digits), Column(f"{key}_low", f"{heading}, low end", "share", digits),
            Column(f"{key}_high", f"{heading}, high end", "share", digits))


def _guard_columns(wanted: float) -> tuple[Column, ...]:
    aim, key = f"{trimmed(100.0 * wanted, 3)} % false accepts", f"band_{wanted}"
    return (Column(key, f"guard band for {aim}", "ohm", 3), Column(f"{key}_low", f"for {aim}, low end", "ohm", 3),
            Column(f"{key}_high", f"for {aim}, high end", "ohm", 3),
            Column(f"{key}_rejects", f"false rejects with the guard band for {aim}", "share", 2))


def _level_row(name: str, nested: NestedYield, line: LineResult | None) -> dict[str, Cell]:
    variance = None if line is None else line.variance
    row: dict[str, Cell] = {
        "line": name, **ends("yield", None if line is None else line.inside),
        **ends("panel_yield", nested.panel), **ends("lot_yield", nested.lot),
        **{f"quantile_{share}": value for share, value in nested.quantiles},
    }
    for level in LEVELS:
        row |= ends(f"variance_{level}", None if variance is None else getattr(variance, level))
    return row


def _test_row(name: str, inside: Interval, risks: ReadingRisks) -> dict[str, Cell]:
    reading = risks.reading
    row: dict[str, Cell] = {"line": name, "repeatability": reading.repeatability, "bias": reading.bias,
                            "guard_band": reading.guard_band, **ends("yield", inside)}
    for share in ("as_read", "accepted", "false_accepts", "false_rejects"):
        row |= ends(share, getattr(risks, share))
    for each in risks.guard_bands:
        key = f"band_{each.wanted}"
        row |= {**ends(key, each.band), f"{key}_rejects": each.false_rejects}
    return row


def _bare(interval: Interval) -> str:
    return f"{share_text(interval).removesuffix(' %')}\n{share_range_text(interval)}"


def _level_words(name: str, nested: NestedYield, line: LineResult | None) -> tuple[str, ...]:
    parts = ""
    if line is not None and line.variance is not None:
        parts = ", ".join(fixed(100.0 * getattr(line.variance, level).value, 0) for level in LEVELS)
    worst = dict(nested.quantiles)[SHOWN_QUANTILE]
    return name, parts, _bare(nested.panel), _bare(nested.lot), f"{fixed(100.0 * worst, 1)}\nor less"


def _test_words(name: str, risks: ReadingRisks) -> tuple[str, ...]:
    band = next(each.band for each in risks.guard_bands if each.wanted == SHOWN_GUARD_BAND)
    read, accepted = (share_text(share).removesuffix(" %") for share in (risks.as_read, risks.accepted))
    return (name, f"{read}\n{accepted}", _bare(risks.false_accepts), _bare(risks.false_rejects),
            f"{fixed(band.value, 2)}\n[{fixed(band.low, 2)}, {fixed(band.high, 2)}]")
