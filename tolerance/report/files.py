"""Files of a report: names made from names that a user gave, and files that appear whole or not at all."""

from __future__ import annotations

import os
from collections.abc import Callable, Sequence
from pathlib import Path

from tolerance.errors import UnfinishedError

LONGEST = 60
RESERVED = {"con", "prn", "aux", "nul", *(f"{port}{number}" for port in ("com", "lpt") for number in range(10))}


def file_names(names: Sequence[str], *, taken: Sequence[str] = ()) -> list[str]:
    """One file name (without its ending) for each name; none of them `taken`, upper and lower case being the same.

    Letters and digits stay, a run of anything else becomes one hyphen.
    """
    used = {name.casefold() for name in taken}
    unique = []
    for number, name in enumerate(names, start=1):
        stem = _safe(name) or f"line-{number}"
        candidate, repeat = stem, 1
        while candidate.casefold() in used:
            repeat += 1
            candidate = f"{stem}-{repeat}"
        used.add(candidate.casefold())
        unique.append(candidate)
    return unique


def put_in_place(path: Path, write: Callable[[Path], object]) -> Path:
    """Have `write` fill a file beside `path` and move it there; its folder is made if missing. Returns `path`.

    Raises UnfinishedError where that cannot be done (no room, no right, the file open elsewhere).
    """
    beside = path.with_name(f".{path.name}.{os.getpid()}.part")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        try:
            write(beside)
            os.replace(beside, path)
        finally:
            beside.unlink(missing_ok=True)
    except OSError as problem:
        raise UnfinishedError(f"could not write {path}: {problem.strerror or problem}") from problem
    return path


def _safe(name: str) -> str:
    words = "".join(sign if sign.isalnum() else " " for sign in name).split()
    stem = "-".join(words)[:LONGEST].strip("-")
    return f"{stem}-line" if stem.casefold() in RESERVED else stem
