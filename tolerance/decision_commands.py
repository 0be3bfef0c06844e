"""The commands that decide: tighten, center, promise, compare, note."""

from __future__ import annotations

import argparse
import math
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from tolerance.errors import InputError
from tolerance.screen import add_allow, add_fresh, cache_for, check_folder, console, progress, tell_from_cache

if TYPE_CHECKING:
    from tolerance.report.decisions_files import Decision
    from tolerance.scenario import Scenario

FARTHEST_REACH = 0.5
NumberCheck = Callable[..., None]


def add_decisions(commands: Any, check_numbers: NumberCheck) -> None:
    """Add the commands to those of `tolerance`. check_numbers : refuses a seed or a sample size out of range."""
    tighten = commands.add_parser("tighten", help="what each tolerance is worth, and which offers to take")
    _add_common(tighten, _tighten, check_numbers)
    _add_together(tighten)
    center = commands.add_parser("center", help="the drawn widths that give the highest yield")
    _add_common(center, _center, check_numbers)
    _add_together(center)
    center.add_argument("--grid", metavar="LENGTH", help='round the best widths to a grid, such as "1 um"')
    center.add_argument("--move", metavar="LAYER.thickness", help="move this thickness instead of the widths")
    center.add_argument("--reach", metavar="SHARE", help='how far to look, both ways; "15 %%" if left out')
    center.add_argument("--centring-error", metavar="SHARE",
                        help='what a fabricator who builds to impedance leaves of a lot\'s offset, one deviation, '
                             'of the target; "1 %%" if left out')
    center.add_argument("--gaps", metavar="LENGTHS", help='for pairs: the width for each of these gaps, '
                                                          '"110 um, 130 um"; solves the pairs anew')
    promise = commands.add_parser("promise", help="the tightest limits that meet the target yield")
    _add_common(promise, _promise, check_numbers)
    compare = commands.add_parser("compare", help="scenarios side by side on the same draws")
    compare.add_argument("files", type=Path, nargs="+", metavar="FILE", help="two scenarios or more (TOML)")
    _add_options(compare, _compare, check_numbers)
    _add_together(compare)
    note = commands.add_parser("note", help="impedance table and note text for the fabrication drawing")
    note.add_argument("file", type=Path, metavar="FILE", help="scenario (TOML)")
    note.add_argument("--json", action="store_true", help="the note as one JSON object on standard output")
    note.add_argument("--out", type=Path, metavar="DIR", help="write note.txt there")
    note.add_argument("--width-change", metavar="SHARE",
                      help='what the fabricator may alter of a width; "10 %%" if left out')
    note.add_argument("--thickness-change", metavar="SHARE",
                      help='what the fabricator may alter of a dielectric thickness; "10 %%" if left out')
    add_allow(note)
    note.set_defaults(command=_note)


def _add_common(
    parser: argparse.ArgumentParser, command: Callable[[argparse.Namespace], int], check_numbers: NumberCheck,
) -> None:
    parser.add_argument("file", type=Path, metavar="FILE", help="scenario (TOML)")
    _add_options(parser, command, check_numbers)


def _add_options(
    parser: argparse.ArgumentParser, command: Callable[[argparse.Namespace], int], check_numbers: NumberCheck,
) -> None:
    parser.add_argument("--out", type=Path, metavar="DIR", help="write a workbook and a figure there")
    parser.add_argument("--json", action="store_true", help="the result as one JSON object on standard output")
    parser.add_argument("--seed", type=int, metavar="N", help="instead of the scenario's")
    parser.add_argument("--coupons", type=int, metavar="N", help="instead of the scenario's")
    parser.add_argument("--quiet", action="store_true", help="print nothing but what is asked for or wrong")
    add_allow(parser)
    add_fresh(parser)
    parser.set_defaults(command=command, direct=0, check_numbers=check_numbers)


def _add_together(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--together", action="store_true",
                        help="the target yield is that of all lines together, not of each line")


def _tighten(options: argparse.Namespace) -> int:
    from tolerance.report.decisions_json import tighten_json
    from tolerance.report.decisions_terminal import print_tighten
    from tolerance.study.decide import tighten

    scenario = _load(options, options.file)
    cache = cache_for(options)
    with progress(quiet=options.quiet, log=options.logbook) as tell:
        result = tighten(scenario, coupons=options.coupons, seed=options.seed, together=options.together,
                         on_progress=tell, cache=cache)
    _tell(options, result, scenario, tighten_json(result), lambda: print_tighten(result, console()))
    tell_from_cache(options, result.basis.from_cache, result.basis.solver_runs)
    return 0


def _center(options: argparse.Namespace) -> int:
    from tolerance.report.decisions_json import center_json
    from tolerance.report.decisions_terminal import print_center
    from tolerance.study.center import CENTRING_ERROR, REACH, Wishes, center

    scenario = _load(options, options.file)
    gaps = () if options.gaps is None else tuple(_length("--gaps", each) for each in options.gaps.split(","))
    wishes = Wishes(
        grid=None if options.grid is None else _length("--grid", options.grid), move=options.move,
        reach=_share("--reach", options.reach, REACH, highest=FARTHEST_REACH),
        centring_error=_share("--centring-error", options.centring_error, CENTRING_ERROR), gaps=gaps,
        together=options.together,
    )
    cache = cache_for(options)
    with progress(quiet=options.quiet, log=options.logbook) as tell:
        result = center(scenario, wishes, coupons=options.coupons, seed=options.seed, on_progress=tell, cache=cache)
    lengths = scenario.report.lengths
    _tell(options, result, scenario, center_json(result), lambda: print_center(result, lengths, console()))
    tell_from_cache(options, result.basis.from_cache, result.basis.solver_runs)
    return 0


def _promise(options: argparse.Namespace) -> int:
    from tolerance.report.decisions_json import promise_json
    from tolerance.report.decisions_terminal import print_promise
    from tolerance.study.decide import promise

    scenario = _load(options, options.file)
    cache = cache_for(options)
    with progress(quiet=options.quiet, log=options.logbook) as tell:
        result = promise(scenario, coupons=options.coupons, seed=options.seed, on_progress=tell, cache=cache)
    _tell(options, result, scenario, promise_json(result), lambda: print_promise(result, console()))
    tell_from_cache(options, result.basis.from_cache, result.basis.solver_runs)
    return 0


def _compare(options: argparse.Namespace) -> int:
    from tolerance.report.decisions_json import compare_json
    from tolerance.report.decisions_terminal import print_compare
    from tolerance.study.decide import compare

    scenarios = [_load(options, file) for file in options.files]
    cache = cache_for(options)
    with progress(quiet=options.quiet, log=options.logbook) as tell:
        result = compare(scenarios, coupons=options.coupons, seed=options.seed, together=options.together,
                         on_progress=tell, cache=cache)
    _tell(options, result, scenarios[0], compare_json(result), lambda: print_compare(result, console()))
    tell_from_cache(options, result.from_cache, result.solver_runs)
    return 0


def _note(options: argparse.Namespace) -> int:
    from tolerance.report.decisions_json import note_json
    from tolerance.report.files import put_in_place
    from tolerance.report.note_text import note_text
    from tolerance.scenario import load
    from tolerance.study.note import THICKNESS_CHANGE, WIDTH_CHANGE, Allowance, note

    check_folder(options.out)
    scenario = load(options.file, allow=options.allow)
    result = note(scenario, Allowance(
        width=_share("--width-change", options.width_change, WIDTH_CHANGE),
        thickness=_share("--thickness-change", options.thickness_change, THICKNESS_CHANGE)))
    text = note_text(result, scenario.report.lengths)
    if options.out is not None:
        put_in_place(options.out / "note.txt", lambda beside: beside.write_text(text, encoding="utf-8"))
    print(note_json(result) if options.json else text, end="\n" if options.json else "")
    return 0


def _tell(
    options: argparse.Namespace, result: Decision, scenario: Scenario, json_text: str, show: Callable[[], None],
) -> None:
    """Write files where --out asks for them, then print the result."""
    written: Sequence[Path] = ()
    if options.out is not None:
        from tolerance.report.decisions_files import write_decision

        written = write_decision(result, options.out, scenario.report.lengths)
    if options.json:
        print(json_text)
    elif not options.quiet:
        show()
        if written:
            console().print(f"Written to {options.out}: {', '.join(path.name for path in written)}")


def _load(options: argparse.Namespace, file: Path) -> Scenario:
    from tolerance.scenario import load

    check_folder(options.out)
    scenario = load(file, allow=options.allow)
    options.check_numbers(options, in_lots=scenario.has_levels)
    return scenario


def _length(option: str, text: str) -> float:
    from tolerance.units import QuantityError, read_quantity

    try:
        value = read_quantity(text, "length")
    except QuantityError as reason:
        raise InputError(f'{option} "{text}": {reason}') from None
    if not 0.0 < value <= 5e-3:
        raise InputError(f'{option} "{text}": must be a length above 0 um and up to 5000 um')
    return value


def _share(option: str, text: str | None, default: float, *, highest: float = 0.5) -> float:
    from tolerance.units import QuantityError, read_quantity

    if text is None:
        return default
    try:
        value = read_quantity(text, "share")
    except QuantityError as reason:
        raise InputError(f'{option} "{text}": {reason}') from None
    if not (math.isfinite(value) and 0.0 <= value <= highest) or (value == 0.0 and option == "--reach"):
        raise InputError(f'{option} "{text}": must be a percentage from 0 to {100.0 * highest:g} %')
    return value
