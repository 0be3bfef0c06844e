"""The starter scenario and the JSON Schema."""

from __future__ import annotations

import json
import tomllib
from pathlib import Path
from typing import Any

import jsonschema
import pytest

from tests.scenario_texts import BOARD, changed, messages
from tolerance.errors import InputError
from tolerance.scenario import json_schema, load, reference_planes, starter_text, write_starter

SCHEMA = jsonschema.Draft202012Validator(json_schema())


def wrong(text: str) -> list[str]:
    """Where the schema finds fault with a scenario's text."""
    return [error.json_path for error in SCHEMA.iter_errors(tomllib.loads(text))]


def test_the_starter_is_a_scenario(tmp_path: Path) -> None:
    path = tmp_path / "start.toml"
    write_starter(path)
    scenario = load(path)
    assert [line.is_pair for line in scenario.lines] == [False, True]
    assert all(reference_planes(scenario, line) == (None, "L2") for line in scenario.lines)
    assert len(scenario.variations) >= 5
    assert wrong(starter_text()) == []


def test_the_starter_overwrites_nothing(tmp_path: Path) -> None:
    path = tmp_path / "start.toml"
    path.write_text("mine", encoding="utf-8")
    with pytest.raises(InputError, match="is there already"):
        write_starter(path)
    assert path.read_text(encoding="utf-8") == "mine"
    with pytest.raises(InputError):
        write_starter(tmp_path)


def test_the_starter_needs_a_folder_that_is_there(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="cannot be written"):
        write_starter(tmp_path / "nowhere" / "start.toml")


def test_every_tolerance_of_the_starter_says_where_it_comes_from() -> None:
    lines = starter_text().split("\n")
    numbers = [line for line in lines if line.startswith(("tolerance ", "low ", "coefficient "))]
    assert numbers
    assert all(any(word in line for word in ("no source", "memory", "glossary")) for line in numbers)


def test_the_schema_is_one() -> None:
    jsonschema.Draft202012Validator.check_schema(json_schema())
    json.dumps(json_schema(), allow_nan=False)


def test_every_key_is_described() -> None:
    for table in json_schema()["$defs"].values():
        for key, schema in table["properties"].items():
            assert len(schema["description"]) > 20, key


RESIN = 'resin_dk = 3.2\nglass_dk = 6.1\nresin_content = "64 %"\nglass_areal_weight = "47 g/m^2"'


@pytest.mark.parametrize("text", [
    BOARD,
    changed(BOARD, ("dk = 4.0", "dk = 4")),
    changed(BOARD, ("etch_factor = 3.0", "etch_factor = inf")),
    changed(BOARD, ('thickness = "100 um"', 'thickness = "4.3mil"')),
    changed(BOARD, ('thickness = "100 um"\ndk = 4.0', RESIN)),
    changed(BOARD, ("tolerance = 0.1", 'shape = "uniform"\nlow = 3.5\nhigh = 4.5')),
    changed(BOARD, ("tolerance = 0.1", 'shape = "measured"\nfile = "press.csv"\ncolumn = "P1"')),
    changed(BOARD, ("together = true", "level = { lot = 0.5, coupon = 0.5 }")),
    changed(BOARD, ('gap = "150 um"', 'gap = "150 um"\nmode = "common"')),
    changed(BOARD, ('gap = "150 um"', 'partner = "L1"\noffset = "-10 um"')),
    BOARD + '[test]\nbias = "-1 ohm"\n[report]\nlengths = "mil"\n',
    BOARD + '[[offers]]\nof = "P1.thickness"\ntolerance = "5 %"\ncost = 4\n',
    BOARD + '[[correlations]]\nbetween = ["P1.thickness", "P1.dk"]\ncoefficient = -0.5\n',
    'format = 1\nextends = "base.toml"\n[[layers]]\nname = "P1"\ndk = 3.7\n',
])
def test_the_schema_accepts_what_the_format_has(text: str) -> None:
    assert wrong(text) == []


@pytest.mark.parametrize("changes", [
    ("format = 1", "format = 2"),
    ('title = "Orchard gateway"\n', ""),
    ("[evaluation]", "[weather]"),
    ('limit = "10 %"', "limit = 10"),
    ('limit = "10 %"\n', ""),
    ('"100 um"', '"100"'),
    ('"100 um"', '"100 parsec"'),
    ('"100 um"', '"3 oz"'),
    ("dk = 4.0", "dk = 0.4"),
    ("dk = 4.0", "dk = true"),
    ("dk = 4.0", 'dk = 4.0\nfoil = "1 oz"'),
    ("dk = 4.0\n", ""),
    ("dk = 4.0", f"dk = 4.0\n{RESIN}"),
    ('kind = "core"', 'kind = "foil"'),
    ('foil = "18 um"\n', ""),
    ('over_copper = "15 um"', 'over_coper = "15 um"'),
    ('width = "180 um"\n', ""),
    ('width = "180 um"', 'width = "180 um"\nmode = "common"'),
    ('width = "180 um"', 'width = "180 um"\noffset = "1 um"'),
    ('gap = "150 um"', 'gap = "150 um"\npartner = "L1"'),
    ("tolerance = 0.1", "tolerance = 0.1\nsigmas = 3\ncpk = 1"),
    ("tolerance = 0.1", 'tolerance = 0.1\nshape = "uniform"\nsigmas = 3'),
    ("tolerance = 0.1", 'tolerance = 0.1\nfile = "press.csv"'),
    ("tolerance = 0.1", "low = 1\nhigh = 2"),
    ("tolerance = 0.1", 'shape = "measured"'),
    ("together = true", 'level = "board"'),
])
def test_schema_and_checks_refuse_the_same(changes: tuple[str, str]) -> None:
    text = changed(BOARD, changes)
    assert wrong(text)
    assert messages(text)


def test_schema_and_models_have_the_same_keys() -> None:
    definitions: dict[str, Any] = json_schema()["$defs"]
    assert set(definitions) == {
        "layers", "lines", "variations", "correlations", "offers", "sweep", "evaluation", "test", "report"}
    assert definitions["lines"]["additionalProperties"] is False
