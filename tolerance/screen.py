"""Where commands print: a console on standard output, a bar on standard error; and the cache that they share."""

from __future__ import annotations

import sys
import time
from argparse import ArgumentParser, Namespace
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from rich.console import Console

    from tolerance.logbook import Logbook
    from tolerance.study.solved import SolvedCache

SECONDS_BEFORE_PROGRESS = 1.0
COLUMNS = 80  # where the output is no terminal


def console() -> Console:
    """Standard output, 80 columns wide where it is no terminal."""
    from rich.console import Console

    return Console(width=None if sys.stdout.isatty() else COLUMNS)


@contextmanager
def progress(*, quiet: bool, log: Logbook | None = None) -> Iterator[Callable[[str, int, int], None]]:
    """A bar on standard error for work of more than a second; silent with `quiet` and when it is no terminal.

    log : is told of every step as well.
    """
    note = _tell_nobody if log is None else log.tell
    if quiet or not sys.stderr.isatty():
        yield note
        return
    from rich.console import Console
    from rich.progress import Progress

    bar = Progress(console=Console(stderr=True), transient=True, auto_refresh=False)  # no thread of its own beside us
    task = bar.add_task("starting")
    start = time.monotonic()

    def tell(step: str, done: int, total: int) -> None:
        if time.monotonic() - start > SECONDS_BEFORE_PROGRESS:
            bar.start()
        note(step, done, total)
        bar.update(task, description=step, completed=done, total=total, refresh=True)

    try:
        yield tell
    finally:
        bar.stop()


def _tell_nobody(_step: str, _done: int, _total: int) -> None:
    """Where there is no log."""


def add_fresh(parser: ArgumentParser) -> None:
    """Add the option that goes round the cache."""
    parser.add_argument("--fresh", action="store_true",
                        help="solve everything anew, also what an earlier command has solved")


def cache_for(options: Namespace) -> SolvedCache | None:
    """The user's cache of solved sections; one note where nothing can be kept there."""
    from tolerance.study.solved import user_cache

    found = user_cache(fresh=options.fresh)
    if found is not None and not found.cache.is_writable() and not options.quiet:
        print(f"Note: {found.cache.folder} cannot be written; what is solved is not kept.", file=sys.stderr)
    return found


def tell_from_cache(options: Namespace, from_cache: int, solver_runs: int) -> None:
    """Say on standard error, where it is a terminal, how much an earlier command had solved already."""
    options.logbook.write("cache", hits=from_cache, solver_runs=solver_runs)
    if from_cache and not options.quiet and sys.stderr.isatty():
        print(f"{from_cache:,} of {solver_runs:,} solver runs came from the cache.", file=sys.stderr)
