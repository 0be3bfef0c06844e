"""A sweep of 200 scenarios by one worker, by two, by a Dask cluster of two; and killed ten times on the way.

`python -m tests.benchmarks.sweep`, with `--short` 24 scenarios. Each way starts with empty caches. Two efficiencies of
two workers stand side by side: by the clock, which needs a machine that does nothing else, and by the processor, which
does not: what they would have with a core each, as this process took its own time and the rows took theirs.
"""

from __future__ import annotations

import random
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

from distributed import LocalCluster

from tests.scenario_texts import BOARD, changed
from tests.sweep_examples import start
from tolerance.report.swept_text import sweep_json
from tolerance.sweeps.sweep import sweep
from tolerance.sweeps.work import Outcome
from tolerance.swept import SweepResult, SweptRow

THICKNESSES, TOLERANCES = 20, 10
KILLS = 10
AIM_OF_TWO, AIM_OF_CLUSTER = 0.85, 0.75


@dataclass(frozen=True, slots=True)
class Timing:
    """Seconds by the clock; of this process and of all rows by the processor."""

    clock: float
    own: float
    rows: float


def main() -> None:
    """Print a row for each way, then whether the killed sweep came to the same."""
    short = "--short" in sys.argv
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        path = write_scenario(folder, 6 if short else THICKNESSES, 4 if short else TOLERANCES)
        sweep([path], folder / "first", workers=1, coupons=256)  # imports, once for all
        print(f"{'':<34}{'clock [s]':>10}{'rows [s]':>10}{'own [s]':>9}{'efficiency':>12}{'of processor':>14}")
        one, expected = timed("one worker", lambda note: sweep(
            [path], folder / "one", workers=1, fresh=True, on_row=note))
        two, found = timed("two workers", lambda note: sweep(
            [path], folder / "two", workers=2, fresh=True, on_row=note), one)
        print(f"{'':<34}the same to the last bit: {sweep_json(found) == sweep_json(expected)} (aim {AIM_OF_TWO})")
        with LocalCluster(n_workers=2, threads_per_worker=1, host="127.0.0.1", dashboard_address="127.0.0.1:0",
                          local_directory=str(folder / "dask")) as cluster:
            sweep([path], folder / "warm", scheduler=cluster.scheduler_address, coupons=256)
            _, found = timed("Dask, two workers", lambda note: sweep(
                [path], folder / "dask-rows", scheduler=cluster.scheduler_address, fresh=True, on_row=note), one)
        print(f"{'':<34}the same to the last bit: {sweep_json(found) == sweep_json(expected)} (aim {AIM_OF_CLUSTER})")
        del two
        killed(folder, path, expected)


def write_scenario(folder: Path, thicknesses: int, tolerances: int) -> Path:
    """Two lines, so many thicknesses by so many tolerances of the etch."""
    path = folder / "orchard.toml"
    swept = "".join(f"[[sweep]]\nof = \"{of}\"\nvalues = [{', '.join(values)}]\n" for of, values in (
        ("layers.P1.thickness", [f'"{90 + thickness} um"' for thickness in range(thicknesses)]),
        ("variations.L1.etch, L3.etch.tolerance", [f'"{5 + tolerance} %"' for tolerance in range(tolerances)])))
    path.write_text(changed(BOARD, ("seed = 1", "seed = 1\ncoupons = 16384")) + swept, encoding="utf-8")
    return path


def timed(
    name: str, work: Callable[[Callable[[int, SweptRow, Outcome], None]], SweepResult], beside: Timing | None = None,
) -> tuple[Timing, SweepResult]:
    """Do the work and print its row; beside : that of one worker."""
    of_rows: list[float] = []

    def note(_number: int, _row: SweptRow, outcome: Outcome) -> None:
        of_rows.append(outcome.of_processor)

    clock, own = time.perf_counter(), time.process_time()
    result = work(note)
    found = Timing(time.perf_counter() - clock, time.process_time() - own, sum(of_rows))
    shown = ""
    if beside is not None:
        by_processor = (beside.own + beside.rows) / (2.0 * (found.own + 0.5 * found.rows))
        shown = f"{beside.clock / (2.0 * found.clock):>12.2f}{by_processor:>14.2f}"
    print(f"{f'{name}, {len(of_rows)} scenarios':<34}{found.clock:>10.1f}{found.rows:>10.1f}{found.own:>9.1f}{shown}")
    return found, result


def killed(folder: Path, path: Path, expected: SweepResult) -> None:
    """Kill the command with SIGKILL at random moments, start it again each time, and compare what it comes to."""
    chance = random.Random(1)
    rows = folder / "killed" / "rows"
    kept: list[int] = []
    for _ in range(KILLS):
        process = start("sweep", path, "--out", "killed", "--workers", 2, "--quiet", cwd=folder)
        before, more = len(list(rows.glob("*.json"))), chance.randrange(1 + len(expected.rows) // (KILLS + 2))
        while len(list(rows.glob("*.json"))) < before + more and process.poll() is None:
            time.sleep(0.02)
        time.sleep(chance.random())
        end(process)
        kept.append(len(list(rows.glob("*.json"))))
    found = sweep([path], folder / "killed", workers=2)
    print(f"killed {KILLS} times, rows kept {', '.join(map(str, kept))}: the same to the last bit: "
          f"{sweep_json(found) == sweep_json(expected)}; half files left: {len(half(folder))}")


def end(process: subprocess.Popen[str]) -> None:
    process.kill()
    process.communicate()


def half(folder: Path) -> Sequence[Path]:
    return [path for path in (folder / "killed").rglob("*") if path.name.endswith(".part")]


if __name__ == "__main__":
    main()
