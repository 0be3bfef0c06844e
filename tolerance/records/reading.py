"""A record read from a folder that may come from anybody: data, checked whole, its files laid out in our own place."""

from __future__ import annotations

import base64
import binascii
import json
import zlib
from pathlib import Path, PurePosixPath, PureWindowsPath
from typing import Annotated, Any

from pydantic import BaseModel, ConfigDict, Field, ValidationError

from tolerance.errors import InputError, on_one_line
from tolerance.records.record import NAME, RECORD, digest_of
from tolerance.scenario.tables import LARGEST_COUPONS

LARGEST_RECORD = 100_000_000  # bytes
LARGEST_FILE = 25_000_000  # bytes, unpacked
LARGEST_TOTAL = 100_000_000
MOST_FILES = 200
DEEPEST = 20  # folders above the scenario's

_TEXT = Annotated[str, Field(max_length=2_000)]
_DIGEST = Annotated[str, Field(pattern="^[0-9a-f]{64}$")]
_COUNT = Annotated[int, Field(ge=0)]
_STRICT = ConfigDict(frozen=True, extra="forbid", strict=True)


class RecordedFile(BaseModel):
    """A file that entered. name : its path from the folder of the scenario.  path : where it stood."""

    model_config = _STRICT

    name: _TEXT
    path: _TEXT
    bytes: Annotated[int, Field(ge=0, le=LARGEST_FILE)]
    sha256: _DIGEST
    zlib_base64: str | None


class RunRecord(BaseModel):
    """A record as written; `result` is for comparison only."""

    model_config = _STRICT

    record: int
    title: _TEXT
    seed: _COUNT
    coupons: Annotated[int, Field(ge=1, le=LARGEST_COUPONS)]
    direct: Annotated[int, Field(ge=0, le=LARGEST_COUPONS)]
    fingerprint: _DIGEST
    files: Annotated[list[RecordedFile], Field(min_length=1, max_length=MOST_FILES)]
    made_with: Annotated[dict[_TEXT, _TEXT], Field(max_length=100)]
    result_digest: _DIGEST
    result: dict[str, Any]


def read_record(path: Path) -> RunRecord:
    """The record in a folder, or in a file. Raises InputError saying what is wrong with it."""
    place = path / NAME if path.is_dir() else path
    try:
        if not place.is_file():
            raise InputError(f"{path}: holds no {NAME}; `tolerance run` "
                             "writes one (a sweep goes on with its own command)")
        if place.stat().st_size > LARGEST_RECORD:
            raise InputError(f"{place}: is larger than {LARGEST_RECORD // 1_000_000} MB; no run record is")
        content = json.loads(place.read_bytes())
    except OSError as problem:
        raise InputError(f"{place}: cannot be read: {problem.strerror or problem}") from None
    except (ValueError, RecursionError):
        raise InputError(f"{place}: is no run record: not JSON") from None
    version = content.get("record") if isinstance(content, dict) else None
    if isinstance(version, int) and not isinstance(version, bool) and version > RECORD:
        raise InputError(f"{place}: is record {version}, of a later version of this program; this one reads {RECORD}")
    try:
        found = RunRecord.model_validate(content)
    except ValidationError as problems:
        first = problems.errors()[0]
        where = ".".join(str(part) for part in first["loc"]) or "it"
        raise InputError(on_one_line(f"{place}: is no run record: {where}: {first['msg']}")) from None
    if found.record != RECORD:
        raise InputError(f"{place}: is no run record: record must be {RECORD}")
    return found


def lay_out(record: RunRecord, folder: Path) -> Path:
    """Lay the files of the record out under `folder` as they stood to each other; where the scenario is now.

    A file that the record does not hold is taken from where it stood, if it is the same. Raises InputError.
    """
    if sum(one.bytes for one in record.files) > LARGEST_TOTAL:
        raise InputError(f"the files of the run record are larger than {LARGEST_TOTAL // 1_000_000} MB together")
    above = max(_above(one.name) for one in record.files)
    home = folder.joinpath(*["above"] * above)
    for one in record.files:
        place = home / one.name
        place.parent.mkdir(parents=True, exist_ok=True)
        place.write_bytes(_content(one))
    return home / record.files[0].name


def _above(name: str) -> int:
    """How many folders above the scenario's a file stands. Raises InputError for a name that leads elsewhere."""
    parts = PurePosixPath(name).parts
    ups = [part == ".." for part in parts]
    count = sum(ups)
    windows = PureWindowsPath(name)
    if (not parts or parts[0] == "/" or windows.drive or windows.root or "\\" in name or "\0" in name or all(ups)
            or count > DEEPEST or any(ups[count:])):
        raise InputError(on_one_line(f"the run record names a file in a way that none is written: {name[:80]}"))
    return count


def _content(one: RecordedFile) -> bytes:
    if one.zlib_base64 is None:
        return _from_its_place(one)
    try:
        unpacking = zlib.decompressobj()
        content = unpacking.decompress(base64.b64decode(one.zlib_base64, validate=True), one.bytes + 1)
    except (binascii.Error, zlib.error, ValueError):
        content = b""
    if len(content) != one.bytes or digest_of(content) != one.sha256:
        raise InputError(on_one_line(f"the run record is damaged: {one.name} is not what its digest says"))
    return content


def _from_its_place(one: RecordedFile) -> bytes:
    content = same_file(one)
    if content is None:
        raise InputError(on_one_line(f"{one.name} was too large for the run record and is not at {one.path} as it was"))
    return content


def same_file(one: RecordedFile) -> bytes | None:
    """What stands where the file stood, if it is the same to the bit; None otherwise."""
    path = Path(one.path)
    try:
        if not path.is_file() or path.stat().st_size != one.bytes:
            return None
        content = path.read_bytes()
    except (OSError, ValueError):
        return None
    return content if digest_of(content) == one.sha256 else None
