"""The commands for many runs, for one again, and for the installation: sweep, again, doctor."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any

from tolerance.errors import InputError, ToleranceError
from tolerance.screen import add_allow, add_fresh, cache_for, check_folder, console, progress
from tolerance.talk_commands import check_numbers

if TYPE_CHECKING:
    from tolerance.sweeps.work import Outcome
    from tolerance.swept import SweptRow

UNFINISHED, INTERRUPTED = 3, 130


def add_many(commands: Any) -> None:
    """Add the commands to those of `tolerance`."""
    sweep = commands.add_parser("sweep", help="many scenarios, or one with [[sweep]]: a table with a row each")
    sweep.add_argument("paths", type=Path, nargs="+", metavar="FILE|FOLDER",
                       help="scenarios (TOML); of a folder all *.toml in it")
    sweep.add_argument("--out", type=Path, metavar="DIR",
                       help="folder for tables and finished rows; default out/<stem of the first>-sweep")
    sweep.add_argument("--json", action="store_true", help="all rows as one JSON object on standard output as well")
    sweep.add_argument("--workers", type=int, metavar="N", help="processes; one for each core if left out")
    sweep.add_argument("--scheduler", metavar="ADDRESS", help="compute on the workers of this Dask scheduler instead")
    sweep.add_argument("--seed", type=int, metavar="N", help="instead of the scenarios'")
    sweep.add_argument("--coupons", type=int, metavar="N", help="instead of the scenarios': a power of two")
    sweep.add_argument("--quiet", action="store_true", help="print nothing but what is asked for or wrong")
    add_fresh(sweep)
    add_allow(sweep)
    sweep.set_defaults(command=_sweep)
    add_again(commands)
    add_doctor(commands)


def add_again(commands: Any) -> None:
    """Add the command that re-makes a run."""
    again = commands.add_parser("again", help="re-make a run from its record, and say what is not as it was")
    again.add_argument("folder", type=Path, metavar="OUT", help="folder of a run, or its run-record.json")
    again.add_argument("--json", action="store_true", help="the result as one JSON object on standard output")
    again.add_argument("--quiet", action="store_true", help="print nothing but what is asked for or wrong")
    add_fresh(again)
    again.set_defaults(command=_again)


def add_doctor(commands: Any) -> None:
    """Add the command that looks at the installation."""
    doctor = commands.add_parser("doctor", help="what is installed, how fast it is, whether exact results come out")
    doctor.add_argument("--json", action="store_true", help="the same as one JSON object on standard output")
    doctor.set_defaults(command=_doctor)


def _doctor(options: argparse.Namespace) -> int:
    from tolerance.report.diagnosis_text import diagnosis_json, print_diagnosis
    from tolerance.study.doctor import doctor
    from tolerance.study.solved import user_cache

    found = doctor(user_cache())
    if options.json:
        print(diagnosis_json(found))
    else:
        print_diagnosis(found, console())
    return 0 if found.well else UNFINISHED


def _again(options: argparse.Namespace) -> int:
    from tolerance.records.again import again

    cache = cache_for(options)
    with progress(quiet=options.quiet, log=options.logbook) as tell:
        made = again(options.folder, on_progress=tell, cache=cache)
    options.logbook.run(made.result)
    for name, then, now in made.made_with:
        options.logbook.write("warning", message=f"{name}: {then} then, {now} now")
    if options.json:
        from tolerance.report.json_text import run_json

        print(run_json(made.result))
    elif not options.quiet:
        from tolerance.records.words import print_again

        print_again(made, console())
    return 0 if made.same else UNFINISHED


def _sweep(options: argparse.Namespace) -> int:
    check_numbers(options)
    check_folder(options.out)
    if options.workers is not None and not 1 <= options.workers <= 1000:
        raise InputError(f"--workers {options.workers}: must be from 1 to 1000")
    if options.workers is not None and options.scheduler is not None:
        raise InputError("--workers: not with --scheduler, whose workers are its own")
    from tolerance.sweeps.sweep import sweep

    folder = options.out or Path("out") / f"{options.paths[0].resolve().stem}-sweep"
    done, failed, bad = 0, 0, 0

    def note(number: int, row: SweptRow, outcome: Outcome) -> None:
        nonlocal done, failed, bad
        done, failed, bad = done + 1, failed + (row.result is None), bad + outcome.bad_input
        options.logbook.write(
            "row", row=number + 1, scenario=row.source, swept=row.swept, failed=row.result is None,
            message=row.message or None, solver_runs=None if row.result is None else row.result["solver_runs"],
            from_cache=outcome.from_cache, seconds=round(outcome.seconds, 3),
            processor_seconds=round(outcome.of_processor, 3), worker=outcome.worker or None,
            **({"trace": outcome.trace} if outcome.trace else {}))

    try:
        with progress(quiet=options.quiet, log=options.logbook) as tell:
            result = sweep(options.paths, folder, workers=options.workers, scheduler=options.scheduler,
                           fresh=options.fresh, seed=options.seed, coupons=options.coupons, allow=options.allow,
                           on_progress=tell, on_row=note)
    except (ToleranceError, KeyboardInterrupt):
        if done:
            print(f"{done - failed} finished rows are kept in {folder}: the same command goes on from there",
                  file=sys.stderr)
        raise
    from tolerance.report.swept_files import write_sweep

    if bad == len(result.rows):
        raise InputError("\n".join(f"{row.source}: {row.message}" for row in result.rows[:20]))
    write_sweep(result, folder)
    if options.json:
        from tolerance.report.swept_text import sweep_json

        print(sweep_json(result))
    elif not options.quiet:
        from tolerance.report.swept_text import print_sweep

        screen = console()
        print_sweep(result, screen)
        screen.print(f"Written to {folder}: tables and finished rows")
    return UNFINISHED if result.failed else 0
