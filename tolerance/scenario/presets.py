"""Presets: tolerances by the kind of layer, from data files of this package, for what a scenario does not name itself.

A preset speaks about layers by their place: outer and inner signal copper, cores, prepregs, laminate given by its resin
content, masks. What a variation of the scenario names stays with that variation.
"""

from __future__ import annotations

import tomllib
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from importlib import resources
from types import MappingProxyType
from typing import Any, NamedTuple

from tolerance.scenario.documents import Document, Entry, Finding
from tolerance.scenario.drafts import Draft, Drafts
from tolerance.scenario.keys import FROM_FILE, close_match, listed
from tolerance.scenario.properties import matches, properties_of
from tolerance.scenario.stackup import LAMINATES
from tolerance.scenario.tables import COPPER, CORE, MASK, PREPREG, Layer, Variation
from tolerance.units import read_quantity

_FOLDER = "tolerance.scenario.preset_files"
_VARIATION_KEYS = ("shape", "tolerance", "shift", "sigmas", "together")


@dataclass(frozen=True, slots=True)
class PresetEntry:
    """One entry of a preset. `ranges` : (nominal up to [m], half-width as a text), in place of one tolerance.

    one : only the first of the properties that a layer has.  keys : of the variation, as a scenario writes them.
    """

    on: str
    properties: tuple[str, ...]
    status: str
    keys: Mapping[str, Any]
    ranges: tuple[tuple[float, str, str], ...] = ()  # up to [m], as text, half-width
    one: bool = False


@dataclass(frozen=True, slots=True)
class Preset:
    """A named set of tolerances; `text` is its file."""

    name: str
    title: str
    note: str
    entries: tuple[PresetEntry, ...]
    text: str


@dataclass(frozen=True, slots=True)
class Applied:
    """A preset laid under a scenario: where the law of each property comes from, by its name."""

    preset: Preset
    origins: Mapping[str, str]


def preset_names() -> tuple[str, ...]:
    """Names of all presets."""
    return tuple(sorted(item.name.removesuffix(".toml") for item in resources.files(_FOLDER).iterdir()
                        if item.name.endswith(".toml")))


def read_preset(name: str) -> Preset:
    """The preset of this name. KeyError where there is none."""
    if name not in preset_names():
        raise KeyError(name)
    text = resources.files(_FOLDER).joinpath(f"{name}.toml").read_text(encoding="utf-8")
    raw = tomllib.loads(text)
    return Preset(raw["name"], raw["title"], raw["note"], tuple(_entry(item) for item in raw["entries"]), text)


def _entry(raw: Mapping[str, Any]) -> PresetEntry:
    ranges = tuple((read_quantity(item["to"], "length"), str(item["to"]), str(item["tolerance"]))
                   for item in raw.get("ranges", ()))
    keys = MappingProxyType({key: raw[key] for key in _VARIATION_KEYS if key in raw})
    return PresetEntry(raw["on"], tuple(raw["properties"]), raw["status"], keys, ranges, bool(raw.get("one")))


def with_preset(document: Document, drafts: Drafts) -> tuple[Drafts, Applied | None, list[Finding]]:
    """Drafts with the variations of the preset that the document names, after its own."""
    if "preset" not in document.top.values:
        return drafts, None, []
    name = document.top.values["preset"]
    known = preset_names()
    if name not in known:
        near = close_match(name, known) if isinstance(name, str) else ""
        words = f"must be the name of a preset: {listed([f'{one}' for one in known])}"
        return drafts, None, [document.top.finding("preset", words + (near if "did you mean" in near else ""))]
    preset = read_preset(name)
    place = document.top.places.get("preset", document.top.place)
    layers = [draft.model for draft in drafts.layers if draft.model is not None and not draft.bad]
    owned = _owned(drafts)
    added: list[Draft[Variation]] = []
    origins: dict[str, str] = {}
    for entry in preset.entries:
        for names, keys in _variations(entry, layers, owned):
            values = {"of": names, **keys}
            model = Variation.model_validate(values, context=dict(FROM_FILE))
            added.append(Draft(Entry("variations", values, place), model, frozenset()))
            origins |= dict.fromkeys(names, f"preset {preset.name}: {entry.status}")
    applied = Applied(preset, MappingProxyType(origins))
    return replace(drafts, variations=(*drafts.variations, *added)), applied, []


class _Owned(NamedTuple):
    names: frozenset[str]
    patterns: tuple[str, ...]


def _owned(drafts: Drafts) -> _Owned:
    """Names and patterns that the scenario's own variations name."""
    found: list[str] = []
    for draft in drafts.variations:
        if draft.given("of"):
            value = draft.entry.values["of"]
            found += [value] if isinstance(value, str) else value
    return _Owned(frozenset(found), tuple(text for text in found if "*" in text))


def _variations(
    entry: PresetEntry, layers: Sequence[Layer], owned: _Owned,
) -> Iterator[tuple[list[str], dict[str, Any]]]:
    """(names, keys) of the variations that an entry comes to; those of one half-width in one."""
    by_tolerance: dict[object, list[str]] = {}
    for layer in layers:
        if not _is_on(entry.on, layer, layers):
            continue
        there = [item for item in properties_of(layer) if item.property in entry.properties]
        there = sorted(there, key=lambda item: entry.properties.index(item.property))[: 1 if entry.one else None]
        names = [item.name for item in there if item.name not in owned.names
                 and not any(matches(pattern, item.name) for pattern in owned.patterns)]
        if not names:
            continue
        if entry.keys.get("together"):
            yield names, dict(entry.keys)
            continue
        tolerance = entry.keys.get("tolerance") or _ranged(entry, there[0].nominal)
        by_tolerance.setdefault(tolerance, []).extend(names)
    for tolerance, names in by_tolerance.items():
        yield names, {**entry.keys, "tolerance": tolerance}


def _ranged(entry: PresetEntry, nominal: float) -> str:
    """The half-width of the class that the nominal [m] falls in; beyond the last class that of the last."""
    for highest, _, tolerance in entry.ranges:
        if nominal <= highest * (1.0 + 1e-9):
            return tolerance
    return entry.ranges[-1][2]


def _is_on(word: str, layer: Layer, layers: Sequence[Layer]) -> bool:
    """Whether the layer is what the word says; copper means signal copper."""
    if word == "mask":
        return layer.kind == MASK
    if word.endswith("copper"):
        copper = [one.name for one in layers if one.kind == COPPER]
        outer = layer.kind == COPPER and layer.name in (copper[0], copper[-1])
        wanted = {"copper": True, "outer copper": outer, "inner copper": not outer}[word]
        return layer.kind == COPPER and layer.use == "signal" and wanted
    by_resin = layer.resin_content is not None
    if word == "resin":
        return by_resin
    kinds = {"core": (CORE,), "prepreg": (PREPREG,), "laminate": LAMINATES}[word]
    return layer.kind in kinds and not by_resin
