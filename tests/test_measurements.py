"""Tables of measured values: CSV and XLSX as instruments and spreadsheets write them, and what is told of bad ones."""

from __future__ import annotations

from pathlib import Path

import pytest
from openpyxl import Workbook

from tolerance.measurements.readings import measure_of, numbers_of, unit_of
from tolerance.measurements.tables import TableError, read_table
from tolerance.units import MeasureName


def values(path: Path, heading: str, measure: MeasureName = "length", sheet: str | None = None) -> tuple[float, ...]:
    return numbers_of(read_table(path, sheet=sheet).column(heading), heading=heading, measure=measure)


def written(folder: Path, content: str | bytes, name: str = "press.csv") -> Path:
    path = folder / name
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    return path


@pytest.mark.parametrize("content", [
    "P1 um,Dk\n98.4,4.1\n101,4.0\n",
    "P1 um,Dk\r\n98.4,4.1\r\n101,4.0\r\n",
    b"\xef\xbb\xbfP1 um,Dk\n98.4,4.1\n101.0,4.0\n",
    "P1 um;Dk\n98,4;4,1\n101,0;4,0\n",
    "P1 um\tDk\n98,4\t4,1\n101\t4\n",
    "sep=;\nP1 um;Dk\n98,4;4,1\n101,0;4,0",
    '"P1 um","Dk"\n"98,4","4,1"\n"101","4"\n',
    "\nP1 um,Dk\n\n 98.4 ,4.1\n1.01e2,4.0\n,\n",
])
def test_the_ways_a_table_is_written(content: str | bytes, tmp_path: Path) -> None:
    path = written(tmp_path, content)
    assert values(path, "P1 um") == pytest.approx([98.4e-6, 101e-6], rel=1e-12)
    assert values(path, "Dk", "number") == pytest.approx([4.1, 4.0], rel=1e-12)


@pytest.mark.parametrize(("heading", "measure", "unit"), [
    ("P1 um", "length", "um"), ("P1 [um]", "length", "um"), ("P1 (mil)", "length", "mil"), ("P1_mm", "length", "mm"),
    ("um", "length", "um"), ("thickness, µm", "length", "um"), ("foil oz", "copper length", "oz"),
    ("RC %", "share", "%"), ("RC [%]", "share", "%"), ("Dk", "number", None), ("P1", "length", None),
    ("aluminum", "length", None), ("P1 um", "number", None),
])
def test_units_in_headings(heading: str, measure: MeasureName, unit: str | None) -> None:
    assert unit_of(heading, measure) == unit


def test_what_a_heading_is_measured_in() -> None:
    assert [measure_of(heading) for heading in ("P1 um", "RC %", "Z ohm", "Dk")] == [
        ("length", "um"), ("share", "%"), ("resistance", "ohm"), ("number", "")]


def test_cells_may_have_their_units(tmp_path: Path) -> None:
    path = written(tmp_path, "P1;RC\n98,4 um;64 %\n0,101 mm;0,63\n")
    assert values(path, "P1") == pytest.approx([98.4e-6, 101e-6], rel=1e-12)
    assert values(path, "RC", "share") == pytest.approx([0.64, 0.63], rel=1e-12)


@pytest.mark.parametrize(("content", "heading", "parts"), [
    ("P1 um,Dk\n98.4,4.1\n,4.0\nn/a,4.2\n99,4\n", "P1 um", ["row 3 is blank", 'row 4 holds "n/a", which is not a num']),
    ("P1 um\n98.4\n=A2*2\n", "P1 um", ['row 3 holds "=A2*2"']),
    ("P1 um;x\n98,4;1\n99.1;1\n", "P1 um", ["row 3 has a decimal point, where rows before it have a decimal comma"]),
    ("P1 um;x\n1.234,5;1\n", "P1 um", ['row 2 holds "1.234,5"']),
    ("P1 um,x\n98,4,1\n", "P1 um", ["row 2 has more cells than there are headings"]),
    ("P1\n98.4\n", "P1", ["the heading must end in a unit, um, mm, mil, inch, or", "row 2 has none"]),
    ("P1 um\n98.4 kg\n", "P1 um", ['row 2 holds "98.4 kg"']),
    ("P1 um\ninf\nnan\n1e400\n", "P1 um", ['row 2 holds "inf"', 'row 3 holds "nan"', "row 4 holds"]),
    ("P1 um\n" + "x\n" * 40, "P1 um", ["row 2", "row 6", "and 35 more rows"]),
    ("P2 um\n98\n", "P1 um", ['of "P1 um" there is none (headings: "P2 um")']),
    ("P1 um,P1 um\n98,99\n", "P1 um", ["there are 2"]),
    ("", "P1 um", ["is empty"]),
    ("P1 um\n", "P1 um", ["no readings below"]),
    ("P1 um\n98\n".encode("utf-16"), "P1 um", ["begins as UTF-16"]),
    ("P1 µm\n98\n".encode("latin-1"), "P1 um", ["line 1 holds a byte that is not"]),
    ('P1 um\n"98\n', "P1 um", ["line"]),
])
def test_what_is_wrong_is_told_with_its_row(
    content: str | bytes, heading: str, parts: list[str], tmp_path: Path,
) -> None:
    with pytest.raises(TableError) as refused:
        values(written(tmp_path, content), heading)
    assert all(part in str(refused.value) for part in parts), str(refused.value)
    assert "row 7" not in str(refused.value)


def book(folder: Path, *sheets: tuple[str, list[list[object]]]) -> Path:
    workbook = Workbook()
    assert workbook.active is not None
    workbook.remove(workbook.active)
    for name, rows in sheets:
        sheet = workbook.create_sheet(name)
        for row in rows:
            sheet.append(row)
    path = folder / "press.xlsx"
    workbook.save(path)
    return path


def test_a_workbook(tmp_path: Path) -> None:
    path = book(tmp_path, ("first", [["nothing"], [1]]), ("press", [[None, "P1 um"], [None, 98.4], ["a", 101], []]))
    assert values(path, "P1 um", sheet="press") == pytest.approx([98.4e-6, 101e-6], rel=1e-12)
    for sheet, part in ((None, 'has several sheets, "first", "press"'), ("pres", 'has no sheet "pres"')):
        with pytest.raises(TableError, match=part):
            read_table(path, sheet=sheet)


def test_no_formula_is_evaluated(tmp_path: Path) -> None:
    path = book(tmp_path, ("press", [["P1 um", "n"], [98.4, 1], ["=A2+1", 2], [True, 3]]))
    with pytest.raises(TableError, match=r'row 3 holds "=A2\+1", which is not a number; row 4 holds "True"'):
        values(path, "P1 um")


@pytest.mark.parametrize("content", [b"", b"PK\x03\x04 not a zip", b"P1 um\n98\n"])
def test_what_is_no_workbook_is_told(content: bytes, tmp_path: Path) -> None:
    with pytest.raises(TableError, match=r"is empty|is not an XLSX workbook, or is damaged"):
        read_table(written(tmp_path, content, "press.xlsx"))
