"""Rows by worker processes of this machine: none is lost when one of them dies, and none outlives this process."""

from __future__ import annotations

import multiprocessing
import os
import signal
import sys
import threading
from collections import deque
from collections.abc import Generator, Iterable, Iterator
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from contextlib import contextmanager
from multiprocessing.connection import Connection
from multiprocessing.context import BaseContext
from types import ModuleType

from tolerance.sweeps.work import Outcome, Task, do

AHEAD = 2  # tasks that each worker has before it, so that it never waits
DEATHS = 2  # of a worker that had nothing but this task; then the task has failed


def by_processes(tasks: Iterable[Task], workers: int) -> Generator[tuple[Task, Outcome]]:
    """Each task with what came of it, in the order in which they are done.

    A worker that dies takes the whole pool with it: the tasks that were out are then done one at a time, so that one
    which kills its worker is known and told, and every other is done.
    """
    coming = iter(tasks)
    doubtful: deque[Task] = deque()
    deaths = 0
    pool = _Pool(workers)
    out: dict[Future[Outcome], Task] = {}
    try:
        while True:
            alone = bool(doubtful)
            while len(out) < (1 if alone else AHEAD * workers):
                task = doubtful.popleft() if doubtful else None if alone else next(coming, None)
                if task is None:
                    break
                out[pool.submit(task)] = task
            if not out:
                return
            broken = False
            for future in wait(out, return_when=FIRST_COMPLETED).done:
                if isinstance(future.exception(), BrokenProcessPool):
                    broken = True
                    continue
                deaths = 0
                yield out.pop(future), future.result()
            if broken:
                pool.end()
                pool = _Pool(workers)
                for future in [one for one in out if one.done() and one.exception() is None]:
                    yield out.pop(future), future.result()
                lost = list(out.values())
                out.clear()
                deaths = deaths + 1 if alone else 0
                if deaths >= DEATHS:
                    deaths = 0
                    yield lost.pop(), Outcome(None, _DIED, lasting=False)
                doubtful.extendleft(reversed(lost))
    finally:
        pool.end()


_DIED = "its worker process died each time it was tried (killed, or out of memory)"


class _Pool:
    """A pool whose workers end at once when they are told to, or when this process is gone."""

    def __init__(self, workers: int) -> None:
        context = _context()
        self._theirs, self._ours = context.Pipe(duplex=False)
        self._pool = ProcessPoolExecutor(workers, context, initializer=_begin, initargs=(self._theirs,))

    def submit(self, task: Task) -> Future[Outcome]:
        try:
            with _without_main():
                return self._pool.submit(do, task)
        except BrokenProcessPool as problem:  # it broke since the last result: told as the result of this task
            broken: Future[Outcome] = Future()
            broken.set_exception(problem)
            return broken

    def end(self) -> None:
        """End the workers, whatever they are at."""
        self._ours.close()
        self._pool.shutdown(wait=True, cancel_futures=True)
        self._theirs.close()


@contextmanager
def _without_main() -> Iterator[None]:
    """While workers are started: they need nothing of the main program, and a script that sweeps would otherwise be run
    again by each of them."""
    main = sys.modules["__main__"]
    sys.modules["__main__"] = ModuleType("__main__")
    try:
        yield
    finally:
        sys.modules["__main__"] = main


def _context() -> BaseContext:
    """Workers start as copies of a process that has loaded the program and nothing else, where there is such a way."""
    if "forkserver" not in multiprocessing.get_all_start_methods():
        return multiprocessing.get_context("spawn")
    context = multiprocessing.get_context("forkserver")
    context.set_forkserver_preload([do.__module__])
    return context


def _begin(told_to_end: Connection) -> None:
    """In a worker: leave the keyboard to the process that commands, and end when that closes its end or is gone."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)

    def watch() -> None:
        told_to_end.poll(None)
        os._exit(1)

    threading.Thread(target=watch, daemon=True).start()
