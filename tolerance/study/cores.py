"""Work on all cores, linear algebra on one thread each, and progress told to whoever asks."""

from __future__ import annotations

import os
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from functools import wraps
from typing import ParamSpec, TypeVar

from threadpoolctl import threadpool_limits

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
    """`work` done on every task, in threads, results in the order of the tasks."""
    results = []
    with ThreadPoolExecutor(os.cpu_count()) as pool:
        tell(step, 0, len(tasks))
        try:
            for done, result in enumerate(pool.map(work, tasks), start=1):
                results.append(result)
                tell(step, done, len(tasks))
        except BaseException:
            pool.shutdown(cancel_futures=True)
            raise
    return results


def silent(step: str, done: int, total: int) -> None:
    """Tell nobody."""
