"""Random input for everything that reads: what comes of it must be a result or our own message, never anything else.

`feed` hands bytes to one reader by the command line, as a stranger's file would come, and judges what happened. The
suite feeds it from hypothesis (`test_fuzzing.py`); `python -m tests.benchmarks.fuzz` feeds it guided by coverage.
"""

from __future__ import annotations

import contextlib
import io
import shutil
from collections.abc import Callable, Mapping
from functools import cache
from pathlib import Path
from types import MappingProxyType

from tests.bad_files import SHEET, doubled, sheet, workbook
from tests.catalogue import FOLDER, SCENARIO, cases
from tests.scenario_texts import BOARD, changed
from tests.sheet_examples import TEXT, sheet_in
from tests.test_scenario_mutations import FULL
from tolerance.command import main
from tolerance.errors import ToleranceError
from tolerance.scenario import parse
from tolerance.sheet.amending import amend, amendment_text
from tolerance.sheet.reading import read_reply
from tolerance.study.coupon_tables import read_coupons

ACCEPTED, REFUSED = "accepted", "refused"
READINGS = b"P1 um,lot\n98,a\n99,a\n100,b\n101,b\n102,c\n"
COUPONS = b"line,value ohm,lot\nradio feed,50.1,a\nclock pair,99.5,a\n"
MEASURED = changed(BOARD, ('tolerance = "10 %"', 'shape = "measured"\nfile = "press.ENDING"\ncolumn = "P1 um"'))


class DefectError(AssertionError):
    """The program did what it must not do with bad input."""


def command(arguments: list[str]) -> tuple[int, str, str]:
    """Exit status, standard output and standard error of a command."""
    shown, told = io.StringIO(), io.StringIO()
    with contextlib.redirect_stdout(shown), contextlib.redirect_stderr(told):
        try:
            main(arguments)
        except SystemExit as ended:
            return int(ended.code or 0), shown.getvalue(), told.getvalue()
    raise DefectError("main returned")


def judged(arguments: list[str], folder: Path, *, writes: frozenset[str] = frozenset()) -> str:
    """Run a command in a folder and tell whether its input was accepted. Raises DefectError.

    writes : files that it writes to the folder `result` when it accepts its input, and then all of them.
    """
    before = {path.name for path in folder.iterdir()}
    status, shown, told = command(arguments)
    result = folder / "result"
    found = {path.name for path in result.iterdir()} if result.is_dir() else set()
    new = {path.name for path in folder.iterdir()} - before - {"result"}
    shutil.rmtree(result, ignore_errors=True)
    if status not in (0, 2) or new or found != (writes if status == 0 else set()):
        raise DefectError(f"{arguments}: status {status}, files {found | new}, told {told!r}")
    lines = told.removesuffix("\n").split("\n")
    if status == 2 and (shown or not told or not all(line and line.isprintable() for line in lines)):
        raise DefectError(f"{arguments}: shown {shown!r}, told {told!r}")
    if any(word in told for word in ("Traceback", "pydantic", "<class", "object at 0x")):
        raise DefectError(f"{arguments}: told {told!r}")
    return ACCEPTED if status == 0 else REFUSED


def scenario(content: bytes, folder: Path) -> str:
    """The bytes as a scenario."""
    (folder / SCENARIO).write_bytes(content)
    return judged(["note", str(folder / SCENARIO), "--out", str(folder / "result")], folder,
                  writes=frozenset({"note.txt"}))


def spliced(content: bytes, folder: Path) -> str:
    """The bytes put into a sound scenario: the first two say where, the third how much of it goes."""
    text = FULL.encode()
    start = int.from_bytes(content[:2], "big") % len(text)
    gone = content[2] if len(content) > 2 else 0
    return scenario(text[:start] + content[3:] + text[start + gone:], folder)


def table(content: bytes, folder: Path, *, ending: str = "csv") -> str:
    """The bytes as a table of readings, by itself and named by a scenario."""
    path = folder / f"press.{ending}"
    path.write_bytes(content)
    outcome = judged(["fit", str(path), "--json"], folder)
    return min(outcome, scenario(MEASURED.replace("ENDING", ending).encode(), folder))


def book(content: bytes, folder: Path) -> str:
    """The bytes as a workbook of readings."""
    return table(content, folder, ending="xlsx")


def cells(content: bytes, folder: Path) -> str:
    """The bytes as the rows of a sheet in a sound workbook."""
    return book(workbook(sheet=sheet(content)), folder)


def part(content: bytes, folder: Path) -> str:
    """The bytes as a whole part of a workbook that is sound otherwise; the first says which."""
    keys = ("sheet", "content", "texts", "extra")
    return book(workbook(**{keys[content[0] % len(keys)] if content else "sheet": content[1:]}), folder)


def coupons(content: bytes, folder: Path) -> str:
    """The bytes as measured coupons."""
    path = folder / "lot.csv"
    path.write_bytes(content)
    return _own_error(lambda: read_coupons(path, parse(BOARD)))


def reply(content: bytes, folder: Path) -> str:
    """The bytes as the workbook that came back from a fabricator: read, amended, and the scenario checked."""
    path = folder / "reply.xlsx"
    path.write_bytes(content)

    def taken() -> object:
        asked = parse(TEXT)
        text = amendment_text(amend(asked, read_reply(path, asked).answers), extends=SCENARIO, title="answered",
                              reply=path.name)
        (folder / SCENARIO).write_text(TEXT, encoding="utf-8")
        return parse(text, folder=folder)

    return _own_error(taken)


def answers(content: bytes, folder: Path) -> str:
    """The bytes as what stands in the cells of the sheet that was sent, one after the other, separated by bars."""
    return reply(filled(content.decode("utf-8", "replace").split("|"), folder), folder)


def filled(texts: list[str], folder: Path) -> bytes:
    """The sheet that was sent, with these texts in its open cells; numbers as numbers."""
    from openpyxl import load_workbook

    from tolerance.report.sheet_text import clean_text

    loaded = load_workbook(io.BytesIO(asked_sheet(folder)))
    rows = loaded["Tolerances"]
    for number, text in enumerate(texts[:60]):
        cell = rows.cell(row=6 + number // 12, column=1 + number % 12)
        if text:
            cell.value = _number(clean_text(text[:300]))
    content = io.BytesIO()
    loaded.save(content)
    return content.getvalue()


@cache
def asked_sheet(folder: Path) -> bytes:
    """The sheet as it goes out."""
    return sheet_in(folder).read_bytes()


def _number(text: str) -> float | str:
    try:
        return float(text)
    except ValueError:
        return text


def _own_error(read: Callable[[], object]) -> str:
    try:
        read()
    except ToleranceError as problem:
        if problem.exit_status != 2 or not str(problem):
            raise DefectError(repr(problem)) from None
        return REFUSED
    return ACCEPTED


READERS: Mapping[str, Callable[[bytes, Path], str]] = MappingProxyType({
    "scenario": scenario, "spliced": spliced, "table": table, "workbook": book, "cells": cells, "part": part,
    "coupons": coupons, "reply": reply, "answers": answers,
})


def feed(reader: str, content: bytes, folder: Path) -> str:
    """ACCEPTED or REFUSED; whatever else comes of the bytes is raised."""
    return READERS[reader](content, folder)


def seeds(folder: Path) -> list[tuple[str, bytes]]:
    """Input to begin from: sound files of every kind, and the catalogue of bad ones."""
    texts = [case.files[SCENARIO].encode() for path in sorted(FOLDER.glob("*.txt")) for case in cases(path.name)]
    files = [item for case in cases("files.txt") for item in case.files.items()]
    tables = [text.encode() for name, text in files if name.endswith(".csv")]
    rows = b'<row r="1"><c r="A1" t="inlineStr"><is><t>P1 um</t></is></c></row><row r="2"><c r="A2"><v>98</v></c></row>'
    return [
        ("scenario", BOARD.encode()), ("scenario", FULL.encode()), *(("scenario", text) for text in texts),
        ("spliced", b"\x00\x00\x00\n"), ("spliced", b"\x01\x00\x00tolerance = 0.1\n"),
        ("table", READINGS), *(("table", text) for text in tables),
        ("workbook", workbook()), ("workbook", doubled()), ("cells", rows), ("part", b"\x00" + sheet(rows)),
        ("coupons", COUPONS), ("reply", asked_sheet(folder)), ("answers", b"|8|um|limits||-2|1.5|5|um|3"),
        ("part", b"\x02" + SHEET.encode()),
    ]
