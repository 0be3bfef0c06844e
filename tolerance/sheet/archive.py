"""Opening a workbook that came from outside: it is data, looked at before any library reads it.

Refused: what is no XLSX, macros, links to other files, embedded objects, XML with entities, and archives that unpack
to more than a filled sheet could hold.
"""

from __future__ import annotations

import io
import zipfile
import zlib
from pathlib import Path

from tolerance.errors import InputError

LARGEST_FILE = 5_000_000  # bytes, packed
LARGEST_MEMBER, LARGEST_TOTAL = 20_000_000, 50_000_000  # bytes, unpacked
MOST_MEMBERS = 500
OLD_OR_LOCKED = b"\xd0\xcf\x11\xe0"  # how an older workbook, or one with a password, begins
_FORBIDDEN = {
    "vbaproject": "holds macros", "xl/macrosheets": "holds macros", "xl/externallinks": "has links to other files",
    "xl/embeddings": "has other files embedded", "xl/activex": "has controls embedded",
    "xl/connections": "has connections to data elsewhere", "xl/querytables": "has connections to data elsewhere",
}


def safe_content(path: Path) -> io.BytesIO:
    """The bytes of an XLSX file that is safe to read. Raises InputError, saying why it is not."""
    try:
        if not path.is_file():
            raise InputError(f"{path}: {'is a folder' if path.is_dir() else 'there is no such file'}")
        if path.stat().st_size > LARGEST_FILE:
            raise InputError(f"{path}: is larger than {LARGEST_FILE // 1_000_000} MB; a filled sheet is far smaller")
        content = path.read_bytes()
    except OSError as problem:
        raise InputError(f"{path}: cannot be read: {problem.strerror or problem}") from None
    reason = _why_not(content)
    if reason:
        raise InputError(f"{path}: {reason}")
    return io.BytesIO(content)


def _why_not(content: bytes) -> str:
    if content.startswith(OLD_OR_LOCKED):
        return "is an older workbook or has a password: save it as XLSX without one"
    try:
        with zipfile.ZipFile(io.BytesIO(content)) as archive:
            return _why_not_archive(archive)
    except (zipfile.BadZipFile, zipfile.LargeZipFile, zlib.error, NotImplementedError, RuntimeError, EOFError,
            ValueError, OSError):
        return "is not an XLSX workbook, or is damaged"


def _why_not_archive(archive: zipfile.ZipFile) -> str:
    members = archive.infolist()
    sizes = [member.file_size for member in members]
    if len(members) > MOST_MEMBERS or max(sizes, default=0) > LARGEST_MEMBER or sum(sizes) > LARGEST_TOTAL:
        return f"unpacks to more than {LARGEST_TOTAL // 1_000_000} MB or {MOST_MEMBERS} parts: no filled sheet does"
    names = {member.filename.casefold() for member in members}
    if "[content_types].xml" not in names or not any(name.startswith("xl/workbook") for name in names):
        return "is not an XLSX workbook"
    for part, reason in _FORBIDDEN.items():
        if any(part in name for name in names):
            return f"{reason}, which is refused: save the sheet as a plain XLSX workbook"
    for member in members:
        text = archive.read(member) if member.filename.casefold().endswith((".xml", ".rels")) else b""
        if b"<!DOCTYPE" in text or b"<!ENTITY" in text or text.startswith((b"\xff\xfe", b"\xfe\xff")):
            return "holds XML that no spreadsheet program writes, and is refused"
        if member.filename.casefold() == "[content_types].xml" and b"macroEnabled" in text:
            return "holds macros, which is refused: save the sheet as a plain XLSX workbook"
    return ""
