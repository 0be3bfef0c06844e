"""The command line: the only place that prints and exits.

Each command imports what it needs when it runs, so that `--help` and `check` start at once.
"""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Callable, Sequence
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, NoReturn

from tolerance.decision_commands import add_decisions
from tolerance.errors import InputError, ToleranceError, on_one_line
from tolerance.logbook import Logbook
from tolerance.many_commands import add_many
from tolerance.page_command import add_page, write_the_page
from tolerance.screen import (
    Parser,
    add_allow,
    add_fresh,
    cache_for,
    check_folder,
    console,
    progress,
    survive_narrow_encodings,
    tell_from_cache,
    tell_problem,
)
from tolerance.talk_commands import add_talk, check_numbers

if TYPE_CHECKING:
    from tolerance.report.figures import FigureFormat
    from tolerance.results import RunResult
    from tolerance.scenario import Scenario
    from tolerance.scenario.entered import EnteredFile

MISSED_TARGET = 1
UNFINISHED = 3
INTERRUPTED = 130
LOGGED = ("run", "page", "sweep", "again", "tighten", "center", "promise", "compare", "ask", "take", "reconcile")


def main(arguments: Sequence[str] | None = None) -> NoReturn:
    """Run one command and exit with its status."""
    survive_narrow_encodings()
    options = _parser().parse_args(arguments)
    log = None
    try:
        log = options.logbook = Logbook(getattr(options, "log", None), tell_problem)
        log.write("began", command=sys.argv[1:] if arguments is None else list(arguments), cores=os.cpu_count())
        status = options.command(options)
        sys.stdout.flush()
    except ToleranceError as problem:
        tell_problem(problem)
        if log is not None:
            log.write("failed", message=str(problem))
        status = problem.exit_status
    except BrokenPipeError:  # whoever read our output has stopped reading
        _let_go_of_output()
        status = 0
    except OSError as problem:
        tell_problem(f"could not be finished: {problem}")
        _let_go_of_output()
        status = UNFINISHED
    except KeyboardInterrupt:
        tell_problem("interrupted")
        status = INTERRUPTED
    if log is not None:
        log.write("ended", status=status)
        log.close()
    sys.exit(status)


def _let_go_of_output() -> None:
    """Where standard output takes nothing more, have what is left go nowhere, or the end would fail once more."""
    try:
        sys.stdout.flush()
    except OSError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _parser() -> argparse.ArgumentParser:
    parser = Parser(
        prog="tolerance",
        description="Will the coupons pass? Fabrication tolerances of controlled-impedance lines, through a field "
                    "solver, to yield and what drives it.",
    )
    commands = parser.add_subparsers(title="commands", required=True, metavar="COMMAND")
    _add_run(commands.add_parser("run", help="the main job: yield and drivers of every line, workbook and figures"))
    check = commands.add_parser("check", help="validate a scenario and solve each line at its nominals")
    check.add_argument("file", type=Path, metavar="FILE", help="scenario (TOML)")
    check.add_argument("--json", action="store_true", help="the result as one JSON object on standard output")
    check.add_argument("--formulas", action="store_true",
                       help="set published formulas beside the field solver, as a second opinion")
    check.add_argument("--shares", action="store_true",
                       help="show charge and current by face, fringe capacitance, and the coupling of pairs")
    check.add_argument("--picture", action="store_true",
                       help="draw the field and the current of each line to scale, one file a line")
    check.add_argument("--out", type=Path, metavar="DIR", help="folder for the pictures; default out/<file stem>")
    check.add_argument("--figures", choices=("png", "svg", "pdf"), default="png", help="format of the pictures")
    check.add_argument("--quiet", action="store_true", help="print nothing but what is asked for or wrong")
    add_allow(check)
    check.set_defaults(command=_check)
    add_decisions(commands, _check_numbers)
    _add_fit(commands.add_parser("fit", help="what a table of readings says, and a variation to paste"))
    add_page(commands, _check_numbers)
    add_talk(commands)
    add_many(commands)
    new = commands.add_parser("new", help="write a commented starter scenario that runs as it is")
    new.add_argument("file", type=Path, metavar="FILE", help="where to write it; an existing file is left alone")
    new.add_argument("--quiet", action="store_true", help="do not say what was written")
    new.set_defaults(command=_new)
    presets = commands.add_parser("presets", help="list the presets of tolerances, each value with its status")
    presets.add_argument("name", nargs="?", metavar="NAME", help="one of them only")
    presets.add_argument("--json", action="store_true", help="the same as one JSON object on standard output")
    presets.set_defaults(command=_presets)
    schema = commands.add_parser("schema", help="print the JSON Schema of scenario files, for editors")
    schema.set_defaults(command=_schema)
    for name in LOGGED:
        commands.choices[name].add_argument("--log", type=Path, metavar="FILE",
                                            help="add what is done and how long it takes, a JSON object a line")
    return parser


def _add_run(run: argparse.ArgumentParser) -> None:
    run.add_argument("file", type=Path, metavar="FILE", help="scenario (TOML)")
    run.add_argument("--out", type=Path, metavar="DIR", help="folder for workbook and figures; default out/<file stem>")
    run.add_argument("--json", action="store_true",
                     help="the result as one JSON object on standard output; no files unless --out is given")
    run.add_argument("--figures", choices=("png", "svg", "pdf"), default="png", help="format of the figures")
    run.add_argument("--page", action="store_true", help="also write page.html, which can be moved: see `page`")
    run.add_argument("--seed", type=int, metavar="N", help="instead of the scenario's")
    run.add_argument("--coupons", type=int, metavar="N", help="instead of the scenario's: a power of two")
    run.add_argument("--direct", type=int, default=0, metavar="N",
                     help="also solve N coupons of the sample themselves and report the difference")
    run.add_argument("--strict", action="store_true", help="exit with status 1 if a line misses its target yield")
    add_fresh(run)
    run.add_argument("--quiet", action="store_true", help="print nothing but what is asked for or wrong")
    add_allow(run)
    run.set_defaults(command=_run)


def _add_fit(fit: argparse.ArgumentParser) -> None:
    fit.add_argument("file", type=Path, metavar="FILE", help="table of readings (CSV or XLSX)")
    fit.add_argument("--column", metavar="NAME", help="heading of the column; every column of readings if left out")
    fit.add_argument("--sheet", metavar="NAME", help="sheet of an XLSX that has several")
    fit.add_argument("--lower", metavar="LIMIT", help="lower limit of the readings, for Cp and Cpk")
    fit.add_argument("--upper", metavar="LIMIT", help="upper limit of the readings")
    fit.add_argument("--json", action="store_true", help="the result as one JSON object on standard output")
    fit.set_defaults(command=_fit)


def _fit(options: argparse.Namespace) -> int:
    from tolerance.study.fit import fit

    result = fit(options.file, column=options.column, sheet=options.sheet, lower=options.lower, upper=options.upper)
    if options.json:
        from tolerance.report.fit_text import fit_json

        print(fit_json(result))
    else:
        from tolerance.report.fit_text import print_fit

        print_fit(result, console())
    return 0


def _check(options: argparse.Namespace) -> int:
    from tolerance.report.json_text import check_json
    from tolerance.scenario import load
    from tolerance.study.check import check

    if options.out is not None and not options.picture:
        raise InputError(f"--out {options.out}: only with --picture")
    check_folder(options.out)
    scenario = load(options.file, allow=options.allow)
    result = check(scenario, formulas=options.formulas)
    folder = options.out or Path("out") / options.file.stem
    written = _write_pictures(scenario, folder, options) if options.picture else []
    if options.json:
        print(check_json(result))
    elif not options.quiet:
        from tolerance.report.terminal import print_check

        screen = console()
        print_check(result, scenario.report.lengths, screen, shares=options.shares)
        if written:
            screen.print(f"Written to {folder}: {len(written)} pictures, first {written[0].name}")
    return 0


def _write_pictures(scenario: Scenario, folder: Path, options: argparse.Namespace) -> list[Path]:
    from tolerance.report.field_plot import write_pictures
    from tolerance.report.files import remove_earlier
    from tolerance.study.picture import pictures

    with progress(quiet=options.quiet, log=options.logbook) as tell:
        found = pictures(scenario, on_progress=tell)
        written = write_pictures(found, folder, scenario.report.lengths, figure_format=options.figures,
                                 on_progress=tell)
        remove_earlier(folder, written, job="check")
    return written


def _run(options: argparse.Namespace) -> int:
    from tolerance.scenario import load
    from tolerance.scenario.entered import entered_files

    check_folder(options.out)
    scenario = load(options.file, allow=options.allow)
    _check_numbers(options, in_lots=scenario.has_levels)
    if options.page and options.json and options.out is None:
        raise InputError("--page: with --json only where --out says where it goes")
    entered = entered_files(options.file, allow=options.allow)
    from tolerance.study.run import run

    cache = cache_for(options)
    with progress(quiet=options.quiet, log=options.logbook) as tell:
        result = run(scenario, coupons=options.coupons, seed=options.seed, direct=options.direct, on_progress=tell,
                     cache=cache)
        options.logbook.run(result)
        folder = options.out or (None if options.json else Path("out") / options.file.stem)
        record = partial(_write_record, result, scenario, entered, direct=options.direct)
        more = [record]
        if options.page:
            more.append(partial(write_the_page, scenario, result, tell=tell, cache=cache))
        written = [] if folder is None else _write_files(result, scenario, folder, options.figures, tell, more)
    if options.json:
        from tolerance.report.json_text import run_json

        print(run_json(result))
    elif not options.quiet:
        from tolerance.report.terminal import print_run

        screen = console()
        print_run(result, screen)
        if written:
            screen.print(f"Written to {folder}: {len(written)} files, first {written[0].name}")
    tell_from_cache(options, result.record.from_cache, result.record.solver_runs)
    return MISSED_TARGET if options.strict and result.misses_target else 0


def _check_numbers(options: argparse.Namespace, *, in_lots: bool) -> None:
    """The same ranges as in a scenario. Raises InputError."""
    check_numbers(options, in_lots=in_lots)
    if options.direct < 0:
        raise InputError(f"--direct {options.direct}: must be 0 or more")


def _write_files(
    result: RunResult, scenario: Scenario, folder: Path, figure_format: FigureFormat,
    tell: Callable[[str, int, int], None], more: Sequence[Callable[[Path], Path]],
) -> list[Path]:
    from tolerance.cores import on_all_cores
    from tolerance.report.figures import page_jobs, run_pages
    from tolerance.report.files import remove_earlier, remove_left_over
    from tolerance.report.workbook import write_workbook
    from tolerance.study.note import note

    workbook: Callable[[], Path] = partial(
        write_workbook, result, scenario, folder / "tolerance.xlsx", note(scenario))
    figures = page_jobs(run_pages(result, scenario.report.lengths), folder, figure_format=figure_format)
    try:
        written = on_all_cores(lambda job: job(), [workbook, *figures], "writing workbook and figures", tell)
    except BaseException:
        remove_left_over(folder)
        raise
    written += [write(folder) for write in more]
    remove_earlier(folder, written, job="run")
    return written


def _write_record(
    result: RunResult, scenario: Scenario, entered: tuple[EnteredFile, ...], folder: Path, *, direct: int,
) -> Path:
    from tolerance.records.record import write_record

    return write_record(result, scenario, entered, folder, direct=direct)


def _new(options: argparse.Namespace) -> int:
    from tolerance.scenario import write_starter

    write_starter(options.file)
    if not options.quiet:
        print(on_one_line(f"Wrote {options.file}. Run it: tolerance run {options.file}"))
    return 0


def _presets(options: argparse.Namespace) -> int:
    from tolerance.report.preset_text import presets_json, print_presets
    from tolerance.scenario.presets import preset_names, read_preset

    names = preset_names()
    if options.name is not None and options.name not in names:
        raise InputError(f"{options.name}: is no preset; there are {', '.join(names)}")
    presets = [read_preset(name) for name in names if options.name in (None, name)]
    if options.json:
        print(presets_json(presets))
    else:
        print_presets(presets, console())
    return 0


def _schema(_: argparse.Namespace) -> int:
    import json

    from tolerance.scenario import json_schema

    print(json.dumps(json_schema(), indent=2))
    return 0
