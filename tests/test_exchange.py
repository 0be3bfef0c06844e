"""The sheet there and back: nothing is lost, an empty one changes nothing, and what is spoiled is told by its cell."""

from __future__ import annotations

import json
import zipfile
from collections.abc import Callable
from datetime import date
from pathlib import Path

import pytest
from openpyxl import Workbook, load_workbook
from openpyxl.worksheet.worksheet import Worksheet

from tests.sheet_examples import COUPONS, TEXT, address, asked, edited, fill, scenario_in, sheet_in
from tolerance.command import main
from tolerance.errors import InputError
from tolerance.exchanged import Taken
from tolerance.measurements.archive import safe_content
from tolerance.report.request import request_workbook
from tolerance.scenario import Amount, load, parse
from tolerance.sheet.amending import amend
from tolerance.sheet.cells import CellError, SeenCell, basis_named, typed_of
from tolerance.sheet.reading import read_reply
from tolerance.study.exchange import ask, request_of, take
from tolerance.study.run import run

ETCH, PRESSED, DK, CORE = "L1.etch, L3.etch", "P1.thickness", "P*.dk", "C1.thickness"


def taken(folder: Path, edit: Callable[[Worksheet], object]) -> Taken:
    scenario = scenario_in(folder)
    return take(scenario, edited(sheet_in(folder), edit), coupons=COUPONS, seed=1)


def test_rows_stand_in_the_order_of_what_they_do_and_what_moves_no_line_is_not_asked() -> None:
    rows = asked().rows
    weights = [row.weight for row in rows]
    assert weights == sorted(weights, reverse=True)
    assert sum(weights) == pytest.approx(1.0)
    names = [row.variation.of for row in rows]
    assert ("P2.df",) not in names  # without a frequency nothing depends on it
    assert len(names) == 4
    result = asked().result
    shares = {driver.variable: driver.total.value for driver in result.lines[0].drivers}
    first = next(row for row in rows if row.variation.of == ("P1.thickness",))
    assert dict(first.lines)["radio feed"] == shares["P1.thickness"]
    assert request_of(asked().scenario, result).table.equals(asked().table)


def test_a_reply_that_nobody_touched_changes_nothing(tmp_path: Path) -> None:
    same = take(scenario_in(tmp_path), sheet_in(tmp_path), coupons=COUPONS, seed=1)
    assert (same.changes, same.notes, same.text, same.after) == ((), (), "", None)


def test_what_is_filled_in_is_what_is_taken(tmp_path: Path) -> None:
    def edit(sheet: Worksheet) -> None:
        fill(sheet, ETCH, tolerance=12.7, basis="Cpk", cpk=1.33, mean=-2, tighter=9, price=4.25, remarks="a = 1\n[x]")
        fill(sheet, PRESSED, tolerance=7.5, basis="3 sigma", deviation=2, tighter="4 %", price=0)
        fill(sheet, DK, tolerance=0.07, basis="limits")
        fill(sheet, CORE, tolerance=8, unit="um", basis="limits")

    result = taken(tmp_path, edit)
    assert result.notes == ()
    out = tmp_path / "orchard-answered.toml"
    out.write_text(result.text, encoding="utf-8")
    scenario = load(out)
    found = {variation.of: variation for variation in scenario.variations}
    etch, pressed, dk, core = (found[of] for of in (("L1.etch", "L3.etch"), ("P1.thickness",), ("P*.dk",),
                                                    ("C1.thickness",)))
    assert (etch.tolerance, etch.cpk, etch.shift) == (Amount(12.7e-6, False), 1.33, Amount(-2e-6, False))
    assert (pressed.tolerance, pressed.sigmas, pressed.shape) == (Amount(0.075, True), 3.75, "normal")  # 7.5 / 2
    assert (dk.tolerance, dk.shape, dk.together) == (Amount(0.07, False), "uniform", True)
    assert (core.tolerance, core.low, core.shape) == (Amount(8e-6, False), None, "uniform")
    assert [(offer.of, offer.tolerance, offer.cost) for offer in scenario.offers] == [
        (("L1.etch", "L3.etch"), Amount(9e-6, False), 4.25), (("P1.thickness",), Amount(0.04, True), 0.0)]
    assert result.after is not None
    assert result.after.inside.value > result.before.inside.value
    assert len(result.change_table) == len(result.changes) == 12
    assert list(result.yield_table["line"])[-1] == "all lines together"


@pytest.mark.parametrize(("typed", "number_format", "expected"), [
    (8, "General", "8 um"), ("8,5", "General", "8.5 um"), ("+-8 um", "General", "8 um"), ("± 0,3 mil", "@", "0.3 mil"),
    ("8 µm", "General", "8 um"), ("7 %", "General", "7 %"), (0.07, "0.0%", "7 %"), ("1e1 UM", "General", "10 um"),
    ("0.008mm", "General", "0.008 mm"),
])
def test_numbers_are_read_as_people_type_them(
    tmp_path: Path, typed: object, number_format: str, expected: str,
) -> None:
    def edit(sheet: Worksheet) -> None:
        fill(sheet, ETCH, tolerance=typed)
        sheet[address(sheet, ETCH, "tolerance")].number_format = number_format

    reply = edited(sheet_in(tmp_path), edit)
    read = read_reply(reply, parse(TEXT))
    assert read.notes == ()
    assert amend(parse(TEXT), read.answers).changes[0].value == f'"{expected}"'


def moved(sheet: Worksheet) -> None:
    """Columns in another order, blank rows between, the sheet renamed, a title above gone."""
    fill(sheet, ETCH, tolerance="12,5")
    fill(sheet, PRESSED, deviation=2)
    rows = [[cell.value for cell in row][::-1] for row in sheet.iter_rows(min_row=5)]
    sheet.delete_rows(1, sheet.max_row)
    for number, row in enumerate(rows):
        for column, value in enumerate(row, start=3):
            sheet.cell(2 * number + 1, column, value)
    sheet.title = "Antwort"


def test_a_sheet_that_was_moved_about_says_the_same(tmp_path: Path) -> None:
    result = taken(tmp_path, moved)
    assert result.notes == ()
    assert {(change.of, change.key, change.value) for change in result.changes} == {
        (("L1.etch", "L3.etch"), "tolerance", '"12.5 um"'), (("P1.thickness",), "sigmas", "5")}
    assert all(change.address.startswith("Antwort!") for change in result.changes)


def _repeat_row(sheet: Worksheet) -> None:
    fill(sheet, ETCH, tolerance=12)
    for column, cell in enumerate(sheet[sheet[address(sheet, ETCH, "name")].row], start=1):
        sheet.cell(30, column, cell.value)


def _drop_row(sheet: Worksheet) -> None:
    sheet.delete_rows(sheet[address(sheet, PRESSED, "name")].row)


def _second_heading(sheet: Worksheet) -> None:
    sheet["R5"] = "Your tolerance"
    sheet["R6"] = 3


def _other_column(sheet: Worksheet) -> None:
    sheet["R5"] = "Our department"
    sheet["R7"] = "press shop"


#: what somebody did -> (the cell that is told, words of what is said)
SPOILED: list[tuple[str, Callable[[Worksheet], object], str, str]] = [
    ("words", lambda sheet: fill(sheet, ETCH, tolerance="as usual"), "tolerance", "not a number"),
    ("unit", lambda sheet: fill(sheet, ETCH, tolerance="8 ohm"), "tolerance", 'unit "ohm"; this row takes um, mil'),
    ("thousands", lambda sheet: fill(sheet, ETCH, price="1,250", tighter=8), "price", "is that 1.250 or 1250?"),
    ("negative", lambda sheet: fill(sheet, ETCH, tolerance=-8), "tolerance", "above 0; it is -8"),
    ("date", lambda sheet: fill(sheet, ETCH, tolerance=date(2026, 3, 5)), "tolerance", "a date"),
    ("formula", lambda sheet: fill(sheet, ETCH, tolerance="=2*4"), "tolerance", "formula without a stored value"),
    ("basis", lambda sheet: fill(sheet, ETCH, basis="6 sigma", tolerance=8), "basis", "one of: limits, 3 sigma, Cpk"),
    ("mean itself", lambda sheet: fill(sheet, PRESSED, mean="98 um"), "mean", "looks like the mean itself"),
    ("price alone", lambda sheet: fill(sheet, ETCH, price=3), "price", "no tighter tolerance"),
    ("looser", lambda sheet: fill(sheet, ETCH, tighter=20, price=1), "tighter", "not tighter"),
    ("shift over Cpk", lambda sheet: fill(sheet, ETCH, tolerance=3, mean=5, cpk=1.33, basis="Cpk"), "tolerance",
     "cannot be used, and its row with it: cpk: "),
    ("renamed row", lambda sheet: fill(sheet, ETCH, tolerance=8, name="L1.etch"), "name",
     "no dimension of the scenario"),
    ("repeated row", _repeat_row, "A30", "stands in an earlier row too"),
    ("missing row", _drop_row, "", 'the row "P1.thickness" is missing'),
    ("two headings", _second_heading, "H5", 'the heading "Your tolerance, +-" stands in H5 and R5; neither'),
    ("unknown column", _other_column, "R5", 'a column "Our department" is not known'),
]


@pytest.mark.parametrize(("name", "spoil", "cell", "said"), SPOILED, ids=[row[0] for row in SPOILED])
def test_what_is_spoiled_is_told_by_its_cell_and_the_rest_is_taken(
    tmp_path: Path, name: str, spoil: Callable[[Worksheet], object], cell: str, said: str,
) -> None:
    del name
    places: list[str] = []

    def edit(sheet: Worksheet) -> None:
        row = PRESSED if cell == "mean" else ETCH
        places.append(address(sheet, row, cell) if cell.islower() else cell)
        fill(sheet, CORE, tolerance="9 um")
        spoil(sheet)

    result = taken(tmp_path, edit)
    where = "Tolerances" + (f"!{places[0]}" if places[0] else "")
    assert [note for note in result.notes if note.address == where and said in note.said], result.notes
    assert ("C1.thickness",) in [change.of for change in result.changes] or cell == "H5"
    assert len(result.note_table) == len(result.notes)


def test_the_cells_of_an_answer_each_have_a_reading() -> None:
    assert basis_named("CPK >= 1.67")[0] == "Cpk"
    assert basis_named(" 3σ ") == ("3 sigma", None)
    with pytest.raises(CellError, match="finite"):
        typed_of(SeenCell("A1", float("inf")))
    with pytest.raises(CellError, match="truth value"):
        typed_of(SeenCell("A1", True))


def test_hidden_targets_are_nowhere_in_the_file(tmp_path: Path) -> None:
    def text_of(path: Path) -> str:
        with zipfile.ZipFile(path) as archive:
            return "\n".join(archive.read(name).decode("utf-8") for name in archive.namelist())

    shown = text_of(sheet_in(tmp_path))
    hidden = text_of(sheet_in(tmp_path, hide_targets=True))
    for word in ("radio feed", "clock pair", "Target [ohm]"):
        assert word in shown
        assert word not in hidden
    assert load_workbook(sheet_in(tmp_path, hide_targets=True)).sheetnames == ["Tolerances", "How to fill it in"]


def test_cells_are_checked_as_they_are_filled_and_text_stays_text() -> None:
    book = request_workbook(asked())
    sheet = book["Tolerances"]
    kinds = sorted({str(check.type) for check in sheet.data_validations.dataValidation})
    assert kinds == ["decimal", "list"]
    lists = {str(check.formula1) for check in sheet.data_validations.dataValidation if check.type == "list"}
    assert '"limits,3 sigma,Cpk"' in lists
    assert '"um,mil,mm,inch,%"' in lists
    assert '"absolute,%"' in lists
    assert all(cell.data_type != "f" for row in sheet.iter_rows() for cell in row)


def _zip(path: Path, **members: bytes) -> Path:
    with zipfile.ZipFile(path, "a", zipfile.ZIP_DEFLATED) as archive:
        for name, content in members.items():
            archive.writestr(name, content)
    return path


@pytest.mark.parametrize(("member", "content", "said"), [
    ("xl/vbaProject.bin", b"x", "macros"), ("xl/externalLinks/externalLink1.xml", b"<a/>", "links to other files"),
    ("xl/embeddings/object.bin", b"x", "embedded"), ("xl/big.xml", b"\0" * 21_000_000, "unpacks to more than"),
    ("xl/extra.xml", b'<!DOCTYPE a [<!ENTITY b "c">]><a>&b;</a>', "XML that no spreadsheet program writes"),
])
def test_a_workbook_that_is_more_than_data_is_refused(tmp_path: Path, member: str, content: bytes, said: str) -> None:
    path = _zip(sheet_in(tmp_path), **{member: content})
    with pytest.raises(InputError, match=said):
        read_reply(path, parse(TEXT))


def test_what_is_no_workbook_is_refused(tmp_path: Path) -> None:
    for name, content, said in (("a.xlsx", b"no workbook", "not an XLSX"),
                                ("c.xlsx", b"PK\x03\x04broken", "not an XLSX"),
                                ("b.xlsx", b"\xd0\xcf\x11\xe0rest", "password")):
        (tmp_path / name).write_bytes(content)
        with pytest.raises(InputError, match=said):
            safe_content(tmp_path / name)
    with pytest.raises(InputError, match="no such file"):
        safe_content(tmp_path / "none.xlsx")
    Workbook().save(tmp_path / "other.xlsx")
    with pytest.raises(InputError, match="no sheet in it has the headings"):
        read_reply(tmp_path / "other.xlsx", parse(TEXT))


def command(*words: object) -> int:
    with pytest.raises(SystemExit) as ended:
        main([str(word) for word in words])
    assert isinstance(ended.value.code, int)
    return ended.value.code


def test_the_commands_there_and_back(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.chdir(tmp_path)
    scenario_in(tmp_path)
    options = ("--coupons", COUPONS, "--seed", 1)
    assert command("ask", "orchard.toml", *options, "--hide", "targets") == 0
    assert "Written: orchard-ask.xlsx" in capsys.readouterr().out
    assert command("ask", "orchard.toml", *options) == 2
    assert "is left alone" in capsys.readouterr().err
    reply = edited(tmp_path / "orchard-ask.xlsx", lambda sheet: fill(sheet, ETCH, tolerance=12, basis="what"))
    (tmp_path / "there").mkdir()
    assert command("take", "orchard.toml", reply, "--out", "there/new.toml", *options) == 0
    said = capsys.readouterr().out
    assert "Not taken: Tolerances!" in said
    assert "yield before" in said
    assert load(tmp_path / "there" / "new.toml").variations[2].tolerance == Amount(12e-6, False)
    assert command("take", "orchard.toml", reply, "--out", "there/new.toml", *options) == 2
    assert command("take", "orchard.toml", reply, "--json", *options) == 0
    answer = json.loads(capsys.readouterr().out)
    assert answer["changes"][0]["key"] == "tolerance"
    assert answer["after"]["yield"]["value"] > answer["before"]["yield"]["value"]
    assert not (tmp_path / "orchard-answered.toml").exists()
    assert command("ask", "orchard.toml", "--json", *options) == 0
    assert json.loads(capsys.readouterr().out)["rows"][0]["weight"] > 0.0


def test_what_is_asked_rests_on_the_run_itself() -> None:
    scenario = parse(TEXT)
    found, known = ask(scenario, coupons=COUPONS).result, run(scenario, coupons=COUPONS)
    assert [line.inside for line in found.lines] == [line.inside for line in known.lines]
    assert [line.drivers for line in found.lines] == [line.drivers for line in known.lines]
    assert [line.tail for line in found.lines] == [line.tail for line in known.lines]
    assert all(line.levers is None and line.groups == () for line in found.lines), "nobody asks for them here"
    assert all(line.levers is not None and line.groups for line in known.lines)


def test_whole_lots_need_no_power_of_two_of_coupons(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "orchard.toml"
    path.write_text(TEXT.replace('of = "P1.thickness"', 'of = "P1.thickness"\nlevel = "lot"'), encoding="utf-8")
    for command, status in (("ask", 0), ("run", 0)):
        with pytest.raises(SystemExit) as ended:
            main([command, str(path), "--coupons", "1000", "--json"])
        assert ended.value.code == status
    path.write_text(TEXT, encoding="utf-8")
    with pytest.raises(SystemExit) as ended:
        main(["ask", str(path), "--coupons", "1000", "--json"])
    assert ended.value.code == 2
    assert "must be a power of two" in capsys.readouterr().err
