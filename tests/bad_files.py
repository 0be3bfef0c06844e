"""The part of the catalogue of bad input that is no text: files that are no scenario, and files that are no table."""

from __future__ import annotations

import io
import os
import zipfile
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from openpyxl import Workbook

from tests.scenario_texts import BOARD

SHEET = "xl/worksheets/sheet1.xml"
NAMESPACE = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"


@dataclass(frozen=True)
class BadFile:
    """A file that cannot be read, how it is made, and what is told of it."""

    title: str
    make: Callable[[Path], object]
    told: str
    ending: str = "toml"
    is_reply: bool = False  # whether the same is told of it as the reply of a fabricator


def holding(content: bytes | str) -> Callable[[Path], object]:
    """A file of this content."""
    return lambda path: path.write_bytes(content if isinstance(content, bytes) else content.encode())


def nothing(path: Path) -> None:
    """No file at all."""
    assert not path.exists()


def large(path: Path) -> None:
    """A file of 100 MB that takes no room."""
    path.write_bytes(b"#")
    os.truncate(path, 100_000_000)


def circle(path: Path) -> None:
    """A link to itself."""
    path.symlink_to(path.name)


TOO_DEEP = "is not a scenario: its lists or tables are nested too deeply"
BINARY = "must be UTF-8 text: it holds binary data; save it as UTF-8"
NO_TOML = "a scenario is a TOML file, plain text"
TOO_LARGE = "is too large: a scenario, with all it extends, holds at most 500 kB"
MORE_LINES = BOARD + "".join(f'[[lines]]\nname = "line {number}"\n' for number in range(1_001))

FILES = [
    BadFile("no file", nothing, "there is no such file"),
    BadFile("a folder", Path.mkdir, "is a folder; a scenario is a TOML file"),
    BadFile("a pipe", os.mkfifo, "is not a regular file"),
    BadFile("a link to nothing", lambda path: path.symlink_to("nowhere.toml"), "there is no such file"),
    BadFile("100 MB", large, TOO_LARGE),
    BadFile("1 MB of comments", holding("# nothing\n" * 100_000), TOO_LARGE),
    BadFile("a workbook", holding(b"PK\x03\x04\x14\x00\x06\x00"), f"is a workbook or an archive; {NO_TOML}"),
    BadFile("an office document", holding(b"\xd0\xcf\x11\xe0\xa1\xb1"), f"is an office document; {NO_TOML}"),
    BadFile("a PDF", holding(b"%PDF-1.7\n"), f"is a PDF; {NO_TOML}"),
    BadFile("a picture", holding(b"\x89PNG\r\n\x1a\n"), f"is a picture; {NO_TOML}"),
    BadFile("a compressed text", holding(b"\x1f\x8b\x08\x00"), f"is an archive; {NO_TOML}"),
    BadFile("zero bytes", holding(BOARD.encode() + b"\0"), BINARY),
    BadFile("UTF-16", holding(BOARD.encode("utf-16")),
            "must be UTF-8 text: it begins as UTF-16 does; save it as UTF-8"),
    BadFile("UTF-16 without a mark", holding(BOARD.encode("utf-16-le")), BINARY),
    BadFile("UTF-32", holding(BOARD.encode("utf-32-be")), BINARY),
    BadFile("Latin-1", holding(BOARD.replace("Orchard", "Börd").encode("latin-1")),
            "must be UTF-8 text: line 3 holds a byte that is not; save it as UTF-8"),
    BadFile("half a letter", holding(BOARD.encode() + b"# \xc3"),
            f"must be UTF-8 text: line {BOARD.count(chr(10)) + 1} holds a byte that is not; save it as UTF-8"),
    BadFile("a surrogate", holding(b'title = "\xed\xa0\x80"\n'),
            "must be UTF-8 text: line 1 holds a byte that is not; save it as UTF-8"),
    BadFile("carriage returns alone", holding(BOARD.replace("\n", "\r")),
            "has lines that end in a carriage return alone; save it with ordinary line ends"),
    BadFile("a bell in a comment", holding("format = 1 # \a\n"),
            "is not valid TOML: holds a control character (at line 1, column 14)"),
    BadFile("a bell in a text", holding('title = "\a"\n'),
            "is not valid TOML: a text holds a control character; write it as an escape (at line 1, column 10)"),
    BadFile("lists in lists", holding("a = " + "[" * 100_000), TOO_DEEP),
    BadFile("lists in lists, closed", holding("a = " + "[" * 30 + "]" * 30), TOO_DEEP),
    BadFile("tables in tables", holding("a = " + "{ a = " * 30 + "1" + " }" * 30), TOO_DEEP),
    BadFile("a key of many parts", holding("a." * 100_000 + "a = 1"), TOO_DEEP),
    BadFile("a key of many parts in quotes", holding('"a" . ' * 10_000 + "a = 1"), TOO_DEEP),
    BadFile("a header of many parts", holding("[" + "a." * 100_000 + "a]"), TOO_DEEP),
    BadFile("a number of many digits", holding("seed = " + "9" * 5_000),
            "is not valid TOML: a number has too many digits"),
    BadFile("many lines", holding(MORE_LINES), "has 1003 entries of lines; at most 1000 are read"),
    BadFile("many layers", holding("[[layers]]\n" * 301), "has 301 entries of layers; at most 300 are read"),
    BadFile("many keys", holding("[evaluation]\n" + "".join(f"key{number} = 1\n" for number in range(61))),
            "has 61 keys in evaluation; at most 60 are read"),
    BadFile("many patterns", holding("".join(f'[[variations]]\nof = "P{number}*.dk"\n' for number in range(101))),
            "has more than 100 texts with a *: name the properties in full"),
    BadFile("many names", holding("".join(f"[[variations]]\nof = {['x'] * 900}\n" for _ in range(4))),
            'has more than 3000 names in its lists: name properties by patterns, "P*.dk"'),
]


def workbook(**parts: bytes) -> bytes:
    """A sound workbook with a column of readings; `parts` replace or add members, by the names in PARTS."""
    book = Workbook()
    sheet = book.active
    assert sheet is not None
    for value in ("P1 um", 98, 99, 100, 101, 102):
        sheet.append([value])
    plain = io.BytesIO()
    book.save(plain)
    content = io.BytesIO()
    with zipfile.ZipFile(plain) as source, zipfile.ZipFile(content, "w", zipfile.ZIP_DEFLATED) as target:
        members = {name: source.read(name) for name in source.namelist()}
        for name, text in (members | {PARTS[key]: text for key, text in parts.items()}).items():
            target.writestr(name, text)
    return content.getvalue()


PARTS = {
    "sheet": SHEET, "macros": "xl/vbaProject.bin", "links": "xl/externalLinks/externalLink1.xml",
    "embedded": "xl/embeddings/object1.bin", "connections": "xl/connections.xml", "controls": "xl/activeX/activeX1.bin",
    "query": "xl/queryTables/queryTable1.xml", "extra": "xl/extra.xml", "texts": "xl/sharedStrings.xml",
    "content": "[Content_Types].xml", "programs": "xl/webextensions/webextension1.xml",
}


def sheet(rows: bytes) -> bytes:
    """A worksheet of these rows."""
    return f'<worksheet xmlns="{NAMESPACE}"><sheetData>'.encode() + rows + b"</sheetData></worksheet>"


def doubled() -> bytes:
    """A workbook with one part twice: programs differ in which of them they read."""
    content = io.BytesIO(workbook())
    with zipfile.ZipFile(content, "a") as archive:
        archive.writestr(SHEET.upper(), sheet(b""))
    return content.getvalue()


STRANGE = "holds XML that no spreadsheet program writes, and is refused"
DAMAGED = "holds XML that is damaged, and cannot be read"
PLAIN = "which is refused: save the sheet as a plain XLSX workbook"
UNPACKS = "unpacks to more than 100 MB or 500 parts: no table of readings does: save a larger one as CSV"
SPACIOUS = ("has a sheet of more than 200000 rows, 1000 columns or 250000 filled cells: no table of readings does: "
            "save a larger one as CSV")
ENTITIES = (b'<!DOCTYPE a [<!ENTITY a "ha"><!ENTITY b "&a;&a;&a;&a;"><!ENTITY c "&b;&b;&b;&b;">]>'
            + sheet(b'<row r="1"><c r="A1" t="inlineStr"><is><t>&c;</t></is></c></row>'))
OUTSIDE = (b'<!DOCTYPE a [<!ENTITY a SYSTEM "file:///etc/passwd">]>'
           + sheet(b'<row r="1"><c r="A1" t="inlineStr"><is><t>&a;</t></is></c></row>'))

TABLES = [
    BadFile("CSV: no file", nothing, "there is no such file", "csv"),
    BadFile("CSV: a folder", Path.mkdir, "is a folder; a table is a CSV or XLSX file", "csv"),
    BadFile("CSV: empty", holding(""), "is empty; it needs a row of headings and readings below it", "csv"),
    BadFile("CSV: blanks", holding("\n ,\n;;\n"), "is empty; it needs a row of headings and readings below it", "csv"),
    BadFile("CSV: 100 MB", large, "is larger than 20 MB", "csv"),
    BadFile("CSV: a workbook", holding(workbook()), "is a workbook, whose name must end in .xlsx, or no table at all",
            "csv"),
    BadFile("CSV: UTF-16", holding("P1 um\n98\n".encode("utf-16")),
            "must be UTF-8 text: it begins as UTF-16 does; save it as CSV UTF-8", "csv"),
    BadFile("CSV: Latin-1", holding("P1 µm\n98\n".encode("latin-1")),
            "must be UTF-8 text: line 1 holds a byte that is not; save it as CSV UTF-8", "csv"),
    BadFile("CSV: zero bytes", holding(b"P1 um\n98\n\0\n"), "must be text; it holds binary data", "csv"),
    BadFile("CSV: a quote not closed", holding('P1 um,n\n"98,1\n99,2\n'), "line 3: a quote is opened and never closed",
            "csv"),
    BadFile("CSV: text behind a quote", holding('P1 um,n\n"98"x,1\n'), "line 2: something follows a closing quote",
            "csv"),
    BadFile("CSV: a long cell", holding("P1 um\n" + "9" * 200_000),
            "line 2: a cell is too long: is a quote opened and never closed?", "csv"),
    BadFile("CSV: many columns", holding("P1 um" + ",x" * 1_000 + "\n98\n"),
            "has more than 1000 columns or 2000000 cells", "csv"),
    BadFile("CSV: many rows", holding("P1 um\n" + "9\n" * 200_000), "has more than 200000 rows", "csv"),
    BadFile("CSV: headings alone", holding("P1 um,n\n"), "has headings and no readings below them", "csv"),
    BadFile("CSV: decimal commas between commas", holding("P1 um,n\n98,5,1\n"),
            "row 2 has more cells than there are headings (a table separated by commas cannot have decimal commas: "
            "separate it by semicolons)", "csv"),
    BadFile("XLSX: no file", nothing, "there is no such file", "xlsx", is_reply=True),
    BadFile("XLSX: empty", holding(b""), "is empty", "xlsx", is_reply=True),
    BadFile("XLSX: text", holding("P1 um\n98\n"), "is not an XLSX workbook, or is damaged", "xlsx", is_reply=True),
    BadFile("XLSX: cut in half", holding(workbook()[:2_000]), "is not an XLSX workbook, or is damaged", "xlsx",
            is_reply=True),
    BadFile("XLSX: older, or locked", holding(b"\xd0\xcf\x11\xe0\xa1\xb1"),
            "is an older workbook or has a password: save it as XLSX without one", "xlsx", is_reply=True),
    BadFile("XLSX: 100 MB", large, "is larger than 20 MB", "xlsx"),
    BadFile("XLSX: a text archive", lambda path: zipfile.ZipFile(path, "w").writestr("a.txt", "a"),
            "is not an XLSX workbook", "xlsx", is_reply=True),
    BadFile("XLSX: macros", holding(workbook(macros=b"x")), f"holds macros, {PLAIN}", "xlsx", is_reply=True),
    BadFile("XLSX: macros by name", holding(workbook(content=b'<Types a="macroEnabled"/>')),
            f"holds macros, {PLAIN}", "xlsx", is_reply=True),
    BadFile("XLSX: links to other files", holding(workbook(links=b"<a/>")), f"has links to other files, {PLAIN}",
            "xlsx", is_reply=True),
    BadFile("XLSX: embedded files", holding(workbook(embedded=b"x")), f"has other files embedded, {PLAIN}", "xlsx",
            is_reply=True),
    BadFile("XLSX: controls", holding(workbook(controls=b"x")), f"has controls embedded, {PLAIN}", "xlsx",
            is_reply=True),
    BadFile("XLSX: connections", holding(workbook(connections=b"<a/>")), f"has connections to data elsewhere, {PLAIN}",
            "xlsx", is_reply=True),
    BadFile("XLSX: queries", holding(workbook(query=b"<a/>")), f"has connections to data elsewhere, {PLAIN}", "xlsx",
            is_reply=True),
    BadFile("XLSX: programs", holding(workbook(programs=b"<a/>")), f"has programs embedded, {PLAIN}", "xlsx",
            is_reply=True),
    BadFile("XLSX: entities in entities", holding(workbook(sheet=ENTITIES)), STRANGE, "xlsx", is_reply=True),
    BadFile("XLSX: an entity from a file", holding(workbook(sheet=OUTSIDE)), STRANGE, "xlsx", is_reply=True),
    BadFile("XLSX: entities in UTF-16", holding(workbook(sheet=OUTSIDE.decode().encode("utf-16-be"))), STRANGE, "xlsx",
            is_reply=True),
    BadFile("XLSX: entities in another alphabet",
            holding(workbook(sheet=b'<?xml version="1.0" encoding="cp037"?>' + OUTSIDE.decode().encode("cp037"))),
            DAMAGED, "xlsx", is_reply=True),
    BadFile("XLSX: XML in XML in XML", holding(workbook(extra=b"<a>" * 5_000 + b"</a>" * 5_000)), STRANGE, "xlsx",
            is_reply=True),
    BadFile("XLSX: damaged XML", holding(workbook(sheet=b"<worksheet>")), DAMAGED, "xlsx", is_reply=True),
    BadFile("XLSX: a part twice", holding(doubled()),
            "holds a part twice, which no spreadsheet program writes, and is refused", "xlsx", is_reply=True),
    BadFile("XLSX: a bomb of one part", holding(workbook(extra=b"\0" * 61_000_000)), UNPACKS, "xlsx"),
    BadFile("XLSX: a part that is no sheet, too large", holding(workbook(extra=b"<a>" + b" " * 3_000_000 + b"</a>")),
            "holds a part of more than 3 MB that is no sheet, and is refused", "xlsx", is_reply=True),
    BadFile("XLSX: a row far down", holding(workbook(sheet=sheet(b'<row r="200001"><c><v>1</v></c></row>'))),
            SPACIOUS, "xlsx"),
    BadFile("XLSX: a column far out", holding(workbook(sheet=sheet(b'<row r="1"><c r="XFD1"><v>1</v></c></row>'))),
            SPACIOUS, "xlsx"),
    BadFile("XLSX: many wide rows", holding(workbook(sheet=sheet(b"".join(
        b'<row r="%d"><c r="ALL%d"><v>1</v></c></row>' % (row, row) for row in range(1, 2_102))))), SPACIOUS, "xlsx"),
    BadFile("XLSX: an empty sheet", holding(workbook(sheet=sheet(b""))),
            "is empty; it needs a row of headings and readings below it", "xlsx"),
]
