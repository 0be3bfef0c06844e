"""The files that a scenario is made of: its own, those it extends, and the tables that it names."""

from __future__ import annotations

import os
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

from tolerance.errors import InputError
from tolerance.scenario.reading import read_document

_WITH_FILES = ("variations", "sweep")


@dataclass(frozen=True, slots=True)
class EnteredFile:
    """A file with its path from the folder of the scenario; the scenario itself comes first."""

    name: str
    path: Path
    content: bytes


def entered_files(path: Path, *, allow: Iterable[Path] = ()) -> tuple[EnteredFile, ...]:
    """Every file that `load` has just read. Raises InputError where one cannot be read any more."""
    document, _ = read_document(path, allow=allow)
    tables = [entry.places["file"].folder / str(entry.values["file"])
              for table in _WITH_FILES for entry in document.entries.get(table, ()) if "file" in entry.values]
    return tuple(_entered(one, path.parent) for one in dict.fromkeys([*document.files, *tables]))


def _entered(path: Path, folder: Path) -> EnteredFile:
    try:
        content = path.read_bytes()
    except OSError as problem:
        raise InputError(f"{path}: cannot be read: {problem.strerror or problem}") from None
    try:
        name = Path(os.path.relpath(path, folder)).as_posix()
    except ValueError:  # another drive
        name = path.as_posix()
    return EnteredFile(name, path, content)
