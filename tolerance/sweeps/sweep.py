"""`sweep`: the order of its steps. Files -> scenarios -> what is finished already -> workers -> one row each.

Rows are the same bits whoever computes them and in whatever order: each has its own seed and its own process, and
stands in the table where its file and its values stand.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

from tolerance.cores import Progress, silent, usable_cores
from tolerance.errors import InputError, ToleranceError
from tolerance.scenario.checking import Swept, sweep_of
from tolerance.sweeps.cluster import by_cluster
from tolerance.sweeps.crew import by_processes
from tolerance.sweeps.kept import KeptRows, key_of
from tolerance.sweeps.work import Outcome, Task, program
from tolerance.swept import SweepResult, SweptRow

STEP = "sweep"
#: Called with each row as it is done, and what came of it.
RowDone = Callable[[int, SweptRow, Outcome], None]


@dataclass(frozen=True, slots=True)
class _Planned:
    source: str
    values: dict[str, object]
    swept: Swept | None
    message: str = ""


def sweep(
    paths: Sequence[str | os.PathLike[str]], folder: str | os.PathLike[str], *, workers: int | None = None,
    scheduler: str | None = None, fresh: bool = False, seed: int | None = None, coupons: int | None = None,
    allow: Sequence[str | os.PathLike[str]] = (), on_progress: Progress | None = None, on_row: RowDone | None = None,
) -> SweepResult:
    """Run every scenario that the files, and the *.toml of the folders, stand for.

    folder : finished rows are kept there and not computed again.  workers : processes; one for each core if left out.
    scheduler : address of a Dask scheduler whose workers compute the rows instead.  fresh : solve anew also what a
    worker's cache of solved sections holds.  seed, coupons : instead of the scenarios'.
    allow : folders, besides that of each scenario, in which files may stand that it names.
    Raises InputError where there is nothing to run, UnfinishedError where the folder takes no files.
    """
    plan = _plan(paths, allow)
    kept, rows = KeptRows(Path(folder)), _Rows(plan, on_progress or silent, on_row)
    keys: dict[str, list[int]] = {}

    def tasks() -> Iterator[Task]:
        """What is not finished; what is, or cannot be read, becomes a row on the way."""
        here, drawn = program(), None
        for number, planned in enumerate(plan):
            try:
                scenario = None if planned.swept is None else planned.swept.scenario()
            except ToleranceError as problem:
                rows.done(number, Outcome(None, str(problem), bad_input=True))
                continue
            if scenario is None:
                rows.done(number, Outcome(None, planned.message, bad_input=True))
                continue
            drawn = kept.seed() if drawn is None else drawn  # nothing is written where every input is bad
            own = drawn if scenario.evaluation.seed is None else scenario.evaluation.seed
            of_row = own if seed is None else seed
            key = key_of(scenario, seed=of_row, coupons=coupons, program=here)
            found = kept.find(key)
            if found is not None:
                rows.done(number, found)
            else:
                keys.setdefault(key, []).append(number)
                if len(keys[key]) == 1:
                    yield Task(key, scenario, of_row, coupons, here, fresh)

    done = by_processes(tasks(), workers or usable_cores()) if scheduler is None else by_cluster(tasks(), scheduler)
    for task, outcome in done:
        kept.keep(task.key, outcome)
        for number in keys.pop(task.key):
            rows.done(number, outcome)
    return rows.result()


class _Rows:
    """Rows as they come in."""

    def __init__(self, plan: Sequence[_Planned], tell: Progress, on_row: RowDone | None) -> None:
        self._plan, self._tell, self._on_row = plan, tell, on_row
        self._found: dict[int, SweptRow] = {}
        tell(STEP, 0, len(plan))

    def done(self, number: int, outcome: Outcome) -> None:
        planned = self._plan[number]
        row = SweptRow(planned.source, planned.values, outcome.result, outcome.message)
        self._found[number] = row
        if self._on_row is not None:
            self._on_row(number, row, outcome)
        self._tell(STEP, len(self._found), len(self._plan))

    def result(self) -> SweepResult:
        return SweepResult(tuple(self._found[number] for number in range(len(self._plan))))


def _plan(
    paths: Sequence[str | os.PathLike[str]], allow: Sequence[str | os.PathLike[str]],
) -> list[_Planned]:
    """Every row there will be. Raises InputError where there is none."""
    planned: list[_Planned] = []
    for path in _files(paths):
        try:
            _, variants = sweep_of(path, allow=allow)
            planned += [_Planned(str(path), one.swept, one) for one in variants]
        except ToleranceError as problem:
            planned.append(_Planned(str(path), {}, None, str(problem)))
    return planned


def _files(paths: Sequence[str | os.PathLike[str]]) -> list[Path]:
    found: list[Path] = []
    for path in map(Path, paths):
        if path.is_dir():
            inside = sorted(one for one in path.glob("*.toml") if one.is_file() and not one.name.startswith("."))
            if not inside:
                raise InputError(f"{path}: holds no scenario (*.toml)")
            found += inside
        elif path.exists():
            found.append(path)
        else:
            raise InputError(f"{path}: there is no such file or folder")
    return list(dict.fromkeys(found))
