"""The boards in scenarios/: they load, add up, come near their targets, and say where their tolerances come from."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from tolerance.scenario import load
from tolerance.scenario.tables import Scenario
from tolerance.study.check import check
from tolerance.study.run import run

FOLDER = Path(__file__).parents[1] / "scenarios"
FILES = sorted(FOLDER.glob("*.toml"))
STATUSES = ("common practice", "from memory", "found in public pages")


def copper_count(scenario: Scenario) -> int:
    return sum(layer.kind == "copper" for layer in scenario.layers)


@pytest.mark.parametrize("path", FILES, ids=lambda path: path.stem)
def test_nominals_come_near_their_targets(path: Path) -> None:
    for line in check(load(path)).lines:
        assert line.impedance == pytest.approx(line.target, rel=0.015), line.name


@pytest.mark.parametrize("path", FILES, ids=lambda path: path.stem)
def test_every_tolerance_says_where_it_comes_from(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    variations = text.partition("[[variations]]")[2]
    for entry in re.split(r"^\[+[a-z]+\]+$", variations, flags=re.MULTILINE):
        numbers = [line for line in entry.split("\n") if line.startswith(("tolerance ", "low ", "coefficient "))]
        assert not numbers or any(status in entry for status in STATUSES), entry


@pytest.mark.parametrize("path", FILES, ids=lambda path: path.stem)
def test_names_say_how_many_layers_and_stacks_are_symmetrical(path: Path) -> None:
    scenario = load(path)
    assert f"{copper_count(scenario)}-layer" in path.stem
    there = [(layer.kind, layer.thickness, layer.foil, layer.dk) for layer in scenario.layers]
    assert there == there[::-1]


@pytest.mark.parametrize("path", FILES, ids=lambda path: path.stem)
def test_the_told_thickness_is_the_sum_over_the_copper(path: Path) -> None:
    scenario = load(path)
    told = re.search(r"([0-9.]+) mm over the copper", scenario.text)
    assert told is not None
    total = sum(layer.copper_thickness if layer.kind == "copper" else layer.thickness or 0.0
                for layer in scenario.layers if layer.kind != "mask")
    digits = len(told[1].partition(".")[2])
    assert round(1e3 * total, digits) == float(told[1])


def test_the_boards_are_of_the_sizes_promised() -> None:
    boards = [load(path) for path in FILES]
    assert {copper_count(board) for board in boards} == {4, 6, 10}
    largest = max(boards, key=copper_count)
    assert len(largest.lines) >= 8
    outside = {largest.lines[0].layer, "L10"}
    assert any(line.layer in outside for line in largest.lines)
    assert any(line.layer not in outside for line in largest.lines)
    assert {line.is_pair for line in largest.lines} == {True, False}


def test_registration_of_the_ferry_beacon_shows_in_no_slope_and_comes_first_by_yield() -> None:
    """What the file says of itself: to either side the pair is the same, mirrored, and higher than in the middle."""
    line = run(load(FOLDER / "ferry-beacon-6-layer.toml"), coupons=16384).lines[1]
    assert line.mean.low > line.nominal + 0.3
    assert line.drivers[0].variable == "C1.thickness"
    moved = {driver.variable: driver for driver in line.drivers}["L3.registration"]
    assert moved.first.value < 0.5 * moved.total.value
    assert line.levers is not None
    assert {lever.variable for lever in line.levers.each[:2]} == {"L3.registration", "L4.registration"}
    gains = {lever.variable: lever.halved for lever in line.levers.each}
    assert gains["L3.registration"].low > 2.0 * gains["C1.thickness"].value
    assert line.above.value > 0.95 * (line.above.value + line.below.value)
