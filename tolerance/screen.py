"""Where commands print: a console on standard output, a bar and messages on standard error; and options they share.

Names come from files that strangers wrote. What they hold of control characters (a terminal takes them for commands) is
shown as a sign, and nothing in them is taken for markup.
"""

from __future__ import annotations

import io
import sys
import time
from argparse import ArgumentParser, Namespace
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, NoReturn

from tolerance.errors import InputError, on_one_line

if TYPE_CHECKING:
    from rich.console import Console

    from tolerance.logbook import Logbook
    from tolerance.study.solved import SolvedCache

SECONDS_BEFORE_PROGRESS = 1.0
COLUMNS = 80  # where the output is no terminal


class Parser(ArgumentParser):
    """A parser whose complaints cannot command the terminal."""

    def error(self, message: str) -> NoReturn:
        super().error(on_one_line(message))


def console() -> Console:
    """Standard output, 80 columns wide where it is no terminal; text is shown as it is, without control characters."""
    from rich.console import Console, ConsoleOptions, RenderableType
    from rich.segment import Segment

    class PlainConsole(Console):
        def render(self, renderable: RenderableType, options: ConsoleOptions | None = None) -> Iterator[Segment]:
            for segment in super().render(renderable, options):
                yield segment if segment.control else Segment(printable(segment.text), segment.style)

    return PlainConsole(width=None if sys.stdout.isatty() else COLUMNS, markup=False, emoji=False, highlight=False)


def printable(text: str) -> str:
    """The text with a sign in place of every character that does not print, but for line ends."""
    if text.isprintable():
        return text
    return "".join(one if one.isprintable() or one == "\n" else "\N{REPLACEMENT CHARACTER}" for one in text)


def tell_problem(problem: object) -> None:
    """A message on standard error, a line for each problem, without control characters."""
    sys.stderr.write("".join(f"{on_one_line(line)}\n" for line in str(problem).split("\n")))


def survive_narrow_encodings() -> None:
    """Let a standard output that cannot write some letter write its escape instead."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="backslashreplace")


def add_allow(parser: ArgumentParser) -> None:
    """The option for files that stand elsewhere."""
    parser.add_argument("--allow", type=Path, action="append", default=[], metavar="DIR",
                        help="a folder in which tables of readings may stand, too (may be repeated)")


def check_folder(path: Path | None) -> None:
    """Refuse a --out that cannot be a folder, before anything is computed. Raises InputError."""
    if path is None:
        return
    for part in (path, *path.parents):
        if part.exists():
            if not part.is_dir():
                raise InputError(f"--out {path}: must be a folder; {part} is a file")
            return


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
    from rich.markup import escape
    from rich.progress import Progress

    bar = Progress(console=Console(stderr=True), transient=True, auto_refresh=False)  # no thread of its own beside us
    task = bar.add_task("starting")
    start = time.monotonic()

    def tell(step: str, done: int, total: int) -> None:
        if time.monotonic() - start > SECONDS_BEFORE_PROGRESS:
            bar.start()
        note(step, done, total)
        bar.update(task, description=escape(printable(step)), completed=done, total=total, refresh=True)

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
