"""Levers, groups and rare failures as text, sheet and JSON show them."""

from __future__ import annotations

import io
import json

import pytest
from rich.console import Console

from tests.report_examples import made_up_line, made_up_result, made_up_scenario, with_weights
from tolerance.report.json_text import run_json
from tolerance.report.terminal import print_run
from tolerance.report.weights import group_table, in_ppm, lever_table, ppm_words
from tolerance.report.workbook import workbook
from tolerance.results import Interval, RunResult


def result() -> RunResult:
    return made_up_result((with_weights(made_up_line()),))


def printed(told: RunResult) -> str:
    written = io.StringIO()
    print_run(told, Console(file=written, width=80))
    return " ".join(written.getvalue().split())


def test_the_terminal_tells_gains_and_rare_failures() -> None:
    text = printed(result())
    assert "/ points of yield gained, spread halved" in text
    assert "/ P1.thickness +0.40" in text
    assert '"radio feed" 0.0171 ppm [0.0163, 0.0179]' in text
    plain = printed(made_up_result())
    assert "halved" not in plain
    assert "ppm" not in plain


def test_the_workbook_has_a_sheet_of_each() -> None:
    book = workbook(result(), made_up_scenario())
    assert {"Yield levers", "Groups of drivers"} <= set(book.sheetnames)
    sheet = book["Yield levers"]
    assert [sheet.cell(2, column).value for column in (1, 2, 3, 4)] == ["radio feed", 1, "P1.thickness", 0.004]
    assert not {"Yield levers", "Groups of drivers"} & set(workbook(made_up_result(), made_up_scenario()).sheetnames)


def test_tables_say_what_the_result_says() -> None:
    told = result()
    levers = told.lines[0].levers
    assert levers is not None
    rows = lever_table(told).rows
    assert [row[2] for row in rows] == [lever.variable for lever in levers.each]
    assert [row[-1] for row in rows] == list(range(1, len(rows) + 1))
    assert [row[:3] for row in group_table(told).rows] == [
        ("radio feed", "layer", "L1"), ("radio feed", "material", "copper")]


def test_json_has_them_beside_the_drivers() -> None:
    line = json.loads(run_json(result()))["lines"][0]
    assert line["yield_levers"][0]["variable"] == "P1.thickness"
    assert line["yield_levers"][0]["gain_if_halved"] == 0.004
    assert line["rare_failures"]["failing_ppm"]["value"] == pytest.approx(0.0171)
    assert line["groups"][1] == {"name": "copper", "of": "material", "variables": ["L1.etch", "L1.plating"],
                                 "total": 0.4, "total_low": 0.3992, "total_high": pytest.approx(0.4008)}
    assert line["certificate"]["certified"] is True
    plain = json.loads(run_json(made_up_result()))["lines"][0]
    assert plain["yield_levers"] is None
    assert plain["rare_failures"] is None


def test_parts_per_million() -> None:
    assert in_ppm(Interval(1e-6, 0.0, 2e-6)) == Interval(1.0, 0.0, 2.0)
    tail = result().lines[0].tail
    assert tail is not None
    assert ppm_words(tail) == "0.0171 ppm [0.0163, 0.0179]"
