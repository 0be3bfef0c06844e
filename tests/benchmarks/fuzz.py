"""Random input guided by coverage: `python -m tests.benchmarks.fuzz --minutes 10`, with `pip install atheris`.

Each reader of `tests/fuzzing.py` gets bytes for an equal share of the time; what reaches code not reached before is
kept and changed further. What breaks a reader, takes more than 5 s or more than 1 GB is left in the folder and ends its
share.
"""

from __future__ import annotations

import argparse
import json
import resource
import subprocess
import sys
import tempfile
import time
from collections import Counter
from pathlib import Path

import atheris

with atheris.instrument_imports(include=["tolerance", "tomllib", "openpyxl.worksheet", "openpyxl.reader"]):
    from tests import fuzzing

SLOWEST = 5  # seconds of wall time; on a machine that does other work tell more with --slowest
MOST_MEMORY = 1024  # MB
NOTED_EVERY = 50


class Tally:
    """What one reader has tried, noted in a file now and then: the engine ends without returning."""

    def __init__(self, reader: str, folder: Path, note: Path) -> None:
        self.reader, self.folder, self.note = reader, folder, note
        self.outcomes: Counter[str] = Counter()
        self.slowest = 0.0

    def try_one(self, data: bytes) -> None:
        start = time.process_time()
        outcome = fuzzing.feed(self.reader, data, self.folder)
        self.slowest = max(self.slowest, time.process_time() - start)
        self.outcomes[outcome] += 1
        if self.outcomes.total() % NOTED_EVERY == 0:
            memory = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss // 1024
            self.note.write_text(json.dumps({**self.outcomes, "slowest": round(self.slowest, 2), "memory": memory,
                                             "seconds": round(time.process_time())}), encoding="ascii")


def fuzz(reader: str, folder: Path, seconds: float, slowest: int) -> None:
    """Run the engine on one reader, from the seeds for it."""
    corpus, work = folder / f"{reader}-corpus", folder / f"{reader}-work"
    for each in (corpus, work):
        each.mkdir(parents=True, exist_ok=True)
    found = [content for kind, content in fuzzing.seeds(work) if kind == reader]
    for number, content in enumerate(found):
        (corpus / f"seed-{number}").write_bytes(content)
    texts = (content.decode("latin-1").split() for content in found)
    words = sorted({word for text in texts for word in text if 2 < len(word) < 20 and word.isascii()
                    and word.isprintable()})
    quoted = (word.replace("\\", "\\\\").replace('"', '\\"') for word in words)
    (folder / "words").write_text('"P1 um"\n' + "".join(f'"{word}"\n' for word in quoted), encoding="ascii")
    tally = Tally(reader, work, folder / f"{reader}.json")
    atheris.Setup([sys.argv[0], str(corpus), f"-max_total_time={int(seconds)}", "-max_len=20000",
                   f"-timeout={slowest}", f"-rss_limit_mb={MOST_MEMORY}", f"-dict={folder / 'words'}",
                   f"-artifact_prefix={folder}/{reader}-", "-verbosity=0"], tally.try_one)
    atheris.Fuzz()


def main() -> None:
    """Give each reader its share of the time, in a process of its own, and tell what came of it."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--minutes", type=float, default=10.0)
    parser.add_argument("--slowest", type=int, default=SLOWEST)
    parser.add_argument("--folder", type=Path, default=None, help="where found inputs are kept; default a new one")
    parser.add_argument("--reader", choices=fuzzing.READERS, help="this one alone, here")
    options = parser.parse_args()
    folder = options.folder or Path(tempfile.mkdtemp(prefix="fuzz-"))
    if options.reader:
        fuzz(options.reader, folder, 60.0 * options.minutes, options.slowest)
    share = options.minutes / len(fuzzing.READERS)
    total: Counter[str] = Counter()
    for reader in fuzzing.READERS:
        words = ["--reader", reader, "--minutes", str(share), "--folder", str(folder),
                 "--slowest", str(options.slowest)]
        done = subprocess.run([sys.executable, "-m", "tests.benchmarks.fuzz", *words], capture_output=True, text=True,
                              check=False)
        note = folder / f"{reader}.json"
        noted = json.loads(note.read_text(encoding="ascii")) if note.exists() else {}
        total.update({key: noted.get(key, 0) for key in (fuzzing.ACCEPTED, fuzzing.REFUSED, "seconds")})
        ended = "" if done.returncode == 0 else f" BROKEN, see {folder}\n{done.stderr[-2000:]}"
        print(f"{reader}: {noted}{ended}", flush=True)
    tried = total[fuzzing.ACCEPTED] + total[fuzzing.REFUSED]
    print(f"{tried:,} inputs tried, {total[fuzzing.ACCEPTED]:,} accepted, in {total['seconds']} s of CPU")


if __name__ == "__main__":
    main()
