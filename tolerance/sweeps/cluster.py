"""Rows by the workers of a Dask cluster, on other machines or on this one."""

from __future__ import annotations

import ctypes
import logging
import sys
import uuid
from collections.abc import Iterable, Iterator
from typing import TYPE_CHECKING, Any

from tolerance.errors import InputError, UnfinishedError
from tolerance.sweeps.work import Outcome, Task, do

if TYPE_CHECKING:
    from distributed import Client

AHEAD = 3  # tasks for each thread of a worker that the scheduler has, so that none waits
FEWEST_AHEAD = 32
SECONDS_TO_ANSWER = 10
SECONDS_TO_JOIN = 60
_HANDED_BACK_ABOVE, _FROM_THE_SYSTEM_ABOVE = -1, -3  # parameters of mallopt (malloc.h): bytes


def by_cluster(tasks: Iterable[Task], address: str) -> Iterator[tuple[Task, Outcome]]:
    """Each task with what came of it, in the order in which they are done.

    The scheduler gives the tasks of a worker that dies to another one. Raises InputError where `distributed` is not
    installed, UnfinishedError where no scheduler answers, none of its workers comes, or the scheduler is lost.
    """
    client = _client(address)
    try:
        yield from _done(client, tasks, address)
    finally:
        client.close(timeout=1)


def do_there(task: Task) -> Outcome:
    """As `do`, in a worker of Dask, which tells the C library to hand memory back early: a study takes half as long
    again by that. Told otherwise here, where the library is one that can be told so."""
    mallopt = getattr(ctypes.CDLL(None), "mallopt", None) if sys.platform == "linux" else None
    if mallopt is not None:
        mallopt(ctypes.c_int(_FROM_THE_SYSTEM_ABOVE), ctypes.c_int(32 << 20))
        mallopt(ctypes.c_int(_HANDED_BACK_ABOVE), ctypes.c_int(256 << 20))
    return do(task)


def _done(client: Client, tasks: Iterable[Task], address: str) -> Iterator[tuple[Task, Outcome]]:
    from distributed import as_completed
    from distributed.scheduler import KilledWorker

    coming = iter(tasks)
    name = uuid.uuid4().hex
    out: dict[str, Task] = {}
    finished: Any = as_completed(loop=client.loop)

    def send() -> bool:
        task = next(coming, None)
        if task is None:
            return False
        future = client.submit(do_there, task, key=f"tolerance-{name}-{task.key}", pure=False)
        out[future.key] = task
        finished.add(future)
        return True

    ahead = max(AHEAD * _threads(client), FEWEST_AHEAD)
    while len(out) < ahead and send():
        pass
    for future in finished:
        if future.status == "cancelled" or future.status == "lost":
            raise UnfinishedError(f"--scheduler {address}: the scheduler is gone")
        try:
            outcome: Outcome = future.result()
        except KilledWorker:
            outcome = Outcome(None, "its worker died each time it was tried (killed, or out of memory)", lasting=False)
        yield out.pop(future.key), outcome
        send()


def _client(address: str) -> Client:
    try:
        from distributed import Client
    except ImportError:
        raise InputError("--scheduler: needs the extra `cluster`: pip install 'tolerance[cluster]'") from None
    for name in ("distributed", *(one for one in logging.root.manager.loggerDict if one.startswith("distributed."))):
        logging.getLogger(name).setLevel(logging.CRITICAL)  # what matters is told by us
    try:
        client = Client(address, timeout=SECONDS_TO_ANSWER, set_as_default=False)
    except (OSError, ValueError) as problem:
        told = str(problem).splitlines()[0] if str(problem) else type(problem).__name__
        raise UnfinishedError(f"--scheduler {address}: no scheduler answers there ({told})") from None
    try:
        client.wait_for_workers(1, timeout=SECONDS_TO_JOIN)
    except TimeoutError:
        client.close(timeout=1)
        raise UnfinishedError(f"--scheduler {address}: the scheduler has no workers") from None
    return client


def _threads(client: Client) -> int:
    return sum(client.nthreads().values())
