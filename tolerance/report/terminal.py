"""The answer on the terminal: tables that fit 80 columns.

Colour only strengthens what a word already says, and is left to rich: none where the output is no terminal or
NO_COLOR is set.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from rich.table import Table as RichTable
from rich.text import Text

from tolerance.report.lots_tables import sentences, text_tables
from tolerance.report.measured import intervals_of, measured_sentences
from tolerance.report.printed import filled_table, name_width, print_table, say, text_table
from tolerance.report.tables import MISSES, line_words, ranking, ranking_name
from tolerance.report.weights import lever_words, ppm_words
from tolerance.report.wording import (
    CAUTION,
    METRES_IN,
    LengthUnit,
    fixed,
    headline_text,
    length_text,
    percent,
    place_words,
    share_range_text,
    shorten,
    trimmed,
    two_rows,
    variable_words,
)

if TYPE_CHECKING:
    from rich.console import Console

    from tolerance.nominal import CheckResult, NominalLine
    from tolerance.results import LineResult, RunResult

DRIVERS_SHOWN = 3
LEVERS_SHOWN = 2
LONGEST_DRIVER = 38
NAMES_IN_VERDICT = 4


def print_check(result: CheckResult, lengths: LengthUnit, console: Console, *, shares: bool = False) -> None:
    """Nominal impedance, effective Dk and delay of each line, and its losses; `shares`: charge and current by face."""
    per_length = "mm" if lengths == "um" else "inch"
    table = text_table(("line", True), ("kind, layer,\ndimensions", True), ("target\n\n[ohm]", False),
                       ("nominal\n\n[ohm]", False), ("off\ntarget\n[%]", False), ("eff.\nDk", False),
                       (f"delay\n\n[ps/{per_length}]", False))
    for line in result.lines:
        table.add_row(Text(two_rows(line.name, name_width(console))), *_check_cells(line, lengths))
    say(console, result.title, style="bold")
    print_table(console, table)
    _say_modes(result, console)
    _say_losses(result, lengths, console)
    _say_rises(result, console)
    if shares:
        print_table(console, _share_table(result, name_width(console)))
        say(console, "Shares of a trace's charge and, at small skin depth, of its current by face; fringe: share of "
                     "the capacitance beyond that of parallel plates. Coupling: inductive, capacitive, and the "
                     "backward crosstalk coefficient.")
    if any(line.formulas is not None for line in result.lines):
        print_table(console, _formula_table(result, name_width(console)))
        say(console, "Published formulas beside the field solver, for comparison only: no result uses them. Claimed: "
                     "by their authors.")


def print_run(result: RunResult, console: Console) -> None:
    """Yield of every line and of the board, what drives it, and how far the numbers can be trusted."""
    say(console, result.title, style="bold")
    print_table(console, _yield_table(result, name_width(console)))
    print_table(console, _driver_table(result, name_width(console), console.width))
    for columns, rows in text_tables(result, name_width(console)):
        print_table(console, filled_table(columns, rows))
    say(console, f"All lines together: {headline_text(result.inside)} {share_range_text(result.inside)} of "
                 f"{result.coupons:,} coupons pass (seed {result.seed}).", style="bold")
    _say_verdict(result, console)
    _say_impossible(result, console)
    _say_certificate(result, console)
    _say_rare(result, console)
    _say_direct(result, console)
    for sentence in sentences(result):
        say(console, sentence)
    for sentence in measured_sentences(result):
        say(console, sentence)
    if result.frequency is not None:
        say(console, f"Impedances are those of the lossy lines at {result.frequency / 1e9:.6g} GHz, in magnitude.")
    _say_rises(result, console)
    say(console, f"In brackets: 95 % intervals of {intervals_of(result)}. {CAUTION}")


def _yield_table(result: RunResult, name_width: int) -> RichTable:
    table = text_table(("line", True), ("target\nlimits\n[ohm]", False), ("nominal\nmean\n[ohm]", False),
                       ("dev.\n\n[ohm]", False), ("yield\ninterval\n[%]", False), ("below\nabove\n[%]", False),
                       ("Cpk", False))
    for line in result.lines:
        words = line_words(line, result.target_yield)
        missed = words.verdict == MISSES
        mark = "bold red" if missed else ""
        below, above = words.below.removesuffix(" %"), words.above.removesuffix(" %")
        table.add_row(
            Text(two_rows(line.name, name_width)), f"{words.target}\n{words.limits}",
            f"{words.nominal}\n{words.mean}", f"\n{words.deviation}",
            Text(f"{words.inside.removesuffix(' %')}\n{words.inside_range}", style=mark), f"{below}\n{above}",
            Text(f"{words.cpk}\n{words.verdict if missed else ''}", style=mark),
        )
    return table


def _driver_table(result: RunResult, name_width: int, width: int) -> RichTable:
    heading = f"largest drivers, by {ranking_name(result.lines)}"
    if any(lever_words(line, 1) for line in result.lines):
        heading += "\n/ points of yield gained, spread halved"
    table = text_table(("line", True), (heading, True),
                       ("solver\nruns", False), ("held-out\nerror\n[ohm]", False))
    for line in result.lines:
        table.add_row(Text(two_rows(line.name, name_width)), Text(_drivers(line, width - name_width - 21)),
                      str(line.prediction.solver_runs), fixed(line.prediction.held_out_error, 4))
    return table


def _drivers(line: LineResult, width: int) -> str:
    """The largest drivers, broken only between two of them."""
    rows = [""]
    for driver in line.drivers[:DRIVERS_SHOWN]:
        words = f"{shorten(variable_words(driver.variable), LONGEST_DRIVER)} {percent(ranking(driver).value, 0)}"
        _append(rows, words, width)
    if not line.drivers:
        return "none: nothing that varies reaches it"
    gains = [""]
    for words in lever_words(line, LEVERS_SHOWN):
        _append(gains, words, width - 2)
    return "\n".join([*rows, *(f"/ {row}" for row in gains if row)])


def _append(rows: list[str], words: str, width: int) -> None:
    """Put words behind the last row, or, where there is no room, into a new one."""
    joined = f"{rows[-1]}, {words}" if rows[-1] else words
    if len(joined) <= width:
        rows[-1] = joined
    else:
        rows.append(words)


def _say_verdict(result: RunResult, console: Console) -> None:
    target = f"{trimmed(100.0 * result.target_yield, 3)} %"
    missing = [line.name for line in result.lines if line.inside.value < result.target_yield]
    if not missing:
        say(console, f"Every line meets the target yield of {target}.")
        return
    named = ", ".join(f'"{shorten(name, LONGEST_DRIVER)}"' for name in missing[:NAMES_IN_VERDICT])
    more = f" and {len(missing) - NAMES_IN_VERDICT} more" if len(missing) > NAMES_IN_VERDICT else ""
    say(console, f"{MISSES} the target yield of {target}: {named}{more}.", style="bold red")


def _say_impossible(result: RunResult, console: Console) -> None:
    if result.impossible == 0:
        return
    lines = ", ".join(f'"{shorten(line.name, LONGEST_DRIVER)}" {line.impossible:,}'
                      for line in result.lines if line.impossible)
    say(console, f"Impossible coupons (a width, gap, crest or length that is gone), counted as failing: "
                 f"{result.impossible:,} of {result.coupons:,}{f'; {lines}' if lines else ''}.", style="bold")


def _say_certificate(result: RunResult, console: Console) -> None:
    certain = [line.certificate for line in result.lines if line.certificate.certified]
    if certain:
        lines = "every line" if len(certain) == len(result.lines) else f"{len(certain)} lines"
        say(console, f"Verdicts of {lines} are the field solver's: {sum(one.solved for one in certain):,} coupons "
                     f"within {trimmed(certain[0].multiple, 1)} errors of a limit were solved themselves.")
    for line in result.lines:
        one = line.certificate
        if not one.certified:
            say(console, f'Verdicts of "{shorten(line.name, LONGEST_DRIVER)}" are predicted: {one.needed:,} coupons '
                         f"lie within {trimmed(one.multiple, 1)} errors ({fixed(one.error, 4)} ohm each) of a limit, "
                         f"more than the {one.cap:,} that are solved at most; the interval allows for it.")


def _say_rare(result: RunResult, console: Console) -> None:
    """Failures too rare to be counted."""
    rare = [f'"{shorten(line.name, LONGEST_DRIVER)}" {ppm_words(line.tail)}' for line in result.lines if line.tail]
    if rare:
        say(console, f"Coupons that fail too rarely to be counted, so integrated: {'; '.join(rare)}.")


def _say_direct(result: RunResult, console: Console) -> None:
    """The solver's own answers beside the predictions: one row a line."""
    table = text_table(("line", True), ("coupons\nsolved", False), ("off, rms\n[ohm]", False),
                       ("off, most\n[ohm]", False), ("verdicts\nthat differ", False))
    for line in result.lines:
        if line.direct is not None:
            table.add_row(Text(two_rows(line.name, name_width(console))), f"{line.direct.coupons:,}",
                          fixed(line.direct.root_mean_square, 4), fixed(line.direct.largest, 4),
                          str(line.direct.verdicts_that_differ))
    if table.row_count:
        say(console, "")
        say(console, "Coupons that the field solver solved itself, and how far the predictions lie off:")
        print_table(console, table)


def _say_losses(result: CheckResult, lengths: LengthUnit, console: Console) -> None:
    """A table of what the line loses, in the unit of the report, where the scenario has a frequency."""
    lossy = [(line, line.losses) for line in result.lines if line.losses is not None]
    if not lossy:
        return
    per_length, unit = (1.0, "m") if lengths == "um" else (1000.0 * METRES_IN["mil"], "inch")
    table = text_table(("line", True), ("complex\nimpedance\n[ohm]", False), (f"R\n\n[ohm/{unit}]", False),
                       (f"L\n\n[nH/{unit}]", False), (f"G\n\n[mS/{unit}]", False), (f"C\n\n[pF/{unit}]", False),
                       ("loss\n\n[dB/m]", False), ("whole\n\n[dB/inch]", False))
    for line, losses in lossy:
        impedance = losses.complex_impedance
        table.add_row(
            Text(two_rows(line.name, name_width(console))),
            f"{fixed(impedance.real, 2)}\n{'-' if impedance.imag < 0.0 else '+'} j {fixed(abs(impedance.imag), 2)}",
            *(f"{scale * value * per_length:.4g}" for value, scale in (
                (losses.resistance, 1.0), (losses.inductance, 1e9), (losses.conductance, 1e3),
                (losses.capacitance, 1e12))),
            f"{fixed(losses.conductor_loss, 2)}\n+ {fixed(losses.dielectric_loss, 2)}",
            fixed((losses.conductor_loss + losses.dielectric_loss) * 1000.0 * METRES_IN["mil"], 3))
    print_table(console, table)
    say(console, f"At {lossy[0][1].frequency / 1e9:.6g} GHz: the impedance above is the magnitude of the complex one. "
                 "Loss: by the copper, + by the dielectric.")


def _say_rises(result: CheckResult | RunResult, console: Console) -> None:
    for line in result.lines:
        if line.rise is not None:
            say(console, f'A reading of "{shorten(line.name, LONGEST_DRIVER)}" {1e3 * line.rise.position:.6g} mm '
                         f"from the launch is higher by {fixed(line.rise.rise, 2)} ohm of series resistance "
                         f"({line.rise.resistance:.3g} ohm/m to direct current).")


def _share_table(result: CheckResult, name_width: int) -> RichTable:
    table = text_table(("line", True), ("face", True), ("charge\n[%]", False), ("current\n[%]", False),
                       ("fringe\n[%]", False), ("coupling", True))
    for line in result.lines:
        if line.shares is None:
            continue
        faces, coupling = line.shares.faces, line.coupling
        words = "" if coupling is None else (
            f"inductive {coupling.inductive:.4f}\ncapacitive {coupling.capacitive:.4f}\n"
            f"backward {coupling.backward:.4f}")
        table.add_row(
            Text(two_rows(line.name, name_width)), Text("\n".join(face for face, _, _ in faces)),
            *("\n".join(fixed(100.0 * share, 1) for share in shares)
              for shares in ([charge for _, charge, _ in faces], [current for _, _, current in faces])),
            "-" if line.shares.fringe is None else fixed(100.0 * line.shares.fringe, 1), Text(words))
    return table


def _formula_table(result: CheckResult, name_width: int) -> RichTable:
    table = text_table(("line", True), ("formula, remark", True), ("it says\n[ohm]", False), ("off solver\n[%]", False),
                       ("claimed\n[%]", False))
    for line in result.lines:
        name = two_rows(line.name, name_width)
        if line.formulas is None or not line.formulas.opinions:
            why = "" if line.formulas is None else f": {line.formulas.why_none}"
            table.add_row(Text(name), Text(f"none for such a line{why}"), "", "", "")
            continue
        for opinion in line.formulas.opinions:
            words = f"{opinion.formula}\n{opinion.remark}".rstrip()
            claimed = "unknown" if opinion.claimed is None else trimmed(100.0 * opinion.claimed, 2)
            said = opinion.impedance
            table.add_row(Text(name), Text(words), "" if said is None else fixed(said, 2),
                          "" if said is None else fixed(100.0 * (said / line.impedance - 1.0), 2),
                          "" if said is None else claimed)
            name = ""
    return table


def _say_modes(result: CheckResult, console: Console) -> None:
    """What impedance, effective Dk and delay of a pair are."""
    pairs = {line.mode for line in result.lines if line.common_mode is not None}
    if pairs - {"common"}:
        say(console, "Pairs: differential impedance, with the odd mode's effective Dk and delay; common: the "
                     "impedance of both traces tied together.")
    if "common" in pairs:
        say(console, "Pairs in common mode: impedance, effective Dk and delay of both traces tied together.")


def _check_cells(line: NominalLine, lengths: LengthUnit) -> tuple[Text, str, str, str, str, str]:
    per_length = 1e-3 if lengths == "um" else 1000.0 * METRES_IN["mil"]
    details = [line.kind, place_words(line.layer if line.partner is None else f"{line.layer} and {line.partner}",
                                      line.references, joint=", "),
               *(f"{name} {length_text(size, lengths)}" for name, size in line.dimensions)]
    if line.common_mode is not None and line.mode != "common":
        details.append(f"common {fixed(line.common_mode, 2)} ohm")
    return (Text("\n".join(details)), trimmed(line.target, 2), fixed(line.impedance, 2),
            fixed(100.0 * (line.impedance / line.target - 1.0), 1), fixed(line.effective_dk, 3),
            fixed(line.delay * per_length * 1e12, 2 if lengths == "um" else 1))
