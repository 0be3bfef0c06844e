"""A scenario with a frequency, and where a coupon is read: from the text to what check and run say."""

from __future__ import annotations

import io
import json
import math

import pytest
from rich.console import Console

from tests.scenario_texts import BOARD, changed, messages
from tolerance.process.values import NominalValues, nominals_of
from tolerance.report.json_text import check_json, run_json
from tolerance.report.terminal import print_check, print_run
from tolerance.scenario import Scenario, parse
from tolerance.sections.section import Section
from tolerance.sections.surroundings import properties_that_reach, surroundings_of
from tolerance.solver.plan import SolverSettings
from tolerance.study.check import check
from tolerance.study.lines import prepare
from tolerance.study.run import run

STRIP = """format = 1
title = "Rain gauge, test strip"

[evaluation]
limit = "10 %"
FREQUENCY

[[layers]]
name = "L1"
kind = "copper"
use = "plane"
foil = "17 um"
PLANE

[[layers]]
name = "C1"
kind = "core"
thickness = "100 um"
dk = 4.0
df = 0.02
ANCHOR

[[layers]]
name = "L2"
kind = "copper"
use = "signal"
foil = "15 um"

[[layers]]
name = "P1"
kind = "prepreg"
thickness = "100 um"
dk = 4.0
df = 0.02
ANCHOR

[[layers]]
name = "L3"
kind = "copper"
use = "plane"
foil = "17 um"

[[lines]]
name = "wire"
layer = "L2"
width = "75 um"
target = "50 ohm"

[[lines]]
name = "both"
layer = "L2"
width = "75 um"
gap = "120 um"
target = "100 ohm"

[[lines]]
name = "both as one"
layer = "L2"
width = "75 um"
gap = "120 um"
target = "30 ohm"
mode = "common"
"""
READ = '\n[test]\nreading = { position = "75 mm" }\n'


def strip(*, frequency: str = "", plane: str = "", anchor: str = "", more: str = "") -> Scenario:
    """The strip above, with keys put in."""
    text = STRIP.replace("FREQUENCY", f'frequency = "{frequency}"' if frequency else "")
    return parse(text.replace("PLANE", plane).replace("ANCHOR", anchor) + more)


def check_lines(scenario: Scenario) -> dict[str, dict[str, float]]:
    return {line["name"]: line for line in json.loads(check_json(check(scenario)))["lines"]}


def test_each_line_has_the_keys_of_the_contract_and_they_agree_with_each_other() -> None:
    """Textbook: the impedance is sqrt((R + j omega L) / (G + j omega C)), of a pair in its mode, here in magnitude."""
    omega = 2.0 * math.pi * 1e9
    for line in check_lines(strip(frequency="1 GHz")).values():
        series = complex(line["resistance_ohm_per_m"], omega * line["inductance_h_per_m"])
        shunt = complex(line["conductance_s_per_m"], omega * line["capacitance_f_per_m"])
        impedance = (series / shunt) ** 0.5
        assert line["impedance_ohm"] == pytest.approx(abs(impedance), rel=1e-12)
        assert line["impedance_real_ohm"] == pytest.approx(impedance.real, rel=1e-12)
        assert line["impedance_imaginary_ohm"] == pytest.approx(impedance.imag, rel=1e-9)
        loss = line["conductor_loss_db_per_m"] + line["dielectric_loss_db_per_m"]
        assert loss == pytest.approx(20.0 / math.log(10.0) * ((series * shunt) ** 0.5).real, rel=1e-12)
        assert line["delay_ps_per_mm"] == pytest.approx(1e9 * ((series * shunt) ** 0.5).imag / omega, rel=1e-12)
        assert line["conductance_s_per_m"] / (omega * line["capacitance_f_per_m"]) == pytest.approx(0.02, rel=1e-9)


def test_a_pair_is_twice_its_odd_and_half_its_even_mode() -> None:
    lines = check_lines(strip(frequency="1 GHz"))
    assert lines["both"]["common_mode_ohm"] == pytest.approx(lines["both as one"]["impedance_ohm"], rel=1e-12)
    single = lines["wire"]
    assert lines["both as one"]["resistance_ohm_per_m"] < single["resistance_ohm_per_m"]
    assert lines["both"]["resistance_ohm_per_m"] > 1.8 * single["resistance_ohm_per_m"]


def test_without_a_frequency_losses_are_not_told_and_change_nothing() -> None:
    lossless = strip(plane='roughness_foot = "2 um"\nconductivity = "20 MS/m"')
    line = check_lines(lossless)["wire"]
    assert "resistance_ohm_per_m" not in line
    assert line["impedance_ohm"] == check_lines(strip())["wire"]["impedance_ohm"]
    prepared = prepare(lossless, lossless.lines[0], SolverSettings())
    assert isinstance(prepared.nominal, Section)
    assert prepared.nominal.metals is None
    assert prepared.nominal.foot_side[0].df is None


def test_run_judges_the_lossy_impedance() -> None:
    scenario = strip(frequency="1 GHz", more='[[variations]]\nof = "C1.thickness"\ntolerance = "10 %"\n' + READ)
    result = run(scenario, coupons=256, seed=1)
    told = check_lines(scenario)
    for line in json.loads(run_json(result))["lines"]:
        assert line["nominal_ohm"] == told[line["name"]]["impedance_ohm"]
        assert line["mean_ohm"] == pytest.approx(line["nominal_ohm"], rel=2e-3)
        assert line["reading_rise"] == told[line["name"]]["reading_rise"]
    text = io.StringIO()
    print_run(result, Console(file=text, width=80))
    words = " ".join(text.getvalue().split())
    assert "lossy lines at 1 GHz, in magnitude" in words
    assert 'reading of "wire" 75 mm from the launch is higher by 1.15 ohm' in words


@pytest.mark.parametrize("frequency", ["", "1 GHz"])
def test_df_reaches_a_line_only_at_a_frequency(frequency: str) -> None:
    scenario = strip(frequency=frequency, more='[[variations]]\nof = ["C1.df", "C1.dk"]\ntolerance = "20 %"\n')
    reached = properties_that_reach(surroundings_of(scenario, scenario.lines[0]), scenario.lines[0])
    assert ("C1.df" in reached) == bool(frequency)
    drivers = {driver.variable for driver in run(scenario, coupons=256, seed=1).lines[0].drivers}
    assert drivers == ({"C1.dk", "C1.df"} if frequency else {"C1.dk"})


def test_a_coupon_with_a_negative_df_cannot_exist() -> None:
    scenario = strip(frequency="1 GHz")
    prepared = prepare(scenario, scenario.lines[0], SolverSettings())
    possible = prepared.section(NominalValues({**nominals_of(scenario), "C1.df": -0.001})).possible
    assert not possible.any()


def test_dk_is_carried_from_where_it_was_measured() -> None:
    """Textbook slope of a level loss tangent: 1.466 Df a decade, all round the line."""
    there, carried = (check_lines(strip(frequency="10 GHz", anchor=anchor))["wire"]
                      for anchor in ("", 'dk_frequency = "1 GHz"'))
    drop = 1.0 - carried["capacitance_f_per_m"] / there["capacitance_f_per_m"]
    assert drop == pytest.approx(1.466 * 0.02, rel=0.005)


def test_the_face_of_the_plane_that_the_line_sees_is_the_rough_one() -> None:
    """L1 is bonded to the core below it, so its foot faces the line."""
    smooth, seen, turned = (
        check_lines(strip(frequency="3 GHz", plane=plane))["wire"]["resistance_ohm_per_m"]
        for plane in ("", 'roughness_foot = "3 um"', 'roughness_crest = "3 um"'))
    assert seen > 1.05 * smooth
    assert turned == smooth


def test_a_plane_of_unlike_faces_must_say_which_is_its_foot() -> None:
    core = '[[layers]]\nname = "C0"\nkind = "core"\nthickness = "100 um"\ndk = 4.0\ndf = 0.01\n\n'
    between = changed(STRIP, ("FREQUENCY", 'frequency = "1 GHz"'), ("PLANE", 'roughness_foot = "2 um"'),
                      ('[[layers]]\nname = "L1"', core + '[[layers]]\nname = "L1"')).replace("ANCHOR", "")
    told = messages(between)
    assert len(told) == 1
    assert '"L1": foot: missing; must be "up" or "down", because its faces differ in roughness' in told[0]
    assert messages(changed(between, ('roughness_foot = "2 um"', 'roughness_foot = "2 um"\nfoot = "down"'))) == []
    assert messages(changed(between, ('frequency = "1 GHz"\n', ""))) == []


@pytest.mark.parametrize(("line", "rise"), [("wire", 1.15), ("both", 2.30), ("both as one", 1.15 / 2.0)])
@pytest.mark.parametrize("frequency", ["", "1 GHz"])
def test_series_resistance_raises_a_reading(line: str, rise: float, frequency: str) -> None:
    """Textbook: resistivity over area times the distance; 75 x 15 um copper has 15.3 ohm/m, at 75 mm 1.15 ohm."""
    reading = check(strip(frequency=frequency, more=READ)).lines[["wire", "both", "both as one"].index(line)].rise
    assert reading is not None
    assert reading.rise == pytest.approx(rise, abs=0.006)
    assert reading.rise == pytest.approx(reading.resistance * reading.position, rel=1e-12)


@pytest.mark.parametrize("reading", ['"75 mm"', "{}", '{ position = 75 }', '{ position = "0 mm" }', '{ at = "75 mm" }',
                                     '{ position = "75 ohm" }', '{ position = "75 mm", window = "5 mm" }'])
def test_a_reading_is_a_place_on_the_coupon(reading: str) -> None:
    told = messages(BOARD + f"\n[test]\nreading = {reading}\n")
    assert len(told) == 1
    assert "[test]: reading = " in told[0]
    assert "75 mm" in told[0]


def test_check_shows_losses_shares_and_readings() -> None:
    text = io.StringIO()
    print_check(check(strip(frequency="1 GHz", more=READ)), "um", Console(file=text, width=80), shares=True)
    shown = text.getvalue()
    assert max(len(line) for line in shown.splitlines()) <= 80
    words = " ".join(shown.split())
    for part in ("[ohm/m]", "[nH/m]", "[mS/m]", "[pF/m]", "[dB/m]", "[dB/inch]", "At 1 GHz: the impedance above is the "
                 "magnitude", "75 mm from the launch is higher by 1.15 ohm", "left side", "inner side", "capacitive"):
        assert part in words


@pytest.mark.parametrize("line", ["wire", "both", "both as one"])
def test_resin_at_the_height_of_the_copper_loses_like_its_ply(line: str) -> None:
    """With resin of the ply's own Dk nothing changes: exact; with a lower one the capacitance falls, G / C stays."""
    plain = check_lines(strip(frequency="1 GHz"))[line]
    text = STRIP.replace("FREQUENCY", 'frequency = "1 GHz"').replace("PLANE", "").replace("ANCHOR", "")
    same, lower = (check_lines(parse(changed(text, ('kind = "prepreg"', f'kind = "prepreg"\nresin_dk = {dk}'))))[line]
                   for dk in (4.0, 3.2))
    for key in ("resistance_ohm_per_m", "conductance_s_per_m", "capacitance_f_per_m", "impedance_ohm"):
        assert same[key] == pytest.approx(plain[key], rel=2e-5)
    assert lower["capacitance_f_per_m"] < 0.99 * plain["capacitance_f_per_m"]
    assert lower["conductance_s_per_m"] / lower["capacitance_f_per_m"] == pytest.approx(
        plain["conductance_s_per_m"] / plain["capacitance_f_per_m"], rel=1e-9)


def test_broadside_and_coplanar_lines_have_losses_too() -> None:
    """Of a broadside pair between equal dielectrics the loss tangent is exact; its two traces are in series or tied."""
    more = ('[[lines]]\nname = "facing"\nlayer = "L2"\npartner = "L2b"\nwidth = "75 um"\ntarget = "80 ohm"\n'
            '[[lines]]\nname = "facing, tied"\nlayer = "L2"\npartner = "L2b"\nwidth = "75 um"\ntarget = "30 ohm"\n'
            'mode = "common"\n'
            '[[lines]]\nname = "beside ground"\nlayer = "L2"\nground_gap = "100 um"\nwidth = "75 um"\n'
            'target = "50 ohm"\n' + READ)
    partner = ('[[layers]]\nname = "C2"\nkind = "core"\nthickness = "120 um"\ndk = 4.0\ndf = 0.02\n\n'
               '[[layers]]\nname = "L2b"\nkind = "copper"\nuse = "signal"\nfoil = "15 um"\n\n')
    text = changed(STRIP, ('[[layers]]\nname = "P1"', partner + '[[layers]]\nname = "P1"'),
                   ('name = "L2"\nkind = "copper"', 'name = "L2"\nkind = "copper"\nfoot = "down"'))
    text = changed(text, ("FREQUENCY", 'frequency = "1 GHz"')).replace("PLANE", "").replace("ANCHOR", "")
    lines = check_lines(parse(text + more))
    for name in ("facing", "facing, tied", "beside ground"):
        line = lines[name]
        assert line["conductance_s_per_m"] / (2e9 * math.pi * line["capacitance_f_per_m"]) == pytest.approx(
            0.02, rel=1e-6)
        assert line["resistance_ohm_per_m"] > 10.0
    assert lines["facing"]["reading_rise"]["rise_ohm"] == pytest.approx(2.30, abs=0.006)  # type: ignore[index]
    assert lines["facing, tied"]["reading_rise"]["rise_ohm"] == pytest.approx(0.575, abs=0.003)  # type: ignore[index]
    assert lines["facing"]["common_mode_ohm"] == pytest.approx(lines["facing, tied"]["impedance_ohm"], rel=1e-12)
