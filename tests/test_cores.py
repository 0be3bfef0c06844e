"""Work on all cores: order, exceptions, and what happens when a worker or the original dies."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import textwrap
import time

import pytest

from tests.sweep_examples import heed_interrupts

#: Work is tried in a process of its own: copies are made only where no other thread runs, and a test runner has some.
ROUND_THE_CORES = """
    import os, signal, sys, time
    from tolerance import cores
    from tolerance.errors import InputError, UnfinishedError
    cores._cores = lambda: 2
"""


def finished(code: str, *, seconds: float = 60.0) -> subprocess.CompletedProcess[str]:
    text = textwrap.dedent(ROUND_THE_CORES) + textwrap.dedent(code)
    return subprocess.run([sys.executable, "-c", text], capture_output=True, text=True, timeout=seconds, check=False)


def test_results_stand_in_the_order_of_the_tasks_and_come_from_other_processes() -> None:
    done = finished("""
        def work(task):
            time.sleep(0.05 * (3 - task))
            return task * task, os.getpid() != parent
        parent = os.getpid()
        told = []
        print(cores.on_all_cores(work, [0, 1, 2, 3], "squares", lambda *now: told.append(now)))
        print(told[0], told[-1], len(told))
    """)
    assert done.stdout.splitlines() == [
        "[(0, True), (1, True), (4, True), (9, True)]", "('squares', 0, 4) ('squares', 4, 4) 5"], done.stderr


def test_threads_do_the_work_where_this_process_cannot_be_copied_safely() -> None:
    done = finished("""
        import threading
        threading.Thread(target=time.sleep, args=(2.0,), daemon=True).start()
        print(cores.on_all_cores(lambda task: (task, os.getpid() == parent), [3, 4], "step", cores.silent)
              if (parent := os.getpid()) else None)
    """)
    assert done.stdout == "[(3, True), (4, True)]\n", done.stderr


def test_an_exception_of_the_work_arrives_with_its_own_traceback() -> None:
    done = finished("""
        def work(task):
            raise InputError(f"bad {task}")
        try:
            cores.on_all_cores(work, ["one", "two"], "step", cores.silent)
        except InputError as problem:
            print(problem, "in work" in problem.__notes__[0])
    """)
    assert done.stdout in ("bad one True\n", "bad two True\n"), done.stderr


def test_the_death_of_a_worker_is_told_and_nothing_hangs() -> None:
    done = finished("""
        def work(task):
            if task == 1:
                os.kill(os.getpid(), signal.SIGKILL)
            return task
        try:
            cores.on_all_cores(work, [0, 1, 2, 3], "step", cores.silent)
        except UnfinishedError as problem:
            print(problem)
    """)
    assert done.stdout == "a worker process ended before its work was done (killed, or out of memory)\n", done.stderr


@pytest.mark.parametrize(("sent", "whole_group"), [
    (signal.SIGINT, True), (signal.SIGINT, False), (signal.SIGKILL, False)])
def test_workers_end_with_the_original(sent: signal.Signals, whole_group: bool) -> None:
    code = textwrap.dedent(ROUND_THE_CORES) + textwrap.dedent("""
        def work(task):
            os.write(1, f"{os.getpid()}\\n".encode())
            time.sleep(task)
        try:
            cores.on_all_cores(work, [0.5, 0.5, 60.0], "step", cores.silent)
        except KeyboardInterrupt:
            print("interrupted", flush=True)
    """)
    with subprocess.Popen([sys.executable, "-c", code], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
                          start_new_session=True, preexec_fn=heed_interrupts) as original:
        assert original.stdout is not None
        assert original.stderr is not None
        workers = {int(original.stdout.readline()) for _ in range(2)}
        start = time.monotonic()
        (os.killpg if whole_group else os.kill)(original.pid, sent)
        original.wait(timeout=10.0)
        assert len(workers) == 2
        if sent == signal.SIGINT:
            assert original.stdout.read().splitlines()[-1] == "interrupted"
            assert original.stderr.read() == ""
        while alive := [worker for worker in workers if _runs(worker)]:
            assert time.monotonic() - start < 5.0, f"{alive} outlive the original"
            time.sleep(0.05)


def _runs(process: int) -> bool:
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    with open(f"/proc/{process}/stat", encoding="ascii") as stat:
        return stat.read().rsplit(")", 1)[1].split()[0] != "Z"
