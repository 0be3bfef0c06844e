"""Work on all cores, linear algebra on one thread each, and progress told to whoever asks."""

from __future__ import annotations

import multiprocessing
import os
import signal
import threading
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from contextlib import suppress
from functools import wraps
from multiprocessing.connection import Connection, wait
from traceback import format_exc
from typing import Any, ParamSpec, TypeVar

from threadpoolctl import threadpool_limits

from tolerance.errors import UnfinishedError

#: Called with a step's name, what is done of it, and how much there is.
Progress = Callable[[str, int, int], None]

Task = TypeVar("Task")
Done = TypeVar("Done")
Arguments = ParamSpec("Arguments")


def plain_algebra(work: Callable[Arguments, Done]) -> Callable[Arguments, Done]:
    """`work` with linear algebra kept to one thread.

    The matrices here are small: threads that wait for each other in them cost many times what they save.
    """
    @wraps(work)
    def kept(*args: Arguments.args, **kwargs: Arguments.kwargs) -> Done:
        with threadpool_limits(limits=1, user_api="blas"):
            return work(*args, **kwargs)

    return kept


def on_all_cores(
    work: Callable[[Task], Done], tasks: Sequence[Task], step: str, tell: Progress,
) -> list[Done]:
    """`work` done on every task, results in the order of the tasks; what a task gives must not depend on the others.

    Where this process may be copied safely, copies of it do the work: they have all that it has, and only results
    travel. Elsewhere threads do it, and in a process that is itself somebody's worker it is done one by one.
    Raises UnfinishedError where a copy dies.
    """
    results: dict[int, Done] = {}
    tell(step, 0, len(tasks))
    for number, result in _finished(work, tasks, min(_cores(), len(tasks))):
        results[number] = result
        tell(step, len(results), len(tasks))
    return [results[number] for number in range(len(tasks))]


def silent(step: str, done: int, total: int) -> None:
    """Tell nobody."""


def usable_cores() -> int:
    """Cores that this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def _cores() -> int:
    """Cores that work is spread over: one in a process that is itself somebody's worker."""
    return usable_cores() if multiprocessing.parent_process() is None else 1


def _finished(
    work: Callable[[Task], Done], tasks: Sequence[Task], workers: int,
) -> Iterator[tuple[int, Done]]:
    """Number and result of each task, as they are done."""
    if workers <= 1:
        yield from enumerate(map(work, tasks))
    elif "fork" in multiprocessing.get_all_start_methods() and threading.active_count() == 1:
        yield from _in_copies(work, tasks, workers)
    else:
        with ThreadPoolExecutor(workers) as pool:
            try:
                yield from enumerate(pool.map(work, tasks))
            except BaseException:
                pool.shutdown(cancel_futures=True)
                raise


def _in_copies(
    work: Callable[[Task], Done], tasks: Sequence[Task], workers: int,
) -> Iterator[tuple[int, Done]]:
    """The tasks done by copies of this process, each asked for the next task when it has finished one."""
    context = multiprocessing.get_context("fork")
    waiting = iter(range(len(tasks)))
    copies = []
    busy: dict[Connection, int] = {}
    try:
        for _ in range(workers):
            ours, theirs = context.Pipe()
            copies.append(context.Process(
                target=_serve, args=(work, tasks, theirs, [*busy, ours]), daemon=True, name="tolerance worker"))
            copies[-1].start()
            theirs.close()
            busy[ours] = next(waiting)
            ours.send(busy[ours])
        while busy:
            for ready in wait(list(busy)):
                assert isinstance(ready, Connection)
                number, following = busy.pop(ready), next(waiting, None)
                result = _answer(ready)
                ready.send(following)
                if following is not None:
                    busy[ready] = following
                yield number, result
    finally:
        for copy in copies:
            copy.terminate()
        for copy in copies:
            copy.join()


def _serve(
    work: Callable[[Task], Done], tasks: Sequence[Task], theirs: Connection, not_ours: Sequence[Connection],
) -> None:
    """What a copy does: tasks by their number until there is none, or nobody who asks; results and exceptions go back.

    not_ours : the ends that belong to the original; closed, so that its death is noticed.
    """
    if signal.getsignal(signal.SIGINT) is not signal.SIG_IGN:  # as in a job in the background
        signal.signal(signal.SIGINT, signal.SIG_DFL)  # the original tells of an interruption
    for end in not_ours:
        end.close()
    with suppress(EOFError, BrokenPipeError, ConnectionResetError), threadpool_limits(limits=1, user_api="blas"):
        while (number := theirs.recv()) is not None:
            try:
                theirs.send((work(tasks[number]), None))
            except Exception as problem:
                problem.add_note(f"in a worker process:\n{format_exc()}")
                theirs.send((None, problem))


def _answer(ours: Connection) -> Any:  # whatever the work gives
    try:
        result, problem = ours.recv()
    except (EOFError, ConnectionResetError) as end:
        raise UnfinishedError("a worker process ended before its work was done (killed, or out of memory)") from end
    if problem is not None:
        raise problem
    return result
