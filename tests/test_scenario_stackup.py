"""What the stackup decides, against the conventions of the scenario format; what varies; patterns."""

from __future__ import annotations

from typing import Literal

import pytest

from tests.scenario_texts import BOARD, changed, messages
from tolerance.scenario import (
    Evaluation,
    Layer,
    Line,
    Scenario,
    Variation,
    foot_side,
    members,
    parse,
    properties,
    reference_planes,
)
from tolerance.scenario.properties import matches
from tolerance.scenario.tables import Foot


def stack(words: str) -> Scenario:
    """A stackup from a row of words: mask, core, prepreg, plane, signal, signal-up, signal-down.

    Layers are named by number, from 1. Built from the models directly, without the checks of a file.
    """
    layers = []
    for number, word in enumerate(words.split(), start=1):
        kind, _, foot = word.partition("-")
        if kind in ("signal", "plane"):
            points: Foot | None = "up" if foot == "up" else "down" if foot == "down" else None
            use: Literal["signal", "plane"] = "signal" if kind == "signal" else "plane"
            layers.append(Layer(name=str(number), kind="copper", use=use, foil=18e-6, foot=points))
        elif kind == "mask":
            layers.append(Layer(name=str(number), kind="mask", thickness=25e-6, over_copper=15e-6, dk=3.5))
        else:
            layers.append(Layer(name=str(number), kind="core" if kind == "core" else "prepreg", thickness=1e-4, dk=4.0))
    return Scenario(format=1, title="stack", evaluation=Evaluation(limit=0.1), layers=tuple(layers), lines=())


@pytest.mark.parametrize(("words", "layer", "expected", "convention"), [
    ("mask signal prepreg plane core plane", "2", "down", "outside: to the laminate below it"),
    ("signal core plane", "1", "down", "bonded to the core it was etched on"),
    ("plane core signal", "3", "up", "bonded to the core it was etched on, which is above"),
    ("plane prepreg signal mask", "3", "up", "outside at the bottom: the laminate is above"),
    ("plane core signal prepreg plane", "3", "up", "core above, prepreg below"),
    ("plane prepreg signal core plane", "3", "down", "prepreg above, core below"),
    ("prepreg signal core plane", "2", "down", "under a cover of prepreg, etched on the core"),
    ("core signal prepreg plane", "2", "up", "a cover of core is what it was etched on"),
    ("plane prepreg signal-up prepreg plane", "3", "up", "between two prepregs it says so itself"),
    ("prepreg signal-down prepreg plane", "2", "down", "between a cover and a prepreg it says so itself"),
    ("plane core signal-down core plane", "3", "down", "between two cores it says so itself"),
])
def test_side_of_the_foot(words: str, layer: str, expected: str, convention: str) -> None:
    assert foot_side(stack(words), layer) == expected, convention


def test_side_of_the_foot_where_nothing_decides() -> None:
    with pytest.raises(ValueError, match="does not decide"):
        foot_side(stack("signal prepreg plane prepreg signal"), "3")
    with pytest.raises(ValueError, match="not copper"):
        foot_side(stack("signal prepreg plane"), "2")
    with pytest.raises(KeyError):
        foot_side(stack("signal prepreg plane"), "9")


def line(layer: str, references: tuple[str, ...] | None = None, partner: str | None = None) -> Line:
    return Line(name="line", layer=layer, width=1e-4, target=50.0, references=references, partner=partner)


STACK = "signal prepreg plane core signal prepreg signal core plane prepreg plane"  # planes: 3, 9, 11


@pytest.mark.parametrize(("words", "item", "expected"), [
    (STACK, line("1"), (None, "3")),
    (STACK, line("5"), ("3", "9")),
    (STACK, line("7"), ("3", "9")),
    (STACK, line("5", references=("3",)), ("3", None)),
    (STACK, line("5", references=("11",)), (None, "11")),
    (STACK, line("5", references=("11", "3")), ("3", "11")),
    (STACK, line("7", partner="5"), ("3", "9")),
    ("prepreg signal core plane", line("2"), (None, "4")),
    ("plane core signal", line("3"), ("1", None)),
    ("plane prepreg plane core signal prepreg plane core plane", line("5"), ("3", "7")),
])
def test_reference_planes(words: str, item: Line, expected: tuple[str | None, str | None]) -> None:
    assert reference_planes(stack(words), item) == expected


def test_a_plane_between_broadside_traces_is_told() -> None:
    text = changed(BOARD, ('gap = "150 um"', 'partner = "L1"'))
    assert any("must have no plane between it and the line's own layer" in one for one in messages(text))


def test_a_plane_that_is_not_named_is_no_reference() -> None:
    text = changed(BOARD, ('gap = "150 um"', 'gap = "150 um"\nreferences = ["L4"]'))
    scenario = parse(text)
    assert reference_planes(scenario, scenario.lines[1]) == (None, "L4")


def test_what_varies_in_layer_order_with_its_nominal() -> None:
    """Order and meaning by the table "Properties that vary" of the scenario format."""
    found = {item.name: item.nominal for item in properties(parse(BOARD))}
    assert list(found) == [
        "top mask.thickness", "top mask.over_copper", "top mask.dk",
        "L1.etch", "L1.foil", "L1.plating", "L1.etch_factor", "L1.registration",
        "P1.thickness", "P1.dk", "L2.etch", "L2.foil", "L2.registration", "C1.thickness", "C1.dk",
        "L3.etch", "L3.foil", "L3.etch_factor", "L3.registration", "P2.thickness", "P2.dk",
        "L4.etch", "L4.foil", "L4.registration",
    ]
    assert found["L1.etch"] == 0.0
    assert found["L1.registration"] == 0.0
    assert found["P1.thickness"] == 100e-6
    assert found["L1.plating"] == 25e-6
    assert found["L3.etch_factor"] == 2.5


def test_df_varies_where_it_is_given() -> None:
    scenario = parse(changed(BOARD, ("dk = 4.0", "dk = 4.0\ndf = 0.02")))
    assert [item.name for item in properties(scenario) if item.property == "df"] == ["P1.df"]


@pytest.mark.parametrize(("of", "expected"), [
    (("P1.thickness",), ["P1.thickness"]),
    (("P*.dk",), ["P1.dk", "P2.dk"]),
    (("*.dk",), ["top mask.dk", "P1.dk", "C1.dk", "P2.dk"]),
    (("P2.dk", "P1.dk"), ["P1.dk", "P2.dk"]),
    (("P*.dk", "P1.dk"), ["P1.dk", "P2.dk"]),
    (("top mask.*",), ["top mask.thickness", "top mask.over_copper", "top mask.dk"]),
    (("L*.plating",), ["L1.plating"]),
    (("P1.*h*s",), ["P1.thickness"]),
])
def test_patterns(of: tuple[str, ...], expected: list[str]) -> None:
    assert [item.name for item in members(parse(BOARD), Variation(of=of))] == expected


@pytest.mark.parametrize(("pattern", "name", "expected"), [
    ("P1.dk", "P1.dk", True), ("P1.d", "P1.dk", False), ("1.dk", "P1.dk", False), ("*", "P1.dk", True),
    ("P?.dk", "P1.dk", False), ("P[1].dk", "P1.dk", False), ("P[1].dk", "P[1].dk", True), ("a*a", "a", False),
    ("*a*b*", "xbxa", False), ("*a*b*", "xaxb", True), ("*a*a*", "xa", False), ("**", "", True), ("a*b*a", "aba", True),
])
def test_only_the_star_is_special(pattern: str, name: str, expected: bool) -> None:
    assert matches(pattern, name) is expected


def test_many_stars_end_soon() -> None:
    assert not matches("*a" * 2000, "a" * 1999 + "b")
