"""Presets: what they lay under a scenario, what stays the scenario's, and what they come to at typical lines."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from tests.scenario_texts import BOARD, HEAD, LINES, SIX_LAYERS, changed, messages
from tolerance.command import main
from tolerance.process.draws import process_of
from tolerance.report.understood import variation_table
from tolerance.scenario import members, parse
from tolerance.scenario.presets import preset_names, read_preset
from tolerance.scenario.tables import Scenario, Variation
from tolerance.study.run import run

BARE = HEAD + SIX_LAYERS + LINES
STATUSES = ("common practice", "from memory", "found in public pages")


def with_preset(name: str, text: str = BARE) -> Scenario:
    return parse(changed(text, ("format = 1", f'format = 1\npreset = "{name}"')))


def laws(scenario: Scenario) -> dict[str, Variation]:
    return {item.name: variation for variation in scenario.variations for item in members(scenario, variation)}


def half_width(scenario: Scenario, name: str) -> float:
    tolerance = laws(scenario)[name].tolerance
    assert tolerance is not None
    return tolerance.value


def test_the_names() -> None:
    assert preset_names() == ("close-control", "contract-limits", "fine-image", "ordinary-etch")
    for name in preset_names():
        preset = read_preset(name)
        assert preset.name == name
        assert all(any(words in entry.status for words in STATUSES) for entry in preset.entries)


def test_every_layer_gets_what_belongs_to_it() -> None:
    scenario = with_preset("ordinary-etch")
    found = laws(scenario)
    assert sorted(found) == sorted([
        "top mask.thickness", "top mask.over_copper", "L1.etch", "L1.plating", "P1.thickness", "P1.dk",
        "C1.thickness", "C1.dk", "L3.etch", "L3.foil", "P2.thickness", "P2.dk"])
    widths = {name: half_width(scenario, name) for name in found}
    assert widths["L1.etch"] == pytest.approx(25e-6)
    assert widths["L3.etch"] == pytest.approx(18e-6)
    assert widths["L1.plating"] == pytest.approx(10e-6)
    assert widths["C1.thickness"] == pytest.approx(25e-6), "class B of IPC-4101 for 0.120 to 0.164 mm"
    assert widths["P1.thickness"] == pytest.approx(0.10)
    assert found["top mask.thickness"].together
    assert process_of(scenario).variables[-1].name == "top mask.thickness + top mask.over_copper"


@pytest.mark.parametrize(("thickness", "ordinary", "close"), [
    (0.100, 18, 13), (0.119, 18, 13), (0.120, 25, 18), (0.2, 38, 25), (0.36, 50, 38), (0.71, 64, 50), (1.0, 100, 75),
    (1.5, 130, 75), (2.0, 180, 100), (3.0, 230, 130),
])
def test_core_classes(thickness: float, ordinary: int, close: int) -> None:
    """IPC-4101 classes B/L (found in public pages) and C/M (from memory), dielectric only."""
    text = changed(BARE, ('thickness = "120 um"', f'thickness = "{thickness} mm"'))
    for name, expected in (("ordinary-etch", ordinary), ("close-control", close)):
        assert half_width(with_preset(name, text), "C1.thickness") == pytest.approx(1e-6 * expected)


def test_what_the_scenario_names_stays_with_it() -> None:
    scenario = with_preset("close-control", BOARD)
    assert half_width(scenario, "L3.etch") == pytest.approx(0.10)
    assert half_width(scenario, "P1.thickness") == pytest.approx(0.10)
    assert half_width(scenario, "P2.thickness") == pytest.approx(0.07)
    assert set(scenario.origins) == set(laws(scenario)) - {"P1.thickness", "P1.dk", "P2.dk", "L1.etch", "L3.etch"}
    cells = {row[1]: row[-1] for row in variation_table(scenario).rows}
    assert cells["P1.thickness"] == "this scenario"
    assert cells["P2.thickness"] == "preset close-control: common practice, no source"
    assert "# ---- preset close-control ----" in scenario.text, "the record re-makes the run"


def test_laminate_by_resin_varies_in_its_resin() -> None:
    resin = 'resin_dk = 3.2\nglass_dk = 6.1\nresin_content = "65 %"\nglass_areal_weight = "56 g/m^2"'
    found = laws(with_preset("fine-image", changed(BARE, ('thickness = "100 um"\ndk = 4.0', resin))))
    assert "P1.resin_content" in found
    assert "P1.thickness" not in found
    assert "P1.dk" not in found


def test_contract_limits_reach_from_four_fifths_of_the_width_to_all_of_it() -> None:
    law = laws(with_preset("contract-limits"))["L1.etch"]
    assert law.shape == "uniform"
    assert law.tolerance is not None
    assert law.shift is not None
    ends = [law.shift.of(180e-6) + side * law.tolerance.of(180e-6) for side in (-1, 1)]
    assert ends == pytest.approx([-0.2 * 180e-6, 0.0], abs=1e-12)


def test_correlations_may_name_what_a_preset_varies() -> None:
    scenario = with_preset("ordinary-etch", BARE + (
        '[[correlations]]\nbetween = ["P1.thickness", "P1.dk"]\ncoefficient = -0.7\n'))
    assert np.min(process_of(scenario).correlation) == -0.7


@pytest.mark.parametrize(("line", "part"), [
    ('preset = "ordinary"', 'preset = "ordinary": must be the name of a preset: close-control, contract-limits, '
                            "fine-image or ordinary-etch"),
    ("preset = 3", "preset = 3: must be the name of a preset"),
])
def test_another_name_is_told(line: str, part: str) -> None:
    told = messages(changed(BARE, ("format = 1", f"format = 1\n{line}")))
    assert len(told) == 1
    assert part in told[0]


def test_an_extending_scenario_may_take_another_preset(tmp_path: Path) -> None:
    (tmp_path / "base.toml").write_text(changed(BARE, ("format = 1", 'format = 1\npreset = "ordinary-etch"')),
                                        encoding="utf-8")
    scenario = parse('format = 1\nextends = "base.toml"\npreset = "fine-image"\n', folder=tmp_path)
    assert half_width(scenario, "P1.thickness") == pytest.approx(0.05)


TYPICAL = """
format = 1
title = "Typical lines"
preset = "PRESET"
[evaluation]
limit = "10 %"
coupons = 16384
seed = 1
[[layers]]
name = "mask"
kind = "mask"
thickness = "25 um"
over_copper = "12 um"
dk = 3.5
[[layers]]
name = "L1"
kind = "copper"
use = "signal"
foil = "17 um"
plating = "28 um"
[[layers]]
name = "P1"
kind = "prepreg"
thickness = "100 um"
dk = 4.0
[[layers]]
name = "L2"
kind = "copper"
use = "plane"
foil = "16 um"
[[layers]]
name = "C1"
kind = "core"
thickness = "100 um"
dk = 4.0
[[layers]]
name = "L3"
kind = "copper"
use = "signal"
foil = "16 um"
[[layers]]
name = "P2"
kind = "prepreg"
thickness = "100 um"
dk = 4.0
[[layers]]
name = "L4"
kind = "copper"
use = "plane"
foil = "16 um"
[[lines]]
name = "microstrip"
layer = "L1"
width = "164 um"
target = "50 ohm"
[[lines]]
name = "stripline"
layer = "L3"
width = "83 um"
target = "50 ohm"
"""


@pytest.mark.parametrize(("preset", "microstrip", "stripline"), [
    ("ordinary-etch", 3.3, 3.8), ("close-control", 2.3, 2.6), ("fine-image", 1.6, 1.7),
])
def test_what_a_preset_comes_to(preset: str, microstrip: float, stripline: float) -> None:
    """Deviation in per cent of the impedance: root sums of squares of the slopes of an independent boundary-element
    calculation, done apart from this program, to its digits; first order only, so 0.1 more is left."""
    result = run(parse(TYPICAL.replace("PRESET", preset)))
    found = [100.0 * line.deviation.value / line.mean.value for line in result.lines]
    assert found == pytest.approx([microstrip, stripline], abs=0.15)


def test_the_command(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit):
        main(["presets"])
    words = capsys.readouterr().out
    assert all(f"{name}: " in words for name in preset_names())
    with pytest.raises(SystemExit):
        main(["presets", "fine-image", "--json"])
    (one,) = json.loads(capsys.readouterr().out)["presets"]
    assert one["name"] == "fine-image"
    assert all(entry["status"] for entry in one["entries"])
    with pytest.raises(SystemExit) as ended:
        main(["presets", "coarse"])
    assert ended.value.code == 2
