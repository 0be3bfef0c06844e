"""Whatever a scenario's text becomes, the answer is a scenario or our own error: one line for each problem."""

from __future__ import annotations

import copy
import json
import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tests.scenario_texts import BOARD
from tolerance.errors import ScenarioError, ToleranceError
from tolerance.scenario import Scenario, load, members, parse, reference_planes

FULL = BOARD + """
[[correlations]]
between = ["P1.thickness", "P1.dk"]
coefficient = -0.5
[[offers]]
of = "P1.thickness"
tolerance = "5 %"
cost = 4.0
[test]
repeatability = "0.5 ohm"
sample_size = 8
accept_number = 0
[report]
lengths = "mil"
"""

TELLING = st.sampled_from([
    0, 1, -1, 3, 0.5, 1e300, -0.0, float("inf"), float("-inf"), float("nan"), True, False, 10**400, "", " ", "*",
    "P1", "L1", "L2", "L3", "P1.dk", "P1.thickness", "*.dk", "*.*", "L*.etch", "L1.registration", ".", "a.b", "\n",
    "\\", "0 um", "-1 um", "1e-300 um", "10 %", "0 %", "1000 %", "5 um", "1 oz", "50 ohm", "1 GHz", "inf um", "up",
    "down", "mask", "copper", "prepreg", "core", "signal", "plane", "uniform", "triangular", "truncated_normal",
    "lognormal", "measured", "normal", "common", "lot", [], {}, [[]], ["P1.dk", "P1.dk"], ["L2", "L4"], {"lot": 1.0},
    {"lot": 0.5, "panel": 0.6}, [{}], "base.toml",
])
KEYS = st.sampled_from([
    "name", "kind", "thickness", "over_copper", "dk", "df", "use", "foil", "plating", "etch_factor", "foot", "layer",
    "width", "gap", "partner", "offset", "ground_gap", "references", "mode", "of", "shape", "tolerance", "sigmas",
    "cpk", "shift", "low", "high", "together", "level", "file", "column", "sheet", "between", "coefficient",
    "frequency", "limit", "coupons", "seed", "resin_content", "extends", "thicknes", "a\nb", "", "test",
    "layers", "report",
])
VALUES = st.one_of(TELLING, TELLING, st.floats(), st.integers(), st.text(max_size=12), st.datetimes()).map(
    copy.deepcopy)


def paths(value: Any, path: tuple[Any, ...] = ()) -> Iterator[tuple[Any, ...]]:
    """The way to every value inside, containers too."""
    if path:
        yield path
    items = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    for key, item in items:
        yield from paths(item, (*path, key))


def as_toml(value: Any) -> str:
    """A value as TOML writes it in one line."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    if isinstance(value, dict):
        return "{" + ", ".join(f"{as_toml(str(key))} = {as_toml(item)}" for key, item in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(as_toml(item) for item in value) + "]"
    return f"0x{value:x}" if isinstance(value, int) and value > 10**300 else str(value)


def judged(text: str) -> Scenario | None:
    """The scenario, or None where our own error tells each problem on a line of its own."""
    try:
        return parse(text)
    except ScenarioError as problem:
        error = problem
    told = str(error).split("\n")
    assert len(told) == len(error.problems)
    assert all(one.startswith("scenario.toml: ") for one in told)
    assert not any(word in str(error) for word in ("pydantic", "Input should", "Traceback", "<class"))
    return None


@st.composite
def mutated(draw: st.DrawFn) -> dict[str, Any]:
    """The full board with a few values replaced, removed, added or doubled."""
    board: dict[str, Any] = copy.deepcopy(tomllib.loads(FULL))
    for _ in range(draw(st.integers(1, 4))):
        *way, last = draw(st.sampled_from(list(paths(board))))
        place: Any = board
        for step in way:
            place = place[step]
        action = draw(st.sampled_from(["replace", "replace", "remove", "add", "double"]))
        if action == "replace":
            place[last] = draw(VALUES)
        elif action == "remove":
            del place[last]
        elif isinstance(place, list):
            place.append(copy.deepcopy(place[last]) if action == "double" else draw(VALUES))
        else:
            place[draw(KEYS)] = draw(VALUES)
    return board


@settings(max_examples=400, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(board=mutated())
def test_changed_values_never_bring_anything_but_our_own_error(board: dict[str, Any]) -> None:
    scenario = judged("\n".join(f"{as_toml(key)} = {as_toml(value)}" for key, value in board.items()))
    if scenario is not None:
        assert all(any(reference_planes(scenario, line)) for line in scenario.lines)
        assert all(members(scenario, variation) for variation in scenario.variations)


@settings(max_examples=150, deadline=None)
@given(start=st.integers(0, len(BOARD)), length=st.integers(0, 40), put=st.text(max_size=6))
def test_changed_text_never_brings_anything_but_our_own_error(start: int, length: int, put: str) -> None:
    judged(BOARD[:start] + put + BOARD[start + length:])


@settings(max_examples=50, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(content=st.one_of(st.binary(max_size=60), st.binary(max_size=4).map(lambda put: BOARD.encode()[:300] + put)))
def test_any_bytes_bring_a_message(tmp_path: Path, content: bytes) -> None:
    path = tmp_path / "any.toml"
    path.write_bytes(content)
    with pytest.raises(ToleranceError) as told:
        load(path)
    assert str(told.value)
