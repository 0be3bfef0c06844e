"""One row of a sweep, as a worker does it: in a process of this machine, or on another one."""

from __future__ import annotations

import os
import platform
import threading
import time
import traceback
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from tolerance.errors import ToleranceError
from tolerance.report.json_text import run_object
from tolerance.scenario.tables import Scenario
from tolerance.study.run import run
from tolerance.study.solved import user_cache
from tolerance.study.versions import program_digest, versions

#: A worker with several threads would have them undo each other's limits of linear algebra.
_ONE_AT_A_TIME = threading.Lock()


@dataclass(frozen=True, slots=True)
class Task:
    """A scenario to run. `key` : digest of all that enters the result; `program` : what must compute it.

    fresh : solve anew also what is in the cache of solved sections.
    """

    key: str
    scenario: Scenario
    seed: int
    coupons: int | None
    program: Mapping[str, str]
    fresh: bool = False


@dataclass(frozen=True, slots=True)
class Outcome:
    """What came of a task: a result, or a message why there is none.

    lasting : the same would come of it again; what is not lasting is tried anew by the next sweep.
    bad_input : the scenario could not be read, and nothing was computed.
    trace : where a defect of the program arose.  from_cache (solver runs), seconds, of_processor [s], worker : for
    the log only.
    """

    result: Mapping[str, Any] | None
    message: str = ""
    lasting: bool = True
    bad_input: bool = False
    trace: str = ""
    from_cache: int = 0
    seconds: float = 0.0
    of_processor: float = 0.0
    worker: str = ""


def program() -> dict[str, str]:
    """What computes results here; the same elsewhere gives the same bits."""
    return {**versions(), "text of the program": program_digest()}


def do(task: Task) -> Outcome:
    """Run the study of a task; whatever goes wrong with it is its outcome."""
    here, start, processor_start = program(), time.perf_counter(), time.thread_time()
    if here != task.program:
        return Outcome(None, _differences(task.program, here), lasting=False)
    try:
        with _ONE_AT_A_TIME:
            found = run(task.scenario, seed=task.seed, coupons=task.coupons, cache=user_cache(fresh=task.fresh))
    except ToleranceError as problem:
        return Outcome(None, str(problem))
    except MemoryError:
        return Outcome(None, "the memory of the machine was too small for it", lasting=False)
    except Exception as defect:
        told = f"{type(defect).__name__}: {defect}".splitlines()[0]
        return Outcome(None, f"a defect of the program: {told}", lasting=False, trace=traceback.format_exc())
    return Outcome(run_object(found), from_cache=found.record.from_cache, seconds=time.perf_counter() - start,
                   of_processor=time.thread_time() - processor_start,
                   worker=f"process {os.getpid()} on {platform.node()}")


def _differences(there: Mapping[str, str], here: Mapping[str, str]) -> str:
    names = [name for name in there if there[name] != here.get(name)]
    told = [f"{name} {here.get(name)} instead of {there[name]}" if name != "text of the program"
            else "another state of the program" for name in names]
    return f"its worker has {', '.join(told)}: install the same there as here"
