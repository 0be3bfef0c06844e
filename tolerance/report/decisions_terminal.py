"""Decisions on the terminal: tables that fit 80 columns, and what follows from them in a sentence each."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING

from rich.text import Text

from tolerance.report.printed import name_width, print_table, say, text_table
from tolerance.report.wording import (
    LengthUnit,
    fixed,
    headline_text,
    length_text,
    percent,
    percent_digits,
    share_range_text,
    share_text,
    shorten,
    trimmed,
    two_rows,
    variable_words,
)

if TYPE_CHECKING:
    from rich.console import Console

    from tolerance.decided import (
        Basis,
        CenterResult,
        CentredLine,
        Compared,
        CompareResult,
        Interval,
        Judged,
        Offers,
        PromiseResult,
        Tightening,
        TightenResult,
        Way,
    )

LONGEST_SET = 44
OF_COMPUTATION = "In brackets: 95 % intervals of the computation alone."


def print_tighten(result: TightenResult, console: Console) -> None:
    """What each tolerance is worth, and what the offers come to."""
    basis = result.basis
    say(console, basis.title, style="bold")
    say(console, f"{_yields_words(basis, result.now)} {_aim_words(basis)}")
    table = text_table(("half-widths of", True), ("if halved:\nyield\ngain [%]", False),
                       ("at nought:\nyield\n[%]", False), ("to the\ntarget\nalone", False),
                       ("if doubled:\nyield\nloss [%]", False), ("may\ngrow\nto", False))
    for one in result.variations:
        table.add_row(
            Text(two_rows(one.name, 26)), f"{_bare(one.halved.together)}\n{_signed(one.gain)}",
            _bare(one.perfect.together), _needed_words(basis, one),
            f"{_bare(one.doubled.together)}\n{_signed(one.loss)}",
            "-" if one.relaxed is None else "x 2 or more" if one.relaxed >= 2.0 else f"x {fixed(one.relaxed, 2)}")
    print_table(console, table)
    say(console, "Yields here: all lines together. To the target alone: by what the half-width must be multiplied. May "
                 "grow to: up to where the target is still met.")
    _say_relaxed(result, console)
    if result.offers is not None:
        _print_offers(basis, result.offers, console)


def print_center(result: CenterResult, lengths: LengthUnit, console: Console) -> None:
    """Where to centre each line, and what that buys."""
    basis = result.basis
    say(console, basis.title, style="bold")
    say(console, f"{_yields_words(basis, result.now)} {_aim_words(basis)}")
    table = text_table(("line", True), (f"drawn\nwidth\ngap [{lengths}]", False), (f"best\nwidth\n[{lengths}]", False),
                       (f"mean on\ntarget\n[{lengths}]", False), ("yield\nnow\n[%]", False),
                       ("at the\nbest\n[%]", False), ("gain\n\n[%]", False), ("to im-\npedance\n[%]", False))
    for one in result.lines:
        table.add_row(Text(two_rows(one.name, name_width(console))), *_center_cells(one, lengths, moved=result.moved
                                                                                    is not None))
    print_table(console, table)
    _say_center(result, lengths, console)
    for one in result.lines:
        for each in one.gaps:
            say(console, f'"{one.name}" with a gap of {length_text(each.gap, lengths)}: '
                         f"{length_text(each.width, lengths)} wide (nominal on the target), "
                         f"yield {share_text(each.inside)}.")
    for way in result.ways:
        say(console, _way_words(basis, way))


def print_promise(result: PromiseResult, console: Console) -> None:
    """The tightest limits that meet the target yield."""
    basis = result.basis
    aim = f"{trimmed(100.0 * basis.target_yield, 3)} %"
    say(console, basis.title, style="bold")
    table = text_table(("line", True), ("target\n[ohm]", False), ("limit\nnow [%]", False),
                       (f"tightest limit\nfor {aim} [%]", False), ("95 %\ninterval [%]", False), ("", True))
    for one in (*result.lines, result.together):
        needed = one.curve.needed
        digits = 2 if needed is None else min(max(percent_digits(needed), 1), 2)
        verdict = "" if one.limit is None or needed is None else "holds" if needed.value <= one.limit else "MISSES"
        table.add_row(
            Text(two_rows(one.name or "all lines held to one limit", 30)), trimmed(one.target or 0.0, 2)
            if one.target else "", "" if one.limit is None else trimmed(100.0 * one.limit, 2),
            "none" if needed is None else percent(needed.value, digits).removesuffix(" %"),
            "" if needed is None else f"[{fixed(100.0 * needed.low, digits)}, {fixed(100.0 * needed.high, digits)}]",
            verdict)
    print_table(console, table)
    together = result.together.curve.needed
    if together is not None:
        say(console, f"All lines together, held to one limit: {aim} of the coupons pass within "
                     f"{percent(together.value, 1)} of the targets.", style="bold")
    say(console, f"{basis.coupons:,} coupons, seed {basis.seed}. The intervals are those of the computation alone.")


def print_compare(result: CompareResult, console: Console) -> None:
    """Scenarios side by side, and which differences are real."""
    for number, one in enumerate(result.scenarios, start=1):
        say(console, f"{number}: {one.title} ({one.file})", style="bold")
    table = text_table(("line", True), *((f"{number}\nyield [%]\n" + ("" if number == 1 else "less 1"), False)
                                         for number in range(1, len(result.scenarios) + 1)))
    names = dict.fromkeys(name for one in result.scenarios for name in one.line_names)
    for name in (*names, ""):
        table.add_row(Text(two_rows(name or "all lines together", 24)),
                      *(_compared_cell(one, name) for one in result.scenarios))
    print_table(console, table)
    for number, one in enumerate(result.scenarios[1:], start=2):
        say(console, _difference_words(number, one))
    for number, one in enumerate(result.scenarios, start=1):
        drivers = "; ".join(f'"{shorten(name, 20)}" {_driver_words(each)}'
                            for name, each in zip(one.line_names, one.drivers, strict=True))
        say(console, f"Largest drivers in {number}: {drivers}.")
    for number, one in enumerate(result.scenarios, start=1):
        if one.has_offers:
            say(console, f"Offers in {number}: " + (
                "no set of them reaches the target." if one.cost is None else
                f"the target is reached for {one.cost:g} ({', '.join(one.cost_offers) or 'nothing to buy'})."))
    say(console, f"The same {result.coupons:,} draws for all (seed {result.seed}). {OF_COMPUTATION}")


def _print_offers(basis: Basis, offers: Offers, console: Console) -> None:
    table = text_table(("offer, taken alone", True), ("cost", False), ("yield\n[%]", False), ("gain\n[%]", False),
                       ("lowest\nline [%]", False))
    for one in offers.offers:
        table.add_row(Text(two_rows(f"{one.name} {one.tolerance}", 34)), f"{one.cost:g}", _bare(one.yields.together),
                      _signed(one.gain), _bare(basis.lowest(one.yields)[1]))
    print_table(console, table)
    front = text_table(("no better set for the money", True), ("cost", False), ("yield\n[%]", False),
                       ("lowest\nline [%]", False), ("", True))
    for each in offers.front:
        words = textwrap.fill(", ".join(offers.names(each)) or "as it is", LONGEST_SET)
        front.add_row(Text(words), f"{each.cost:g}", _bare(each.yields.together),
                      _bare(basis.lowest(each.yields)[1]), "reaches" if basis.reaches(each.yields) else "")
    print_table(console, front)
    say(console, _cheapest_words(offers), style="bold")
    say(console, f"{offers.sets:,} sets of offers on {offers.coupons:,} coupons: {offers.evaluated:,} judged, the "
                 "others proven no better.")


def _cheapest_words(offers: Offers) -> str:
    if offers.cheapest is None:
        return "No set of offers reaches the target."
    if not offers.cheapest.offers:
        return "The target is reached without any offer."
    return (f"The cheapest set that reaches the target costs {offers.cheapest.cost:g}: "
            f"{', '.join(offers.names(offers.cheapest))}.")


def _say_relaxed(result: TightenResult, console: Console) -> None:
    """What may be given in return: wider without a loss that shows."""
    free = [one.name for one in result.variations if one.loss.low > -1e-3]
    if free:
        say(console, f"May be relaxed with little harm (doubled, it costs less than 0.1 %): {'; '.join(free)}.")


def _center_cells(one: CentredLine, lengths: LengthUnit, *, moved: bool) -> tuple[str, ...]:
    def size(length: float | None) -> str:
        return "-" if length is None else length_text(length, lengths).removesuffix(f" {lengths}")

    gap = "" if one.gap is None else f"\n{size(one.gap)}"
    best = "-" if moved else size(one.best) + ("" if one.gap is None else f"\n{size(one.gap_at_best)}")
    return (size(one.width) + gap, best, size(one.on_target), _bare(one.now), _bare(one.at_best), _signed(one.gain),
            _bare(one.to_impedance))


def _say_center(result: CenterResult, lengths: LengthUnit, console: Console) -> None:
    moved = result.moved
    if moved is not None:
        say(console, f"{moved.name}: best at {length_text(moved.best, lengths)} instead of "
                     f"{length_text(moved.nominal, lengths)}.", style="bold")
    centred = result.centred.together
    say(console, f"All lines together: {share_text(result.now.together)} as drawn, {share_text(centred)} "
                 f"{share_range_text(centred)} centred, both built to print; {share_text(result.to_impedance)} built "
                 "to impedance, where the fabricator brings each lot to the targets and leaves "
                 f"{percent(result.centring_error, 1)} (one deviation) over.")
    ends = [f'"{one.name}"' for one in result.lines if one.at_end]
    if ends or (moved is not None and moved.at_end):
        say(console, f"At the end of what the fit covers ({percent(result.reach, 0)} either way), so that better may "
                     f"lie beyond: {', '.join(ends)}. --reach looks farther.", style="bold")


def _way_words(basis: Basis, way: Way) -> str:
    head = way.name[0].upper() + way.name[1:]
    if way.yields is None:
        return f"{head}: no set of offers reaches the target."
    verdict = "reaches" if way.reaches else "MISSES"
    name, lowest = basis.lowest(way.yields)
    bought = f" ({', '.join(way.offers)})" if way.offers else ""
    cost = "" if way.cost is None or not way.offers else f" for {way.cost:g}{bought}"
    return (f"{head}: {verdict} the target{cost}; all lines {share_text(way.yields.together)}, "
            f'lowest "{shorten(name, 24)}" {share_text(lowest, target=basis.target_yield)}.')


def _compared_cell(one: Compared, name: str) -> str:
    if name and name not in one.line_names:
        return "-"
    value = one.yields.lines[one.line_names.index(name)] if name else one.yields.together
    if one.difference is None:
        return _bare(value)
    difference = one.difference.lines.get(name) if name else one.difference.together
    return f"{_bare(value)}\n{'-' if difference is None else _signed(difference)}"


def _difference_words(number: int, one: Compared) -> str:
    assert one.difference is not None
    total = one.difference.together
    better = [name for name, each in one.difference.lines.items() if each.low > 0.0]
    worse = [name for name, each in one.difference.lines.items() if each.high < 0.0]
    same = len(one.difference.lines) - len(better) - len(worse)
    digits = percent_digits(total)
    head = "no real difference" if total.low <= 0.0 <= total.high else (
        f"{'more' if total.value > 0.0 else 'fewer'} pass, and that is real")
    parts = [f"{word}: {', '.join(chr(34) + shorten(name, 24) + chr(34) for name in names)}"
             for word, names in (("better", better), ("worse", worse)) if names]
    parts += [f"no real difference on {same} line{'s' if same != 1 else ''}"] if same else []
    return (f"{number} against 1, all lines together: {_signed(total)} % [{fixed(100.0 * total.low, digits)}, "
            f"{fixed(100.0 * total.high, digits)}]: {head}. {'; '.join(parts)}.".replace("..", "."))


def _driver_words(drivers: object) -> str:
    ranked = list(drivers) if isinstance(drivers, tuple) else []
    return ", ".join(f"{shorten(variable_words(each.variable), 24)} "
                     f"{percent((each.shapley or each.total).value, 0)}" for each in ranked[:2]) or "none"


def _needed_words(basis: Basis, one: Tightening) -> str:
    if one.needed is None:
        return f"cannot\n{_bare(basis.lowest(one.perfect)[1])}" if basis.aim == "each line" else "cannot"
    return "met" if one.needed >= 1.0 else f"x {fixed(one.needed, 2)}"


def _yields_words(basis: Basis, yields: Judged) -> str:
    name, lowest = basis.lowest(yields)
    return (f"As it is, all lines together: {headline_text(yields.together)} {share_range_text(yields.together)}; "
            f'lowest line "{shorten(name, 30)}": {share_text(lowest, target=basis.target_yield)}.')


def _aim_words(basis: Basis) -> str:
    whose = "all lines together" if basis.aim == "together" else "each line"
    return f"Target: {trimmed(100.0 * basis.target_yield, 3)} % of {whose} ({basis.coupons:,} coupons)."


def _bare(interval: Interval) -> str:
    return share_text(interval).removesuffix(" %")


def _signed(interval: Interval) -> str:
    """A difference of shares in percent, with its sign."""
    text = fixed(100.0 * interval.value, percent_digits(interval))
    return text if text.startswith("-") or float(text) == 0.0 else f"+{text}"
