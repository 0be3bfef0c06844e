"""How a whole run grows: `python -m tests.benchmarks.growth`. Fresh processes, no cache, wall time and memory.

The 10-layer board with 2 to 22 lines (its own, some of them repeated under other names) at its own coupons, and with
its own lines at 2^14 to 2^20 coupons: everything with workbook and figures, and `--json` alone.
"""

from __future__ import annotations

import os
import re
import resource
import subprocess
import sys
import time
from pathlib import Path
from tempfile import TemporaryDirectory

BOARD = Path(__file__).parents[2] / "scenarios" / "weir-module-10-layer.toml"
LINES = (2, 5, 11, 22)
COUPONS = tuple(2**power for power in (14, 16, 18, 20))
REPEATS = 3


def main() -> None:
    """Print both tables."""
    with TemporaryDirectory() as folder:
        for lines in LINES:
            row(f"{lines} lines", with_lines(lines, Path(folder)), ())
        for coupons in COUPONS:
            row(f"{coupons:,} coupons", BOARD, ("--coupons", str(coupons)))


def row(name: str, scenario: Path, options: tuple[str, ...]) -> None:
    """The best of some runs with files, and without."""
    with TemporaryDirectory() as out:
        whole = min(seconds(scenario, (*options, "--out", out)) for _ in range(REPEATS))
    alone = min(seconds(scenario, (*options, "--json")) for _ in range(REPEATS))
    print(f"{name:<20}{whole:8.2f} s with workbook and figures{alone:8.2f} s with --json alone; largest process so far "
          f"{resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024:.0f} MB", flush=True)


def seconds(scenario: Path, options: tuple[str, ...]) -> float:
    """Wall time of one run."""
    start = time.perf_counter()
    subprocess.run([sys.executable, "-m", "tolerance", "run", str(scenario), "--quiet", "--fresh", *options],
                   check=True, stdout=subprocess.DEVNULL, env=os.environ)
    return time.perf_counter() - start


def with_lines(lines: int, folder: Path) -> Path:
    """The board with its first lines, and beyond them the same again under other names."""
    head, *own = BOARD.read_text(encoding="utf-8").split("[[lines]]")
    own[-1], *after = own[-1].partition("\n[")
    text = head
    for number in range(lines):
        entry = own[number % len(own)]
        if number >= len(own):
            entry = re.sub(r'(name\s*=\s*"[^"]*)"', rf'\1, again {number // len(own)}"', entry, count=1)
        text += "[[lines]]" + entry
    path = folder / f"{lines}-lines.toml"
    path.write_text(text + "".join(after), encoding="utf-8")
    return path


if __name__ == "__main__":
    main()
