"""Where commands print: a console on standard output, and a bar on standard error."""

from __future__ import annotations

import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from rich.console import Console

    from tolerance.logbook import Logbook

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
