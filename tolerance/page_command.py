"""`tolerance page`, and the page of `run --page`: a part of the command line."""

from __future__ import annotations

import argparse
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

from tolerance.screen import add_allow, add_fresh, cache_for, check_folder, console, progress, tell_from_cache

if TYPE_CHECKING:
    from tolerance.results import RunResult
    from tolerance.scenario import Scenario
    from tolerance.study.solved import SolvedCache

PAGE = "page.html"
Checked = Callable[..., None]  # that --coupons and --seed may be what they are


def add_page(commands: Any, checked: Checked) -> None:
    """Add the command."""
    page = commands.add_parser("page", help="a run as one HTML file in which tolerances, means, widths and limits move")
    page.add_argument("file", type=Path, metavar="FILE", help="scenario (TOML)")
    page.add_argument("--out", type=Path, metavar="DIR", help=f"folder for {PAGE}; default out/<file stem>")
    page.add_argument("--seed", type=int, metavar="N", help="instead of the scenario's")
    page.add_argument("--coupons", type=int, metavar="N", help="instead of the scenario's: a power of two")
    page.add_argument("--quiet", action="store_true", help="do not say what was written")
    add_fresh(page)
    add_allow(page)
    page.set_defaults(command=lambda options: _page(options, checked), direct=0)


def _page(options: argparse.Namespace, checked: Checked) -> int:
    from tolerance.scenario import load

    check_folder(options.out)
    scenario = load(options.file, allow=options.allow)
    checked(options, in_lots=scenario.has_levels)
    from tolerance.study.run import run

    folder = options.out or Path("out") / options.file.stem
    cache = cache_for(options)
    with progress(quiet=options.quiet, log=options.logbook) as tell:
        result = run(scenario, coupons=options.coupons, seed=options.seed, on_progress=tell, cache=cache)
        options.logbook.run(result)
        written = write_the_page(scenario, result, folder, tell=tell, cache=cache)
    if not options.quiet:
        console().print(f"Written: {written}. Open it in a browser.", highlight=False, soft_wrap=True)
    tell_from_cache(options, result.record.from_cache, result.record.solver_runs)
    return 0


def write_the_page(
    scenario: Scenario, result: RunResult, folder: Path, *, tell: Callable[[str, int, int], None],
    cache: SolvedCache | None,
) -> Path:
    """Fit what the page needs and write it to the folder."""
    from tolerance.report.page.document import write_page
    from tolerance.study.page import page

    return write_page(page(scenario, result, on_progress=tell, cache=cache), folder / PAGE)
