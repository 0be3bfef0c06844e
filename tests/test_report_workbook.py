"""The workbook read back: the same numbers as the JSON, text that stays text, heads, filters and marks."""

from __future__ import annotations

import json
import math
import posixpath
import re
import shutil
import subprocess
import zipfile
from dataclasses import replace
from pathlib import Path
from xml.etree import ElementTree

import pandas as pd
import pytest
from openpyxl import load_workbook
from openpyxl.worksheet.worksheet import Worksheet

from tests.report_examples import (
    SCENARIO_TEXT,
    made_up_line,
    made_up_result,
    made_up_scenario,
    many_lines,
    some_drivers,
)
from tolerance.errors import UnfinishedError
from tolerance.report.json_text import run_json
from tolerance.report.tables import LINE_COLUMNS, line_table
from tolerance.report.workbook import write_workbook
from tolerance.results import Interval, RunResult
from tolerance.scenario.checking import parse

SHEETS = ["Summary", "Charts", "Lines", "Drivers", "Yield by limit", "Stackup", "Drawn lines", "Variations",
          "Run record"]
FORMULA_LIKE = ("=1+1", "+feed", "-feed", "@feed", "=cmd|' /C calc'!A0", "#N/A")


def written(folder: Path, result: RunResult, lengths: str = "um") -> Path:
    return write_workbook(result, made_up_scenario(lengths), folder / "out" / "run.xlsx")


def stored(value: float) -> float:
    """A number as a workbook file holds it: 16 significant digits."""
    return float(f"{value:.16g}")


def test_lines_and_drivers_equal_the_json(tmp_path: Path) -> None:
    lines = (*many_lines(10), made_up_line("correlated", drivers=some_drivers(4, shapley=True)))
    result = made_up_result(lines)
    answer = json.loads(run_json(result))
    path = written(tmp_path, result)
    sheet = pd.read_excel(path, sheet_name="Lines")
    heads = {column.key: column.head for column in LINE_COLUMNS}
    for row, line in zip(sheet.to_dict("records"), answer["lines"], strict=True):
        assert row["line"] == line["name"]
        assert row["yield"] == stored(line["yield"]["value"])
        assert row["yield, low end"] == stored(line["yield"]["low"])
        for key, value in line.items():
            if key in heads and isinstance(value, float):
                assert row[heads[key]] == stored(value), key
    drivers = pd.read_excel(path, sheet_name="Drivers")
    flat = [(line["name"], driver) for line in answer["lines"] for driver in line["drivers"]]
    assert len(drivers) == len(flat)
    for row, (name, driver) in zip(drivers.to_dict("records"), flat, strict=True):
        assert (row["line"], row["variable"]) == (name, driver["variable"])
        assert row["total effect"] == stored(driver["total"])
        assert row["first-order, high end"] == stored(driver["first_high"])
        assert pd.isna(row["Shapley effect"]) if "shapley" not in driver \
            else row["Shapley effect"] == stored(driver["shapley"])


def test_the_summary_says_the_answer_in_words_and_marks_what_misses(tmp_path: Path) -> None:
    result = made_up_result(many_lines(4), impossible=3)
    sheet = load_workbook(written(tmp_path, result))["Summary"]
    words = [str(sheet.cell(row=row, column=1).value) for row in range(1, 6)]
    assert words[0] == "Orchard gateway, 6 layers"
    assert words[1].startswith("95.89 % of the coupons pass on every line (95 % interval [95.81, 95.97] %")
    assert words[2] == "1 of 4 lines MISSES the target yield of 99 %."
    assert "3 coupons cannot exist" in words[3]
    verdicts = [sheet.cell(row=row, column=10).value for row in range(8, 12)]
    assert verdicts == ["meets", "meets", "meets", "MISSES"]
    assert any("0.99" in rule.formula[0] for rules in sheet.conditional_formatting for rule in rules.rules)


def test_every_table_has_frozen_heads_a_filter_units_and_number_formats(tmp_path: Path) -> None:
    book = load_workbook(written(tmp_path, made_up_result()))
    assert book.sheetnames == SHEETS
    for sheet in (each for each in book.worksheets if each.title != "Charts"):
        assert sheet.freeze_panes is not None, sheet.title
        assert sheet.auto_filter.ref is not None, sheet.title
    lines = book["Lines"]
    heads = {cell.value: number for number, cell in enumerate(lines[1], start=1)}
    assert lines.cell(2, heads["yield"]).number_format == "0.00%"
    assert lines.cell(2, heads["mean [ohm]"]).number_format == "0.00"
    assert heads.keys() >= {"deviation [ohm]", "held-out error [ohm]", "Cpk"}
    assert all(dimension.width >= 9 for dimension in lines.column_dimensions.values())


def test_text_that_begins_like_a_formula_stays_text(tmp_path: Path) -> None:
    result = made_up_result(tuple(made_up_line(name) for name in FORMULA_LIKE), title="=HYPERLINK(\"x\")")
    book = load_workbook(written(tmp_path, result))
    assert book["Summary"]["A1"].data_type == "s"
    for row, name in enumerate(FORMULA_LIKE, start=2):
        cell = book["Lines"].cell(row, 1)
        assert (cell.value, cell.data_type) == (name, "s")
        assert cell.quotePrefix or not name.startswith(("=", "+", "-", "@"))


def test_control_characters_do_not_stop_the_workbook(tmp_path: Path) -> None:
    book = load_workbook(written(tmp_path, made_up_result((made_up_line("bell\x07"),))))
    assert book["Lines"].cell(2, 1).value == "bell\N{REPLACEMENT CHARACTER}"


def test_a_value_that_is_not_finite_is_an_empty_cell(tmp_path: Path) -> None:
    endless = Interval(math.inf, math.inf, math.inf)
    line = replace(made_up_line(), cp=None, cpk=endless)
    assert math.inf not in line_table(made_up_result((line,))).rows[0]
    sheet = pd.read_excel(written(tmp_path, made_up_result((line,))), sheet_name="Lines")
    assert pd.isna(sheet["Cp"][0])
    assert pd.isna(sheet["Cpk"][0])


def test_the_stackup_and_the_variations_stand_as_understood(tmp_path: Path) -> None:
    path = written(tmp_path, made_up_result())
    stackup = pd.read_excel(path, sheet_name="Stackup")
    assert list(stackup["layer"]) == ["top mask", "L1", "P1", "L2", "C1", "L3"]
    assert list(stackup["thickness [um]"]) == [25.0, 43.0, 100.0, 17.0, 800.0, 17.0]  # 43 = foil 18 + plating 25
    assert stackup["foot points"][1] == "down"
    drawn = pd.read_excel(path, sheet_name="Drawn lines")
    assert list(drawn["plane below"]) == ["L2", "L2"]
    assert list(drawn["limit, half-width"]) == [0.07, 0.10]
    varying = pd.read_excel(path, sheet_name="Variations").set_index("property")
    assert list(varying.index) == ["L1.etch", "P1.thickness", "top mask.dk", "P1.dk", "C1.dk", "top mask.thickness",
                                   "top mask.over_copper"]
    assert varying["half-width"]["L1.etch"] == 10.0
    assert varying["half-width in"]["L1.etch"] == "% of each line's width"
    assert varying["the half-width is"]["L1.etch"] == "3 deviations"
    assert varying["the half-width is"]["P1.thickness"] == "held with Cpk 1.33"
    assert varying["shift"]["P1.thickness"] == 2.0
    assert varying["the half-width is"]["P1.dk"] == "the ends"
    assert varying["variable"]["top mask.thickness"] == "top mask.thickness + top mask.over_copper"
    assert varying["nominal"]["top mask.over_copper"] == 15.0


def test_correlations_stand_on_a_sheet_of_their_own_where_there_are_any(tmp_path: Path) -> None:
    text = SCENARIO_TEXT + """
[[correlations]]
between = ["P1.thickness", "P1.dk"]
coefficient = -0.6
"""
    path = write_workbook(made_up_result(), parse(text), tmp_path / "run.xlsx")
    sheet = pd.read_excel(path, sheet_name="Correlations")
    assert sheet.to_numpy().tolist() == [["P1.thickness", "P1.dk", -0.6]]
    assert "Correlations" not in load_workbook(written(tmp_path, made_up_result())).sheetnames


def test_yield_against_the_limit_stands_in_numbers(tmp_path: Path) -> None:
    result = made_up_result(many_lines(3))
    sheet = pd.read_excel(written(tmp_path, result), sheet_name="Yield by limit")
    assert list(sheet.columns) == ["limit, half-width", "all lines together", *(line.name for line in result.lines)]
    assert sheet.to_numpy() == pytest.approx(result.limit_table.to_numpy(), abs=1e-15)
    lines = pd.read_excel(tmp_path / "out" / "run.xlsx", sheet_name="Lines")
    needed = [line.by_limit.needed.value for line in result.lines if line.by_limit.needed]
    assert list(lines["limit that meets the target yield"]) == pytest.approx(needed, abs=1e-15)


def cells_of(sheet: Worksheet, reference: str) -> list[object]:
    """The values of the cells that a chart refers to, which all lie in `sheet`."""
    name, _, cells = reference.rpartition("!")
    assert name.strip("'") == sheet.title
    return [cell.value for row in sheet[cells.replace("$", "")] for cell in row]


def test_charts_are_drawn_from_the_cells_of_the_tables(tmp_path: Path) -> None:
    lines = (*many_lines(3), made_up_line("no driver", drivers=()), made_up_line("bell\x07 & <co>"))
    result = made_up_result(lines)
    book = load_workbook(written(tmp_path, result))
    charts = book["Charts"]._charts  # type: ignore[attr-defined]
    assert len(charts) == 3 + 4  # yields, what fails, against the limit, and the lines that have drivers
    names = [line.name.replace("\x07", "\N{REPLACEMENT CHARACTER}") for line in lines]
    yields = charts[0].series[0]
    assert cells_of(book["Summary"], yields.val.numRef.f) == [stored(line.inside.value) for line in lines]
    assert cells_of(book["Summary"], yields.cat.numRef.f) == names
    assert [len(cells_of(book["Summary"], series.val.numRef.f)) for series in charts[1].series] == [5, 5]
    assert len(charts[2].series) == 6
    last = charts[-1].series[0]
    assert cells_of(book["Drivers"], last.val.numRef.f) == [stored(driver.total.value) for driver in lines[-1].drivers]
    assert cells_of(book["Drivers"], last.cat.numRef.f) == [driver.variable for driver in lines[-1].drivers]


def test_every_part_is_well_formed_and_every_relation_leads_somewhere(tmp_path: Path) -> None:
    """What strict readers ask: parts that parse, declared types, targets that are there (ECMA-376, part 2)."""
    lines = (*many_lines(4), *(made_up_line(name) for name in FORMULA_LIKE), made_up_line("a & b < c > \"d\" \x0b"))
    path = written(tmp_path, made_up_result(lines, title="<&>"))
    with zipfile.ZipFile(path) as parts:
        names = set(parts.namelist())
        trees = {name: ElementTree.fromstring(parts.read(name)) for name in names}
    declared = {part.attrib.get("PartName", "").lstrip("/") for part in trees["[Content_Types].xml"]}
    endings = {part.attrib.get("Extension") for part in trees["[Content_Types].xml"]}
    assert all(name in declared or name.rpartition(".")[2] in endings for name in names - {"[Content_Types].xml"})
    for name in (each for each in names if each.endswith(".rels")):
        base = "/" + name.replace("_rels/", "").rpartition("/")[0]
        for relation in trees[name]:
            target = posixpath.normpath(posixpath.join(base, relation.attrib["Target"])).lstrip("/")
            assert target in names, (name, target)


OFFICE = shutil.which("soffice") or shutil.which("libreoffice")


@pytest.mark.skipif(OFFICE is None, reason="LibreOffice, which would convert the workbook, is not installed here")
def test_libreoffice_opens_it_and_finds_every_sheet(tmp_path: Path) -> None:
    assert OFFICE is not None
    result = made_up_result(many_lines(3))
    path = written(tmp_path, result)
    profile = (tmp_path / "profile").as_uri()
    done = subprocess.run(
        [OFFICE, f"-env:UserInstallation={profile}", "--headless", "--convert-to", "ods", "--outdir", str(tmp_path),
         str(path)], capture_output=True, text=True, check=False, timeout=240)
    converted = tmp_path / "run.ods"
    assert converted.exists(), done.stderr
    with zipfile.ZipFile(converted) as parts:
        content = ElementTree.fromstring(parts.read("content.xml"))
        charts = [name for name in parts.namelist() if re.fullmatch(r"Object [^/]*/content\.xml", name)]
    table, office = ("{urn:oasis:names:tc:opendocument:xmlns:" + name + ":1.0}" for name in ("table", "office"))
    assert [each.attrib[f"{table}name"] for each in content.iter(f"{table}table")][: len(SHEETS)] == SHEETS
    values = [float(cell.attrib[f"{office}value"]) for cell in content.iter(f"{table}table-cell")
              if f"{office}value" in cell.attrib]
    for line in result.lines:
        assert any(value == pytest.approx(line.inside.value, abs=1e-12) for value in values)
    assert len(charts) == 3 + len(result.lines)


def test_lengths_stand_in_the_unit_of_the_report(tmp_path: Path) -> None:
    path = written(tmp_path, made_up_result(), "mil")
    stackup = pd.read_excel(path, sheet_name="Stackup")
    assert stackup["thickness [mil]"][2] == pytest.approx(100.0 / 25.4, rel=1e-9)  # 1 mil is 25.4 um exactly
    varying = pd.read_excel(path, sheet_name="Variations").set_index("property")
    assert varying["half-width"]["P1.thickness"] == pytest.approx(8.0 / 25.4, rel=1e-9)
    assert varying["unit"]["P1.thickness"] == "mil"
    book = load_workbook(path)
    written_words = [str(cell.value) for sheet in book.worksheets if sheet.title != "Run record"
                     for row in sheet.iter_rows() for cell in row]
    assert not [words for words in written_words if re.search(r"\bum\b", words)]


def test_the_run_record_keeps_what_remakes_the_run(tmp_path: Path) -> None:
    result = made_up_result()
    record = pd.read_excel(written(tmp_path, result), sheet_name="Run record", dtype=object, keep_default_na=False)
    text = "\n".join(str(value) for value in record.loc[record["item"] == "scenario text", "value"])
    assert text.rstrip() == SCENARIO_TEXT.rstrip()
    values = dict(zip(record["item"], record["value"], strict=True))
    assert values["seed"] == 1
    assert values["field solver runs"] == 96
    assert values["version: numpy"] == "2.4.0"


@pytest.mark.parametrize("seed", [10**15, 10**15 + 1, 99999999999999999999999999, 10**3999])
def test_a_seed_of_many_digits_keeps_them_all(tmp_path: Path, seed: int) -> None:
    """A cell holds 15 digits as a number; what has more stands there as text."""
    book = load_workbook(written(tmp_path, replace(made_up_result(), seed=seed)))
    values = {row[0]: row[1] for row in book["Run record"].iter_rows(values_only=True)}
    assert str(values["seed"]) == str(seed)


def test_no_row_is_cut_off_and_none_stands_open_for_nothing(tmp_path: Path) -> None:
    """A default row is 15 points high; a text goes on in as many rows as its column makes it need."""
    name = "differential camera link from the front connector to the image processor, channel 12"
    book = load_workbook(written(tmp_path, made_up_result((made_up_line(name), made_up_line("short")))))
    lines = book["Lines"]
    assert lines.row_dimensions[2].height == 30.0
    assert lines.row_dimensions[3].height in (None, 15.0)
    record = book["Run record"]
    assert {record.row_dimensions[row].height for row in range(2, record.max_row + 1)} == {15.0}


def test_a_workbook_that_cannot_be_written_leaves_nothing_and_says_why(tmp_path: Path) -> None:
    (tmp_path / "run.xlsx").mkdir()  # a folder stands where the file should go
    (tmp_path / "run.xlsx" / "kept").touch()
    with pytest.raises(UnfinishedError, match=r"run\.xlsx"):
        write_workbook(made_up_result(), made_up_scenario(), tmp_path / "run.xlsx")
    assert [path.name for path in tmp_path.iterdir()] == ["run.xlsx"]
