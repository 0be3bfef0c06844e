"""The commands that carry the talk with a fabricator: ask, take, reconcile."""

from __future__ import annotations

import argparse
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

from tolerance.errors import InputError
from tolerance.screen import add_allow, add_fresh, cache_for, check_folder, console, progress, tell_from_cache

if TYPE_CHECKING:
    from tolerance.exchanged import Taken


def add_talk(commands: Any) -> None:
    """Add the commands to those of `tolerance`."""
    ask = commands.add_parser("ask", help="a workbook for the fabricator: what they hold, in order of what it does")
    _add_common(ask, _ask)
    ask.add_argument("--out", type=Path, metavar="PATH", help="the workbook; default <file stem>-ask.xlsx; an existing "
                                                              "file is left alone")
    ask.add_argument("--hide", choices=("targets",), help="no targets, limits or line names in the workbook")
    take = commands.add_parser("take", help="read the filled workbook back: a new scenario, old and new yield")
    _add_common(take, _take)
    take.add_argument("reply", type=Path, metavar="REPLY", help="the workbook as it came back (XLSX)")
    take.add_argument("--out", type=Path, metavar="PATH", help="the new scenario; default <file stem>-answered.toml "
                                                               "beside the first; an existing file is left alone")


    reconcile = commands.add_parser("reconcile", help="measured coupons against the prediction, and what has moved")
    _add_common(reconcile, _reconcile)
    reconcile.add_argument("measured", type=Path, metavar="MEASURED",
                           help="impedances of coupons (CSV or XLSX): columns line, value, and lot, panel if known")
    reconcile.add_argument("--sections", type=Path, metavar="FILE",
                           help="microsections (CSV or XLSX): columns property, value")
    reconcile.add_argument("--repeatability", metavar="OHM", help='of one reading, such as "0.3 ohm"; instead of the '
                                                                  "scenario's [test]")
    reconcile.add_argument("--sheet", metavar="NAME", help="of XLSX tables that have several sheets")
    reconcile.add_argument("--out", type=Path, metavar="DIR", help="folder of the figure; default out/<file stem>")


def _add_common(parser: argparse.ArgumentParser, command: Callable[[argparse.Namespace], int]) -> None:
    parser.add_argument("file", type=Path, metavar="FILE", help="scenario (TOML)")
    parser.add_argument("--json", action="store_true",
                        help="the result as one JSON object on standard output; no files unless --out is given")
    parser.add_argument("--seed", type=int, metavar="N", help="instead of the scenario's")
    parser.add_argument("--coupons", type=int, metavar="N", help="instead of the scenario's: a power of two")
    parser.add_argument("--quiet", action="store_true", help="print nothing but what is asked for or wrong")
    add_allow(parser)
    add_fresh(parser)
    parser.set_defaults(command=command)


def _ask(options: argparse.Namespace) -> int:
    from tolerance.scenario import load

    scenario = load(options.file, allow=options.allow)
    check_numbers(options, in_lots=scenario.has_levels)
    out = options.out or (None if options.json else Path(f"{options.file.stem}-ask.xlsx"))
    _must_be_new(out, ".xlsx")
    from tolerance.report.request import write_request
    from tolerance.study.exchange import ask

    cache = cache_for(options)
    with progress(quiet=options.quiet, log=options.logbook) as tell:
        request = ask(scenario, coupons=options.coupons, seed=options.seed, on_progress=tell, cache=cache)
    if out is not None:
        write_request(request, out, hide_targets=options.hide == "targets")
    if options.json:
        from tolerance.report.talk_json import request_json

        print(request_json(request))
    elif not options.quiet:
        from tolerance.report.talk_terminal import print_request

        print_request(request, console(), out)
    tell_from_cache(options, request.result.record.from_cache, request.result.record.solver_runs)
    return 0


def _take(options: argparse.Namespace) -> int:
    from tolerance.scenario import load

    scenario = load(options.file, allow=options.allow)
    check_numbers(options, in_lots=scenario.has_levels)
    from tolerance.study.exchange import answered_path, take

    stands = options.out or answered_path(options.file)
    out = None if options.json and options.out is None else stands
    _must_be_new(out, ".toml")
    cache = cache_for(options)
    with progress(quiet=options.quiet, log=options.logbook) as tell:
        taken = take(scenario, options.reply, out=stands, coupons=options.coupons, seed=options.seed, on_progress=tell,
                     cache=cache)
    written = _write_scenario(taken, out)
    if options.json:
        from tolerance.report.talk_json import taken_json

        print(taken_json(taken))
    elif not options.quiet:
        from tolerance.report.talk_terminal import print_taken

        print_taken(taken, console(), written)
    records = [run.record for run in (taken.before, taken.after) if run is not None]
    tell_from_cache(options, sum(record.from_cache for record in records),
                    sum(record.solver_runs for record in records))
    return 0


def _reconcile(options: argparse.Namespace) -> int:
    from tolerance.scenario import load

    check_folder(options.out)
    scenario = load(options.file, allow=options.allow)
    check_numbers(options, in_lots=scenario.has_levels)
    repeatability = _resistance(options.repeatability)
    from tolerance.study.reconcile import reconcile

    cache = cache_for(options)
    with progress(quiet=options.quiet, log=options.logbook) as tell:
        result = reconcile(scenario, options.measured, sections=options.sections, repeatability=repeatability,
                           sheet=options.sheet, coupons=options.coupons, seed=options.seed, on_progress=tell,
                           cache=cache)
    folder = options.out or (None if options.json else Path("out") / options.file.stem)
    written = None
    if folder is not None:
        from tolerance.report.reconcile_plot import write_reconcile_figure

        written = write_reconcile_figure(result, folder / "predicted-and-measured.png", scenario.report.lengths)
    if options.json:
        from tolerance.report.reconcile_words import reconciled_json

        print(reconciled_json(result))
    elif not options.quiet:
        from tolerance.report.reconcile_terminal import print_reconciled

        print_reconciled(result, scenario.report.lengths, console(), written)
    tell_from_cache(options, result.from_cache, result.solver_runs)
    return 0


def _resistance(given: str | None) -> float | None:
    """A resistance from 0 up [ohm]. Raises InputError."""
    if given is None:
        return None
    from tolerance.units import QuantityError, read_quantity

    try:
        value = read_quantity(given, "resistance")
    except QuantityError as reason:
        raise InputError(f"--repeatability {given}: {reason}") from None
    if value < 0.0:
        raise InputError(f"--repeatability {given}: must be 0 ohm or more")
    return value


def _write_scenario(taken: Taken, out: Path | None) -> Path | None:
    """Write the new scenario, where there is one and a place for it."""
    if out is None or not taken.text:
        return None
    from tolerance.report.files import put_in_place

    return put_in_place(out, lambda beside: beside.write_text(taken.text, encoding="utf-8"))


def _must_be_new(path: Path | None, ending: str) -> None:
    """Refuse to write over anything. Raises InputError."""
    if path is None:
        return
    if path.suffix.lower() != ending:
        raise InputError(f"--out {path}: must end in {ending}")
    if path.exists():
        raise InputError(f"{path}: is there already and is left alone; name another file with --out")


def check_numbers(options: argparse.Namespace, *, in_lots: bool = False) -> None:
    """The same ranges as in a scenario; whole lots need no power of two of coupons. Raises InputError."""
    from tolerance.scenario.tables import LARGEST_COUPONS, SMALLEST_COUPONS

    coupons, seed = options.coupons, options.seed
    if in_lots and coupons is not None:
        if not 1 <= coupons <= LARGEST_COUPONS:
            raise InputError(f"--coupons {coupons}: must be from 1 to {LARGEST_COUPONS}")
    elif coupons is not None and not (SMALLEST_COUPONS <= coupons <= LARGEST_COUPONS and coupons & (coupons - 1) == 0):
        raise InputError(f"--coupons {coupons}: must be a power of two from {SMALLEST_COUPONS} to {LARGEST_COUPONS}")
    if seed is not None and seed < 0:
        raise InputError(f"--seed {seed}: must be 0 or more")
