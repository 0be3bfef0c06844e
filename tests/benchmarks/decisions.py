"""How long decisions take to answer: `python -m tests.benchmarks.decisions`.

Every command on the 10-layer scenario as a process of its own, first with an empty cache each, then after `run` has
filled it: wall time, and the processor time of all its processes, in seconds. `take` reads a sheet in which the closest
tolerance was answered.
"""

from __future__ import annotations

import os
import resource
import subprocess
import sys
import time
from pathlib import Path
from tempfile import TemporaryDirectory

from openpyxl import load_workbook

from tolerance.sheet.layout import TABLE_SHEET
from tolerance.study.solved import FOLDER_VARIABLE

SCENARIO = Path(__file__).parents[2] / "scenarios" / "weir-module-10-layer.toml"
COMMANDS = ("run", "tighten", "center", "promise", "compare", "note", "ask", "take")


def main() -> None:
    """Print a table."""
    with TemporaryDirectory() as name:
        folder = Path(name)
        reply = _reply(folder)
        print(f"{'command':10}{'empty cache':>24}{'after run':>24}")
        print(f"{'':10}{'wall [s]':>12}{'CPU [s]':>12}{'wall [s]':>12}{'CPU [s]':>12}")
        filled = folder / "filled"
        _timed(["run", str(SCENARIO), "--json"], filled)
        for number, command in enumerate(COMMANDS):
            more = {"compare": [str(SCENARIO)], "take": [str(reply)]}.get(command, [])
            words = [command, str(SCENARIO), *more, "--json"]
            times = [*_timed(words, folder / f"empty-{number}"), *_timed(words, filled)]
            print(f"{command:10}" + "".join(f"{each:12.1f}" for each in times), flush=True)


def _reply(folder: Path) -> Path:
    """The sheet that is sent, with one answer in it."""
    sheet = folder / "reply.xlsx"
    _timed(["ask", str(SCENARIO), "--out", str(sheet), "--quiet"], folder / "asked")
    book = load_workbook(sheet)
    table = book[TABLE_SHEET]
    column = next(cell.column for cell in table[5] if str(cell.value).startswith("Your tolerance, "))
    assert column is not None
    table.cell(6, column, "15 um")
    book.save(sheet)
    return sheet


def _timed(words: list[str], cache: Path) -> tuple[float, float]:
    """Wall and processor seconds of a command, one thread of linear algebra each process."""
    before, start = resource.getrusage(resource.RUSAGE_CHILDREN), time.perf_counter()
    subprocess.run([sys.executable, "-m", "tolerance", *words], check=True, stdout=subprocess.DEVNULL,
                   env={**os.environ, FOLDER_VARIABLE: str(cache), "OMP_NUM_THREADS": "1"})
    after = resource.getrusage(resource.RUSAGE_CHILDREN)
    return time.perf_counter() - start, sum(getattr(after, each) - getattr(before, each)
                                            for each in ("ru_utime", "ru_stime"))


if __name__ == "__main__":
    main()
