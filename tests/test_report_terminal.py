"""What the terminal shows: 80 columns, words beside colours, no colour codes where there is no terminal."""

from __future__ import annotations

import io
import re
import subprocess
import sys
from dataclasses import replace

import pytest
from rich.console import Console

from tests.report_examples import (
    made_up_check,
    made_up_line,
    made_up_result,
    many_lines,
    share,
    some_drivers,
    with_direct_check,
)
from tolerance.nominal import CheckResult
from tolerance.report.terminal import print_check, print_run
from tolerance.results import Driver, Interval, RunResult

ESCAPE = "\x1b"


def run_text(result: RunResult, *, width: int = 80, terminal: bool = False) -> str:
    console = Console(file=io.StringIO(), width=width, force_terminal=terminal,
                      color_system="standard" if terminal else "auto")
    print_run(result, console)
    assert isinstance(console.file, io.StringIO)
    return console.file.getvalue()


def check_text(result: CheckResult, lengths: str) -> str:
    console = Console(file=io.StringIO(), width=80)
    print_check(result, "mil" if lengths == "mil" else "um", console)
    assert isinstance(console.file, io.StringIO)
    return console.file.getvalue()


@pytest.mark.parametrize("count", [1, 12])
@pytest.mark.parametrize("long_names", [False, True])
def test_a_run_fits_80_columns(count: int, long_names: bool) -> None:
    text = run_text(made_up_result(many_lines(count, long_names=long_names)))
    assert max(len(row) for row in text.splitlines()) <= 80
    assert ESCAPE not in text
    for number in range(1, count + 1):
        assert any(row.split("  ")[0].rstrip().endswith(str(number)) for row in text.splitlines()), number


def test_numbers_are_never_broken_over_rows() -> None:
    text = run_text(made_up_result((made_up_line(target=1000.0, mean=1003.0, deviation=30.0),)))
    for number in ("1003.00", "930 to 1070", "1000", "30.00"):
        assert number in text


def test_a_run_names_yields_with_their_intervals_drivers_errors_and_cautions() -> None:
    text = run_text(made_up_result())
    assert "97.08" in text
    assert "[97.00, 97.16]" in text
    assert "P1.thickness 52 %, L1.etch 32 %" in text
    assert "0.0037" in text  # held-out error
    assert "96" in text  # solver runs
    assert "MISSES the target yield of 99 %" in text
    assert "A predicted yield is an estimate" in " ".join(text.split())
    assert "measured coupons decide" in " ".join(text.split())
    assert "mpossible" not in text


def test_what_fails_shows_no_more_digits_than_what_passes() -> None:
    line = replace(made_up_line(), above=Interval(0.000497, 0.00048, 0.00051))
    text = run_text(made_up_result((line,)))
    assert "0.05 " in text
    assert "0.050" not in text


def test_a_run_that_meets_its_target_says_so() -> None:
    text = run_text(made_up_result((made_up_line(deviation=0.5),)))
    assert "Every line meets the target yield of 99 %." in text
    assert "MISSES" not in text


def test_impossible_coupons_direct_checks_and_missing_drivers_are_told() -> None:
    line = made_up_line(impossible=12, drivers=())
    text = run_text(made_up_result((replace(line, direct=with_direct_check(line)),), impossible=12))
    assert 'failing: 12 of 65,536; "radio feed" 12.' in " ".join(text.split())
    assert "Coupons that the field solver solved itself" in " ".join(text.split())
    assert re.search(r"^radio feed +500 +0\.0030 +0\.0120 +1 *$", text, re.MULTILINE)
    assert "nothing that varies reaches it" in text


def test_shapley_effects_rank_under_their_name() -> None:
    lines = (made_up_line("plain"), made_up_line(drivers=some_drivers(3, shapley=True)), made_up_line("x", drivers=()))
    assert "largest drivers, by Shapley effect " in run_text(made_up_result(lines))
    assert "largest drivers, by total effect " in run_text(made_up_result())


def test_a_driver_of_one_layer_is_named_in_full() -> None:
    together = Driver("bottom mask.thickness + bottom mask.over_copper", share(0.5), share(0.5))
    assert "bottom mask.thickness + over_copper 50 %" in run_text(made_up_result((made_up_line(drivers=(together,)),)))


def test_colour_only_on_a_terminal_and_not_against_the_readers_will(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv("NO_COLOR", raising=False)
    coloured = [row for row in run_text(made_up_result(), terminal=True).splitlines() if f"{ESCAPE}[1;31m" in row]
    assert any("97.08" in row for row in coloured)
    assert any("MISSES" in row for row in coloured)
    assert ESCAPE not in run_text(made_up_result(), terminal=False)
    monkeypatch.setenv("NO_COLOR", "1")
    assert "31m" not in run_text(made_up_result(), terminal=True)


def test_names_are_shown_as_they_are_not_as_markup() -> None:
    text = run_text(made_up_result((made_up_line("[red]feed", deviation=0.5),)))
    assert text.count("[red]feed") == 2  # in the table of yields and in that of drivers
    check = made_up_check(1)
    assert "[red]feed" in check_text(replace(check, lines=(replace(check.lines[0], name="[red]feed"),)), "um")


@pytest.mark.parametrize("long_names", [False, True])
def test_a_check_fits_80_columns(long_names: bool) -> None:
    for lengths in ("um", "mil"):
        text = check_text(made_up_check(12, long_names=long_names), lengths)
        assert max(len(row) for row in text.splitlines()) <= 80
        assert ESCAPE not in text


def test_a_check_shows_impedances_delays_and_dimensions_in_the_unit_asked_for() -> None:
    text = check_text(made_up_check(2), "um")
    for words in ("50.12", "98.73", "-1.3", "5.79", "[ps/mm]", "width 180 um", "gap 150 um", "common 31.40 ohm"):
        assert words in text
    # 180 um / 25.4 um per mil; 5.79 ps/mm * 25.4 mm per inch
    for words in ("width 7.09 mil", "147.1", "[ps/inch]"):
        assert words in check_text(made_up_check(2), "mil")


def test_a_check_names_reference_planes_and_what_a_mode_means() -> None:
    check = made_up_check(2)
    single, pair = check.lines
    text = check_text(replace(check, lines=(replace(single, references=("L2", "L5")), replace(pair, layer="L6"))), "um")
    assert "L1, references L2, L5" in text
    assert "L6, reference L2" in text
    assert "both traces tied together" in " ".join(text.split())
    broadside = replace(pair, layer="L3", partner="L4")
    assert "L3 and L4, reference L2" in check_text(replace(check, lines=(broadside,)), "um")
    common = replace(pair, kind="stripline pair, common mode", mode="common", impedance=31.4)
    text = check_text(replace(check, lines=(single, common)), "um")
    assert "common 31.40 ohm" not in text  # it is the impedance, and stands in its column
    assert "differential" not in text
    assert "both traces tied together" not in check_text(replace(check, lines=(single,)), "um")


def test_text_and_json_need_no_plotting_no_spreadsheet_and_no_data_frames() -> None:
    code = ("import sys, tolerance.report.terminal, tolerance.report.json_text\n"
            "print([name for name in ('matplotlib', 'openpyxl', 'pandas', 'scipy') if name in sys.modules])")
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
