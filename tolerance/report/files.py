"""Files of a report: names made from names that a user gave, and files that appear whole or not at all."""

from __future__ import annotations

import glob
import hashlib
import io
import json
import os
import platform
from collections.abc import Callable, Iterable, Sequence
from contextlib import suppress
from pathlib import Path
from typing import TYPE_CHECKING

from tolerance.errors import UnfinishedError

if TYPE_CHECKING:
    from openpyxl import Workbook

LONGEST = 60
NOTE = ".tolerance-files.json"  # beside the files: what was written there
PART = ".part"  # how the name of a file that is being written ends
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
    beside = path.with_name(f".{path.name}.{platform.node()}-{os.getpid()}{PART}")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        _remove_dead(path.parent.glob(f".{glob.escape(path.name)}.*{PART}"))
        try:
            write(beside)
            os.replace(beside, path)
        finally:
            beside.unlink(missing_ok=True)
    except OSError as problem:
        raise UnfinishedError(f"could not write {path}: {problem.strerror or problem}") from problem
    return path


def put_workbook_in_place(path: Path, book: Workbook) -> Path:
    """As `put_in_place`. The workbook is packed in memory: an archive that cannot be finished complains later on."""
    content = io.BytesIO()
    try:
        book.save(content)
    except OSError as problem:  # its sheets go through temporary files
        raise UnfinishedError(f"could not write {path}: {problem.strerror or problem}") from problem
    return put_in_place(path, lambda beside: beside.write_bytes(content.getvalue()))


def remove_left_over(folder: Path) -> None:
    """Remove what processes of this machine that are gone left half-written in the folder."""
    _remove_dead(folder.glob(f".*{PART}"))


def _remove_dead(parts: Iterable[Path]) -> None:
    with suppress(OSError):
        for part in parts:
            host, _, process = part.name.removesuffix(PART).rpartition(".")[2].rpartition("-")
            if host == platform.node().rpartition(".")[2] and process.isdigit() and not _lives(int(process)):
                part.unlink(missing_ok=True)


def _lives(process: int) -> bool:
    """Whether a process of this machine lives; where that cannot be asked without harm, it does."""
    if os.name == "nt":
        return True
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    except (OSError, OverflowError):
        return True
    return True


def remove_earlier(folder: Path, written: Sequence[Path], *, job: str) -> None:
    """Note the files that `job` has just written to `folder`, and remove those that it wrote before and no longer does.

    Only what stands in the note of an earlier time is touched, and only where its content is still what was written
    then: a file that somebody made, changed or put in its place stays. Raises UnfinishedError.
    """
    note = folder / NOTE
    notes = _notes_in(note)
    now = {path.name: _digest(path) for path in written}
    for name, digest in notes.get(job, {}).items():
        path = folder / name
        with suppress(OSError):  # open elsewhere, or no right: it stays
            if name not in now and Path(name).name == name and path.is_file() and _digest(path) == digest:
                path.unlink()
    text = json.dumps({**notes, job: now}, indent=1)
    put_in_place(note, lambda beside: beside.write_text(text, encoding="utf-8"))


def _notes_in(note: Path) -> dict[str, dict[str, str]]:
    """Digests of written files by job and name; none where there is no note or it is not ours."""
    try:
        found = json.loads(note.read_text(encoding="utf-8"))
        return {str(job): {str(name): str(digest) for name, digest in files.items()} for job, files in found.items()}
    except (OSError, ValueError, AttributeError):
        return {}


def _digest(path: Path) -> str:
    return hashlib.sha256(path.read_bytes()).hexdigest()


def _safe(name: str) -> str:
    words = "".join(sign if sign.isalnum() else " " for sign in name).split()
    stem = "-".join(words)[:LONGEST].strip("-")
    return f"{stem}-line" if stem.casefold() in RESERVED else stem
