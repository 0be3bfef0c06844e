"""Arrays kept from one command to the next in a folder of the user's: plain numbers under a key, and no code.

Every entry is a file of its own that appears whole or not at all, so that processes may read and write at once. It
holds a checksum of its key and its numbers: an entry that is damaged, or stands under another key, is removed and
counts as absent. Where the folder cannot be written nothing is kept, and nothing goes wrong.
"""

from __future__ import annotations

import hashlib
import json
import math
import os
import time
from collections.abc import Sequence
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path
from tempfile import NamedTemporaryFile

import numpy as np

from tolerance.arrays import FloatArray

ENDING, UNFINISHED = ".arrays", ".part"
BEGINNING = b"tolerance arrays 1\n"
DIGEST_BYTES = 32
MOST_BYTES = 64 * 2**20  # of one entry: a larger file is none of ours

MOST_ENTRIES = 16384  # beyond it the oldest are dropped: some 64 MB as a disk counts small files
KEPT = 0.75  # of them that stay then
TRIMMED_AT = "00"  # keys that begin so look whether there are too many: one in 256
STALE = 3600.0  # seconds after which an unfinished file is nobody's


@dataclass(frozen=True, slots=True)
class Cache:
    """A folder of entries.

    fresh : what is there is not read, and made anew.  most : entries, beyond which the oldest are dropped.
    """

    folder: Path
    fresh: bool = False
    most: int = MOST_ENTRIES

    def read(self, key: str) -> tuple[FloatArray, ...] | None:
        """The arrays kept under `key`; None where there are none, or no whole ones."""
        if self.fresh:
            return None
        path = self._path(key)
        try:
            content = path.read_bytes() if path.stat().st_size <= MOST_BYTES else b""
        except OSError:
            return None
        found = _arrays(content, key)
        with suppress(OSError):
            if found is None:
                path.unlink()
            else:
                os.utime(path)  # what is used is not old
        return found

    def write(self, key: str, arrays: Sequence[FloatArray]) -> None:
        """Keep the arrays under `key`, if that can be done."""
        with suppress(OSError):
            self.folder.mkdir(mode=0o700, parents=True, exist_ok=True)
            beside = None
            try:
                with NamedTemporaryFile(dir=self.folder, suffix=UNFINISHED, delete=False) as file:
                    beside = Path(file.name)
                    file.write(_content(key, arrays))
                os.replace(beside, self._path(key))
            finally:
                if beside is not None:
                    beside.unlink(missing_ok=True)
            if key.startswith(TRIMMED_AT):
                self.trim()

    def trim(self) -> None:
        """Drop the oldest entries where there are too many, and what an interrupted command left."""
        ages: list[tuple[float, Path]] = []
        with suppress(OSError):
            for item in os.scandir(self.folder):
                with suppress(OSError):  # somebody else was faster
                    changed = item.stat().st_mtime
                    if item.name.endswith(ENDING):
                        ages.append((changed, Path(item.path)))
                    elif item.name.endswith(UNFINISHED) and time.time() - changed > STALE:
                        os.unlink(item.path)
        if len(ages) <= self.most:
            return
        ages.sort()
        for _, path in ages[: len(ages) - math.floor(KEPT * self.most)]:
            with suppress(OSError):
                path.unlink()

    def is_writable(self) -> bool:
        """Whether entries can be kept here; makes the folder."""
        try:
            self.folder.mkdir(mode=0o700, parents=True, exist_ok=True)
            with NamedTemporaryFile(dir=self.folder, suffix=UNFINISHED):
                return True
        except OSError:
            return False

    def _path(self, key: str) -> Path:
        return self.folder / f"{key}{ENDING}"


def _content(key: str, arrays: Sequence[FloatArray]) -> bytes:
    shapes = json.dumps([list(array.shape) for array in arrays]).encode()
    body = shapes + b"\n" + b"".join(np.ascontiguousarray(array, dtype="<f8").tobytes() for array in arrays)
    return BEGINNING + _digest(key, body) + body


def _arrays(content: bytes, key: str) -> tuple[FloatArray, ...] | None:
    """The arrays in a file's content; None where it is not whole."""
    start = len(BEGINNING) + DIGEST_BYTES
    body = content[start:]
    if content[:start] != BEGINNING + _digest(key, body):
        return None
    shapes, _, numbers = body.partition(b"\n")
    values = np.frombuffer(numbers, dtype="<f8").astype(np.float64)
    result, first = [], 0
    for shape in json.loads(shapes):
        result.append(values[first : first + math.prod(shape)].reshape(shape))
        first += math.prod(shape)
    return tuple(result)


def _digest(key: str, body: bytes) -> bytes:
    return hashlib.sha256(key.encode() + b"\n" + body).digest()
