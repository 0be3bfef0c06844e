"""The scenario format as a JSON Schema, for editors that complete and check TOML files.

It says what one file can say by itself: keys, kinds of values, units, and which keys go together. What an extending
file leaves to its base is not demanded of it. Names that refer to layers are checked by reading the scenario only.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from tolerance.scenario.drafts import kind_of
from tolerance.scenario.entry_rules import SHAPE_KEYS
from tolerance.scenario.keys import Kind, Text
from tolerance.scenario.layer_keys import LAYER_KEYS, RESIN_KEYS
from tolerance.scenario.presets import preset_names
from tolerance.scenario.tables import (
    COPPER,
    FORMAT,
    MASK,
    PREPREG,
    Correlation,
    Evaluation,
    ImpedanceTest,
    Layer,
    Line,
    Offer,
    Report,
    Sweep,
    Table,
    Variation,
)

Schema = dict[str, Any]


def json_schema() -> Schema:
    """JSON Schema (draft 2020-12) of a scenario file."""
    entries: dict[str, tuple[type[Table], str]] = {
        "layers": (Layer, "The stackup, top to bottom, as finished"),
        "lines": (Line, "The controlled-impedance lines"),
        "variations": (Variation, "What varies in the process, and how"),
        "correlations": (Correlation, "Variables that go together"),
        "offers": (Offer, "What a fabricator would tighten, and its price"),
        "sweep": (Sweep, "What `tolerance sweep` varies from one scenario to the next"),
    }
    single: dict[str, type[Table]] = {"evaluation": Evaluation, "test": ImpedanceTest, "report": Report}
    lists = {name: {"type": "array", "items": {"$ref": f"#/$defs/{name}"}, "description": words}
             for name, (_, words) in entries.items()}
    models: dict[str, type[Table]] = {name: model for name, (model, _) in entries.items()} | single
    return {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        "title": "Scenario of tolerance",
        "description": "A stackup, its controlled-impedance lines and how the process varies; format 1",
        "type": "object",
        "properties": {**_top_keys(), **{name: {"$ref": f"#/$defs/{name}"} for name in single}, **lists},
        "additionalProperties": False,
        "required": ["format"],
        "if": {"required": ["extends"]},
        "else": _complete(),
        "$defs": {name: _table(model) for name, model in models.items()},
    }


def _top_keys() -> Schema:
    return {
        "format": {"const": FORMAT, "description": "Version of this format"},
        "title": {**Text("a title").json_schema(), "description": "What reports are headed with"},
        "extends": {"type": "string", "minLength": 1,
                    "description": "Another scenario, relative to this file; entries with the same name are merged"},
        "preset": {"enum": list(preset_names()),
                   "description": "Tolerances for what no variation names; `tolerance presets` lists them"},
    }


def _table(model: type[Table]) -> Schema:
    """Keys of one table, none of them demanded."""
    return {
        "title": model.__name__, "description": (model.__doc__ or "").strip(), "type": "object",
        "properties": {key: _key(model, key) for key in model.model_fields}, "additionalProperties": False,
    }


def _key(model: type[Table], key: str) -> Schema:
    kind: Kind = kind_of(model, key)
    described = f"{model.model_fields[key].description}.\nAllowed: {kind.allowed}"
    return {**kind.json_schema(), "description": described}


def _complete() -> Schema:
    """What a scenario that extends no other must say."""
    conditions: dict[str, Schema] = {
        "layers": {"allOf": [_layer_of(kind) for kind in LAYER_KEYS]},
        "lines": {"allOf": [
            {"not": {"required": ["partner", "gap"]}}, {"not": {"required": ["partner", "ground_gap"]}},
        ], "dependentRequired": {"offset": ["partner"]}, "dependentSchemas": {"mode": _any_of("gap", "partner")}},
        "variations": {"allOf": [*(_shape_of(shape) for shape in SHAPE_KEYS), _measured()]},
        "correlations": {}, "offers": {}, "sweep": _of_or_file(),
    }
    models: dict[str, type[Table]] = {
        "layers": Layer, "lines": Line, "variations": Variation, "correlations": Correlation, "offers": Offer,
        "sweep": Sweep,
    }
    lists: dict[str, Schema] = {
        name: {"items": {"required": _required(model), **conditions[name]}} for name, model in models.items()}
    for name in ("layers", "lines"):
        lists[name]["minItems"] = 1
    limit_somewhere = [
        {"required": ["evaluation"], "properties": {"evaluation": {"required": ["limit"]}}},
        {"properties": {"lines": {"items": {"required": ["limit"]}}}},
    ]
    return {"required": ["title", "layers", "lines"], "properties": lists, "anyOf": limit_somewhere}


def _required(model: type[Table]) -> list[str]:
    return [key for key, info in model.model_fields.items() if info.is_required()]


def _layer_of(kind: str) -> Schema:
    keys = LAYER_KEYS[kind]
    others = [key for key in Layer.model_fields if key not in ("name", "kind", *keys.needed, *keys.taken)]
    if kind in (MASK, COPPER):
        then: Schema = {"required": list(keys.needed)}
    else:
        by_resin = {"required": list(RESIN_KEYS), "not": {"required": ["dk"]}}
        band = {"resin_dk"} if kind == PREPREG else set()
        by_dk = {"required": list(keys.needed), **_none_of(key for key in RESIN_KEYS if key not in band)}
        then = {"anyOf": [by_dk, by_resin]}
    return {"if": {"properties": {"kind": {"const": kind}}, "required": ["kind"]},
            "then": {"allOf": [then, _none_of(others)]}}


def _shape_of(shape: str) -> Schema:
    """Keys of a shape; a variation without a shape is normal."""
    takes = SHAPE_KEYS[shape]
    barred = ["file", "column", "sheet"]
    barred += [key for key, taken in (("sigmas", takes.sigmas), ("cpk", takes.cpk)) if not taken]
    half_width: Schema = {"required": ["tolerance"], **_none_of(("low", "high"))}
    if takes.ends:
        half_width = {"anyOf": [half_width, {"required": ["low", "high"], **_none_of(("tolerance",))}]}
    one_of_two = {"not": {"required": ["sigmas", "cpk"]}}
    named: Schema = {"properties": {"shape": {"const": shape}}}
    if shape != "normal":
        named["required"] = ["shape"]
    return {"if": named, "then": {"allOf": [half_width, _none_of(barred), one_of_two]}}


def _measured() -> Schema:
    named = {"properties": {"shape": {"const": "measured"}}, "required": ["shape"]}
    barred = _none_of(("tolerance", "low", "high", "sigmas", "cpk"))
    return {"if": named, "then": {"required": ["file", "column"], **barred}}


def _of_or_file() -> Schema:
    listed: Schema = {"required": ["of", "values"], **_none_of(("file", "sheet"))}
    return {"anyOf": [listed, {"required": ["file"], **_none_of(("of", "values"))}]}


def _none_of(keys: Iterable[str]) -> Schema:
    return {"properties": dict.fromkeys(keys, False)}


def _any_of(*keys: str) -> Schema:
    return {"anyOf": [{"required": [key]} for key in keys]}
