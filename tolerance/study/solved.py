"""Sections that were solved before, in a cache: keyed by everything that enters their solution.

That is the section with every number and every choice in it, the solver plan with its settings, the mode, the
frequency, and what solves: the source of the solver, the libraries under it and the processor they were chosen for.
What comes out of the cache is bit for bit what the solver would give.
"""

from __future__ import annotations

import hashlib
import os
import platform
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, fields, is_dataclass
from importlib.metadata import version
from importlib.resources import files
from pathlib import Path
from typing import TYPE_CHECKING, Protocol

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.cache import Cache

if TYPE_CHECKING:
    from importlib.resources.abc import Traversable

FOLDER_VARIABLE = "TOLERANCE_CACHE"  # of the environment: the folder; set to nothing: no cache
SOLVING = ("sections", "solver")  # the rooms whose source decides what a solution is
LIBRARIES = ("numpy", "scipy")


@dataclass(frozen=True, slots=True)
class SolvedCache:
    """Where solved sections are kept. solver : digest of all that solves."""

    cache: Cache
    solver: str

    def for_line(self) -> SolvedLine:
        """The same for one line, which counts what it takes from there."""
        return SolvedLine(self)


@dataclass(slots=True)
class SolvedLine:
    """A line's solved sections. reused : how many were taken from the cache, each batch counted once."""

    kept: SolvedCache
    reused: int = 0
    _known: set[str] = field(default_factory=set)

    def arrays(
        self, question: str, entering: tuple[object, ...], solve: Callable[[], tuple[FloatArray, ...]], *,
        sections: int,
    ) -> tuple[FloatArray, ...]:
        """What `solve` gives, from the cache where it is there. Their last axis has `sections` places.

        question : what is asked of the solver.  entering : everything else that the answer depends on.
        """
        key = key_of((self.kept.solver, question, *entering))
        found = self.kept.cache.read(key)
        if found is not None and all(array.ndim and array.shape[-1] == sections for array in found):
            self.reused += 0 if key in self._known else sections
        else:
            found = solve()
            self.kept.cache.write(key, found)
        self._known.add(key)
        return found


def user_cache(*, fresh: bool = False) -> SolvedCache | None:
    """The cache of the command line: in the user's cache folder, or where TOLERANCE_CACHE says.

    fresh : what is there is not read, and made anew.  None where TOLERANCE_CACHE is set to nothing, or where this user
    has no folder for such things.
    """
    named = os.environ.get(FOLDER_VARIABLE)
    if named is None:
        from platformdirs import user_cache_path

        folder = user_cache_path("tolerance", appauthor=False) / "solved-sections"
        if not folder.is_absolute():  # a user without a home
            return None
    elif named:
        folder = Path(named)
    else:
        return None
    return solved_in(folder, fresh=fresh)


def solved_in(folder: Path, *, fresh: bool = False) -> SolvedCache:
    """A cache in a folder of one's own."""
    return SolvedCache(Cache(folder, fresh=fresh), solver_digest())


def solver_digest() -> str:
    """Changes with the source of the solver, the libraries under it, and the processor they were chosen for."""
    from threadpoolctl import threadpool_info

    digest = hashlib.sha256()
    for room in SOLVING:
        for file in sorted(files(f"tolerance.{room}").iterdir(), key=_name):
            if file.name.endswith(".py"):
                _feed(digest, (file.name, hashlib.sha256(file.read_bytes()).hexdigest()))
    _feed(digest, tuple(f"{library} {version(library)}" for library in LIBRARIES))
    processors = {str(library.get("architecture")) for library in threadpool_info()
                  if library.get("user_api") == "blas"}
    _feed(digest, (platform.system(), platform.machine(), *sorted(processors)))
    return digest.hexdigest()


def key_of(entering: object) -> str:
    """A key of everything in a value: numbers, texts, arrays, sequences, mappings, and data classes of them.

    Raises TypeError for anything else, so that nothing is passed over.
    """
    digest = hashlib.sha256()
    _feed(digest, entering)
    return digest.hexdigest()[:48]


class _Digest(Protocol):
    def update(self, data: bytes, /) -> None: ...


def _feed(digest: _Digest, value: object) -> None:
    if isinstance(value, np.ndarray):
        digest.update(f"array {value.dtype.str} {value.shape}:".encode())
        digest.update(np.ascontiguousarray(value).tobytes())
    elif value is None or isinstance(value, (str, bool, int, float, np.number)):
        text = f"{type(value).__name__} {value!r}"
        digest.update(f"{len(text)} {text};".encode())
    elif isinstance(value, Mapping):
        digest.update(f"mapping {len(value)}:".encode())
        for key in sorted(value, key=repr):
            _feed(digest, (key, value[key]))
    elif isinstance(value, (tuple, list)):
        digest.update(f"sequence {len(value)}:".encode())
        for item in value:
            _feed(digest, item)
    elif is_dataclass(value) and not isinstance(value, type):
        digest.update(f"{type(value).__name__}:".encode())
        for part in fields(value):
            _feed(digest, (part.name, getattr(value, part.name)))
    else:
        raise TypeError(f"{type(value).__name__}: cannot be part of a key")


def _name(file: Traversable) -> str:
    return file.name
