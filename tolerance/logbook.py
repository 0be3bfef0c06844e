"""The log of a command: one JSON object a line, written whole, for whoever watches many of them.

Every line has `time` (UTC), `elapsed` [s] since the command began, and `event`; what else stands there goes with the
event: `began`, `step`, `timing`, `row`, `cache`, `result`, `warning`, `failed`, `ended`.
"""

from __future__ import annotations

import json
import time
from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING

from tolerance.errors import UnfinishedError

if TYPE_CHECKING:
    from tolerance.results import RunResult


class Logbook:
    """Writes to the end of `path`; to nothing where that is None.

    complain : told once, where the file takes no more; the command goes on without a log.
    Raises UnfinishedError where the file cannot be opened.
    """

    def __init__(self, path: Path | None, complain: Callable[[str], None]) -> None:
        self._path, self._complain = path, complain
        self._start = time.perf_counter()
        self._step, self._step_start = "", self._start
        try:
            self._file = None if path is None else path.open("ab", buffering=0)
        except OSError as problem:
            raise UnfinishedError(f"--log {path}: cannot be written: {problem.strerror or problem}") from problem

    def write(self, event: str, **fields: object) -> None:
        """Write one line."""
        if self._file is None:
            return
        head = {"time": datetime.now(UTC).isoformat(timespec="milliseconds"),
                "elapsed": round(time.perf_counter() - self._start, 3), "event": event}
        try:
            self._file.write(f"{json.dumps({**head, **fields}, default=str)}\n".encode())
        except OSError as problem:
            self.close()
            self._complain(f"--log {self._path}: could not be written, going on without: {problem.strerror or problem}")

    def tell(self, step: str, done: int, total: int) -> None:
        """Progress: a line when a step begins and one when it is finished."""
        if step != self._step:
            self._step, self._step_start = step, time.perf_counter()
            self.write("step", step=step, state="begun", total=total)
        if done == total:
            self.write("step", step=step, state="finished", total=total,
                       seconds=round(time.perf_counter() - self._step_start, 3))
            self._step = ""

    def run(self, result: RunResult) -> None:
        """What a run took, what it came to, and what in it is to be looked at."""
        for step, seconds in result.record.seconds.items():
            self.write("timing", step=step, seconds=round(float(seconds), 3))
        for line in result.lines:
            if not line.certificate.certified:
                self.write("warning", line=line.name, message="verdicts near the limits are predicted, not solved")
            if line.impossible:
                self.write("warning", line=line.name, message=f"{line.impossible} coupons cannot exist")
        self.write("result", title=result.title, seed=result.seed, coupons=result.coupons,
                   solver_runs=result.record.solver_runs, **{"yield": float(result.inside.value)},
                   lines_that_miss=[line.name for line in result.lines if line.inside.value < result.target_yield])

    def close(self) -> None:
        """No more lines."""
        if self._file is not None:
            self._file.close()
            self._file = None
