"""The JSON of a run and of a check: the contract's keys to the letter, equal for equal results, never NaN."""

from __future__ import annotations

import json
import math
from dataclasses import replace

import pytest

from tests.report_examples import made_up_check, made_up_line, made_up_result, some_drivers, with_direct_check
from tolerance.report.json_text import check_json, run_json
from tolerance.results import Interval

# the keys as the contract of the commands writes them
RUN_KEYS = {"title", "seed", "coupons", "yield", "lines"}
LINE_KEYS = {"name", "target_ohm", "low_limit_ohm", "high_limit_ohm", "nominal_ohm", "mean_ohm", "std_ohm", "below",
             "above", "cpk", "yield", "drivers"}
DRIVER_KEYS = {"variable", "first", "first_low", "first_high", "total", "total_low", "total_high"}
CHECK_KEYS = {"name", "impedance_ohm", "target_ohm", "effective_dk", "delay_ps_per_mm", "common_mode_ohm",
              "even_effective_dk"}


def test_run_has_the_keys_of_the_contract() -> None:
    answer = json.loads(run_json(made_up_result()))
    assert set(answer) >= RUN_KEYS
    assert set(answer["yield"]) == {"value", "low", "high"}
    for line in answer["lines"]:
        assert set(line) >= LINE_KEYS
        assert set(line["yield"]) == {"value", "low", "high"}
        for driver in line["drivers"]:
            assert set(driver) == DRIVER_KEYS


def test_run_says_what_the_result_says() -> None:
    result = made_up_result()
    answer, line = json.loads(run_json(result)), result.lines[0]
    shown = answer["lines"][0]
    assert (answer["title"], answer["seed"], answer["coupons"]) == ("Orchard gateway, 6 layers", 1, 65536)
    assert (answer["yield"]["value"], answer["yield"]["low"]) == (result.inside.value, result.inside.low)
    assert (shown["target_ohm"], shown["nominal_ohm"]) == (50.0, line.nominal)
    assert line.cpk is not None
    assert (shown["mean_ohm"], shown["std_ohm"], shown["cpk"]) == (
        line.mean.value, line.deviation.value, line.cpk.value)
    assert shown["yield"] == {"value": line.inside.value, "low": line.inside.low, "high": line.inside.high}
    assert shown["drivers"][1]["variable"] == "L1.etch"
    assert shown["drivers"][1]["total_high"] == line.drivers[1].total.high


def test_run_says_shapley_effects_and_direct_checks_where_there_are_any() -> None:
    line = made_up_line(drivers=some_drivers(3, shapley=True))
    answer = json.loads(run_json(made_up_result((replace(line, direct=with_direct_check(line)),))))
    assert set(answer["lines"][0]["drivers"][0]) == DRIVER_KEYS | {"shapley", "shapley_low", "shapley_high"}
    assert answer["lines"][0]["direct"]["coupons"] == 500


def test_run_is_the_same_whatever_the_clock_and_the_versions() -> None:
    result = made_up_result()
    other = replace(result, record=replace(result.record, seconds={"solver": 99.0}, versions={"numpy": "9"}))
    assert run_json(result) == run_json(other)


def test_a_capability_without_a_finite_value_is_null_and_any_other_number_is_refused() -> None:
    endless = Interval(math.inf, math.inf, math.inf)
    line = replace(made_up_line(), cp=None, cpk=endless)
    shown = json.loads(run_json(made_up_result((line,))))["lines"][0]
    assert (shown["cp"], shown["cp_low"], shown["cpk"]) == (None, None, None)
    with pytest.raises(ValueError, match="not JSON compliant"):
        run_json(made_up_result((replace(line, nominal=math.nan),)))


def test_check_has_the_keys_and_units_of_the_contract() -> None:
    answer = json.loads(check_json(made_up_check(2)))
    assert answer["title"] == "Orchard gateway, 6 layers"
    single, pair = answer["lines"]
    assert set(single) >= CHECK_KEYS
    assert single["common_mode_ohm"] is None
    assert single["even_effective_dk"] is None
    assert pair["common_mode_ohm"] == 31.4
    assert single["delay_ps_per_mm"] == pytest.approx(5.79, rel=1e-12)  # 5.79e-9 s/m by definition of the units
