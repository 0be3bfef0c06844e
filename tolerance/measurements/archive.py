"""Opening a workbook that came from outside: it is data, looked at before any library reads it.

Refused: what is no XLSX, macros, links to other files, embedded objects, XML with a document type (and so with
entities), and archives or sheets that would unpack to more than they could honestly hold.
"""

from __future__ import annotations

import io
import re
import zipfile
import zlib
from dataclasses import dataclass
from pathlib import Path
from xml.parsers import expat

from tolerance.errors import InputError

MOST_MEMBERS = 500
LARGEST_PART = 3_000_000  # bytes of one XML part, unpacked, that is neither a sheet nor the texts of all cells
DEEPEST = 100  # elements inside each other
MOST_TEXTS = 200_000  # different texts of all cells
OLD_OR_LOCKED = b"\xd0\xcf\x11\xe0"  # how an older workbook, or one with a password, begins
_FORBIDDEN = {
    "vbaproject": "holds macros", "xl/macrosheets": "holds macros", "xl/externallinks": "has links to other files",
    "xl/embeddings": "has other files embedded", "xl/activex": "has controls embedded",
    "xl/connections": "has connections to data elsewhere", "xl/querytables": "has connections to data elsewhere",
    "xl/webextensions": "has programs embedded", "customui/": "has programs embedded",
}
_FORMULA = re.compile(rb"<(\w+:)?f[\s>/]")
_NO_WORKBOOK = "is not an XLSX workbook"


@dataclass(frozen=True, slots=True)
class Room:
    """What a workbook may hold at most: bytes packed, in one part and in all; rows, columns, filled cells of a sheet.

    extent : the widths of all rows together, because a reader makes the cells that are left out.
    """

    what: str
    packed: int
    part: int
    total: int
    rows: int
    columns: int
    cells: int
    extent: int


FILLED_SHEET = Room("filled sheet does", packed=5_000_000, part=20_000_000, total=50_000_000, rows=1_048_576,
                    columns=16_384, cells=100_000, extent=4_000_000)
TABLE = Room("table of readings does: save a larger one as CSV", packed=20_000_000, part=60_000_000, total=100_000_000,
             rows=200_000, columns=1_000, cells=250_000, extent=2_000_000)


def safe_content(path: Path, room: Room = FILLED_SHEET) -> io.BytesIO:
    """The bytes of an XLSX file that is safe to read. Raises InputError, saying why it is not."""
    try:
        if not path.is_file():
            raise InputError(f"{path}: {'is a folder' if path.is_dir() else 'there is no such file'}")
        if path.stat().st_size > room.packed:
            raise InputError(f"{path}: is larger than {room.packed // 1_000_000} MB; no {room.what}")
        content = path.read_bytes()
    except OSError as problem:
        raise InputError(f"{path}: cannot be read: {problem.strerror or problem}") from None
    reason = why_not(content, room)
    if reason:
        raise InputError(f"{path}: {reason}")
    return io.BytesIO(content)


def why_not(content: bytes, room: Room) -> str:
    """Why these bytes are no workbook that is safe to read; "" where they are one."""
    if not content:
        return "is empty"
    if content.startswith(OLD_OR_LOCKED):
        return "is an older workbook or has a password: save it as XLSX without one"
    try:
        with zipfile.ZipFile(io.BytesIO(content)) as archive:
            return _why_not_archive(archive, room)
    except (zipfile.BadZipFile, zipfile.LargeZipFile, zlib.error, NotImplementedError, RuntimeError, EOFError,
            ValueError, OSError):
        return f"{_NO_WORKBOOK}, or is damaged"


def has_formulas(content: bytes) -> bool:
    """Whether a workbook that is safe to read holds formulas."""
    with zipfile.ZipFile(io.BytesIO(content)) as archive:
        return any(_FORMULA.search(archive.read(name)) for name in archive.namelist()
                   if name.casefold().startswith("xl/worksheets/"))


def _why_not_archive(archive: zipfile.ZipFile, room: Room) -> str:
    members = archive.infolist()
    sizes = [member.file_size for member in members]
    if len(members) > MOST_MEMBERS or max(sizes, default=0) > room.part or sum(sizes) > room.total:
        return f"unpacks to more than {room.total // 1_000_000} MB or {MOST_MEMBERS} parts: no {room.what}"
    names = {member.filename.casefold() for member in members}
    if len(names) < len(members):
        return "holds a part twice, which no spreadsheet program writes, and is refused"
    if "[content_types].xml" not in names or not any(name.startswith("xl/workbook") for name in names):
        return _NO_WORKBOOK
    for part, reason in _FORBIDDEN.items():
        if any(part in name for name in names):
            return f"{reason}, which is refused: save the sheet as a plain XLSX workbook"
    for member in members:
        name = member.filename.casefold()
        if name.endswith((".xml", ".rels")):
            reason = _why_not_part(name, archive.read(member), room)
            if reason:
                return reason
    return ""


def _why_not_part(name: str, text: bytes, room: Room) -> str:
    if name == "[content_types].xml" and b"macroEnabled" in text:
        return "holds macros, which is refused: save the sheet as a plain XLSX workbook"
    large = name.startswith("xl/worksheets/sheet") or name == "xl/sharedstrings.xml"
    if len(text) > LARGEST_PART and not large:
        return f"holds a part of more than {LARGEST_PART // 1_000_000} MB that is no sheet, and is refused"
    return _Part(room).why_not(text)


class _PartError(Exception):
    """Ends the parsing of a part; the text says why."""


class _Part:
    """One XML part while it is looked through: no document type, no entities, and no more cells than there is room."""

    def __init__(self, room: Room) -> None:
        self.room = room
        self.depth = self.cells = self.texts = self.extent = 0
        self.row = self.column = 0

    def why_not(self, text: bytes) -> str:
        parser = expat.ParserCreate()
        parser.StartDoctypeDeclHandler = self._doctype
        parser.StartElementHandler = self._begin
        parser.EndElementHandler = self._end
        try:
            parser.Parse(text, True)
        except _PartError as reason:
            return str(reason)
        except (expat.ExpatError, ValueError, LookupError):
            return "holds XML that is damaged, and cannot be read"
        return ""

    @staticmethod
    def _doctype(*_: object) -> None:
        raise _PartError("holds XML that no spreadsheet program writes, and is refused")

    def _begin(self, name: str, attributes: dict[str, str]) -> None:
        self.depth += 1
        if self.depth > DEEPEST:
            raise _PartError("holds XML that no spreadsheet program writes, and is refused")
        kind = name.rpartition(":")[2]
        if kind == "row":
            self.row, self.column = _number(attributes.get("r"), self.row + 1), 0
        elif kind == "c":
            self.cells += 1
            before, self.column = self.column, _column(attributes.get("r"), self.column + 1)
            self.extent += max(self.column - before, 0)
        elif kind == "si":
            self.texts += 1
        room = self.room
        if self.row > room.rows or self.column > room.columns or self.cells > room.cells or self.extent > room.extent \
                or self.texts > MOST_TEXTS:
            raise _PartError(f"has a sheet of more than {room.rows} rows, {room.columns} columns or {room.cells} "
                               f"filled cells: no {room.what}")

    def _end(self, _: str) -> None:
        self.depth -= 1


def _number(given: str | None, otherwise: int) -> int:
    return int(given) if given is not None and given.isdecimal() and len(given) < 9 else otherwise


def _column(address: str | None, otherwise: int) -> int:
    """The column, counted from 1, of an address such as "AB12"."""
    if address is None:
        return otherwise
    column = 0
    for letter in address[:9]:
        if not ("A" <= letter <= "Z"):
            break
        column = 26 * column + ord(letter) - ord("A") + 1
    return column or otherwise
