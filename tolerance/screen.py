"""Where commands print: a console on standard output, a bar and messages on standard error; and options they share.

Names come from files that strangers wrote. What they hold of control characters (a terminal takes them for commands) is
shown as a sign, and nothing in them is taken for markup.
"""

from __future__ import annotations

import argparse
import io
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, NoReturn

from tolerance.errors import InputError, on_one_line

if TYPE_CHECKING:
    from rich.console import Console

SECONDS_BEFORE_PROGRESS = 1.0
COLUMNS = 80  # where the output is no terminal


class Parser(argparse.ArgumentParser):
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


def add_allow(parser: argparse.ArgumentParser) -> None:
    """The option for files that stand elsewhere."""
    parser.add_argument("--allow", type=Path, action="append", default=[], metavar="DIR",
                        help="a folder in which, too, files may stand that the scenario names (may be repeated)")


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
def progress(*, quiet: bool) -> Iterator[Callable[[str, int, int], None]]:
    """A bar on standard error for work of more than a second; silent with `quiet` and when it is no terminal."""
    if quiet or not sys.stderr.isatty():
        yield lambda _step, _done, _total: None
        return
    from rich.console import Console
    from rich.markup import escape
    from rich.progress import Progress

    bar = Progress(console=Console(stderr=True), transient=True)
    task = bar.add_task("starting")
    start = time.monotonic()

    def tell(step: str, done: int, total: int) -> None:
        if time.monotonic() - start > SECONDS_BEFORE_PROGRESS:
            bar.start()
        bar.update(task, description=escape(printable(step)), completed=done, total=total)

    try:
        yield tell
    finally:
        bar.stop()
