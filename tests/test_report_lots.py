"""Lots and the impedance test as they are shown: JSON, terminal, workbook and figure say the same."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from openpyxl import load_workbook

from tests.lots_examples import made_up_acceptance, made_up_lots, made_up_nested
from tests.report_examples import made_up_result, made_up_scenario
from tests.test_report_figures import words_on
from tests.test_report_terminal import run_text
from tolerance.report.figures import lots_page, write_figures
from tolerance.report.json_text import run_json
from tolerance.report.workbook import write_workbook

ENDS = {"value", "low", "high"}


def test_levels_have_the_keys_of_the_contract() -> None:
    """The contract: line and top have panel_yield and lot_yield, each line variance_shares."""
    answer = json.loads(run_json(made_up_lots()))
    for place in (answer, *answer["lines"]):
        assert set(place["panel_yield"]) == set(place["lot_yield"]) == ENDS
        assert (place["panel_yield"]["value"], place["lot_yield"]["value"]) == (0.9213, 0.551)
    for line in answer["lines"]:
        assert line["variance_shares"] == {"lot": 0.262, "panel": 0.281, "coupon": 0.457}
        assert {driver["variable"] for driver in line["level_drivers"]} <= {
            driver["variable"] for driver in line["drivers"]}
    assert (answer["lots"], answer["panels_per_lot"], answer["coupons_per_panel"]) == (512, 20, 2)


def test_what_a_reading_does_has_keys_of_its_own() -> None:
    answer = json.loads(run_json(made_up_lots()))
    for place in (answer, *answer["lines"]):
        assert {name for name, value in place["test"].items() if isinstance(value, dict) and set(value) == ENDS} == {
            "yield_as_read", "accepted", "false_accepts", "false_rejects"}
        test = place["test"]
        assert (test["repeatability_ohm"], test["bias_ohm"], test["guard_band_ohm"]) == (0.5, 0.1, 0.05)
        assert [each["guard_band_ohm"] for each in place["test"]["guard_bands"]] == [0.0, 0.38, 0.81]
    acceptance = answer["test"]["lot_acceptance"]
    assert (acceptance["sample_size"], acceptance["accept_number"]) == (8, 0)
    assert acceptance["accepted_if_independent"] == 0.7544
    assert len(acceptance["operating_characteristic"]) == 3
    plain = made_up_lots().lines[0]
    assert answer["lines"][0]["yield"]["value"] == plain.inside.value


def test_without_levels_and_test_nothing_is_said_of_them() -> None:
    answer = json.loads(run_json(made_up_result()))
    for place in (answer, answer["lines"][0]):
        assert not {"panel_yield", "lot_yield", "variance_shares", "lots", "test"} & set(place)
    assert "lot" not in run_text(made_up_result())


@pytest.mark.parametrize("count", [1, 12])
@pytest.mark.parametrize("long_names", [False, True])
def test_the_terminal_says_it_in_80_columns(count: int, long_names: bool) -> None:
    text = run_text(made_up_lots(count, long_names=long_names))
    assert max(len(row) for row in text.splitlines()) <= 80
    words = " ".join(text.split())
    for said in ("26, 28, 46", "92.1", "[53, 57]", "0.28", "[0.36, 0.40]",
                 "A reading scatters by 0.5 ohm and is off by 0.1 ohm; guard band 0.05 ohm.",
                 "Drawn as 512 lots of 20 panels with 2 coupons.", "(75 % by the formula for independent coupons)",
                 "Of the coupons in accepted lots 98.3 % [98.1, 98.5] pass."):
        assert said in words, said


def test_a_plan_that_accepts_no_lot_says_so() -> None:
    result = replace(made_up_lots(), acceptance=replace(made_up_acceptance(), quality=None))
    assert "No lot is ever accepted." in " ".join(run_text(result).split())
    assert json.loads(run_json(result))["test"]["lot_acceptance"]["yield_of_accepted"] is None


def test_the_workbook_equals_the_json(tmp_path: Path) -> None:
    result = made_up_lots(3)
    answer = json.loads(run_json(result))
    path = write_workbook(result, made_up_scenario(), tmp_path / "run.xlsx")
    sheets = pd.read_excel(path, sheet_name=None)
    levels = sheets["Levels"].to_dict("records")
    assert [row["line"] for row in levels] == [*(line["name"] for line in answer["lines"]), "all lines together"]
    for row, place in zip(levels, (*answer["lines"], answer), strict=True):
        assert row["yield of coupons"] == pytest.approx(place["yield"]["value"], rel=1e-15)
        assert row["yield of lots, low end"] == pytest.approx(place["lot_yield"]["low"], rel=1e-15)
        assert row["yield of the worst 5 % of lots, at most"] == 0.90
    assert pd.isna(levels[-1]["variance by lot"])
    assert levels[0]["variance by panel"] == 0.281
    assert len(sheets["Levels by variable"]) == sum(len(line["level_drivers"]) for line in answer["lines"])
    test = sheets["Test"].to_dict("records")
    for row, place in zip(test, (*answer["lines"], answer), strict=True):
        assert row["yield, true"] == pytest.approx(place["yield"]["value"], rel=1e-15)
        assert row["false accepts"] == place["test"]["false_accepts"]["value"]
        assert row["guard band for 0.1 % false accepts [ohm]"] == 0.38
    sheet = load_workbook(path)["Lot acceptance"]
    assert str(sheet["A1"].value).startswith("With 8 of 40 coupons measured and at most 0 failing")
    assert [sheet.cell(row=row, column=4).value for row in (4, 5, 6)] == [0.551, 0.34, 0.109]
    plain = load_workbook(write_workbook(made_up_result(), made_up_scenario(), tmp_path / "plain.xlsx"))
    assert not {"Levels", "Levels by variable", "Test", "Lot acceptance"} & set(plain.sheetnames)


def test_the_figure_says_the_same_and_is_written_with_levels_only(tmp_path: Path) -> None:
    result = made_up_lots(3)
    levels, lots, acceptance = lots_page(result, made_up_nested()).axes
    assert "lot\n26 %" in words_on(levels)
    assert "no coupon fails in 55 % [53, 57] of the lots" in words_on(lots)
    bars = [bar.get_height() for bar in lots.patches]  # type: ignore[attr-defined]
    assert sum(bars) == pytest.approx(100.0, abs=0.2)
    assert "8 measured, at most 0 failing" in words_on(acceptance)
    assert "75.4 % by the formula for independent coupons" in words_on(acceptance)
    assert len(lots_page(replace(result, acceptance=None), made_up_nested()).axes) == 2
    assert "lots.png" in [path.name for path in write_figures(result, tmp_path / "one", "um")]
    assert "lots.png" not in [path.name for path in write_figures(made_up_result(), tmp_path / "other", "um")]


@pytest.mark.parametrize("failing", [
    {0: 64}, {1: 64}, {400: 64}, {0: 32, 1: 16, 123: 8, 400: 8},
])
def test_lots_of_any_kind_are_drawn(failing: dict[int, int], tmp_path: Path) -> None:
    counts = np.zeros(401, dtype=np.int64)
    counts[list(failing)] = list(failing.values())
    nested = replace(made_up_nested(), failing=counts)
    axes = lots_page(made_up_lots(20, long_names=True), nested).axes[1]
    bars = [bar.get_height() for bar in axes.patches]  # type: ignore[attr-defined]
    assert sum(bars) == pytest.approx(100.0, abs=0.2)
    assert len(bars) <= 42
    write_figures(replace(made_up_lots(12), nested=nested), tmp_path, "um")
