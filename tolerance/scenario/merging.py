"""`extends`: one scenario laid over another, key by key.

Entries with the same name (layers, lines), the same `of` (variations), the same pair (correlations), or the same `of`
and tolerance (offers) are merged key by key, the extension's key winning; every other entry is appended below, layers
at the bottom of the stackup. Where two keys exclude each other and the extension gives one, the other is dropped from
the base, so that a `tolerance` can be replaced by `low` and `high`.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType
from typing import Any

from tolerance.scenario.documents import ENTRY_TABLES, SINGLE_TABLES, Document, Entry

_MIXTURE = frozenset({"glass_dk", "resin_content", "glass_areal_weight", "outflow"})
_ENDS = frozenset({"low", "high"})
_MEASURED = frozenset({"file", "column", "sheet"})

#: table -> key given by the extension -> keys of the base that give way to it
_GIVES_WAY: Mapping[str, Mapping[str, frozenset[str]]] = MappingProxyType({
    "layers": {"dk": _MIXTURE, **dict.fromkeys(_MIXTURE, frozenset({"dk"}))},
    "lines": {
        "gap": frozenset({"partner", "offset"}),
        "partner": frozenset({"gap", "ground_gap"}),
        "ground_gap": frozenset({"partner", "offset"}),
    },
    "variations": {
        "tolerance": _ENDS | _MEASURED, "low": frozenset({"tolerance"}), "high": frozenset({"tolerance"}),
        "sigmas": frozenset({"cpk"}), "cpk": frozenset({"sigmas"}),
    },
})

#: shape given by the extension -> keys of the base that this shape does not take
_SHAPE_GIVES_WAY: Mapping[str, frozenset[str]] = MappingProxyType({
    "normal": _ENDS | _MEASURED,
    "truncated_normal": _MEASURED | {"cpk"},
    "uniform": _MEASURED | {"sigmas", "cpk"},
    "triangular": _MEASURED | {"sigmas", "cpk"},
    "lognormal": _ENDS | _MEASURED | {"cpk"},
    "measured": _ENDS | {"tolerance", "sigmas", "cpk"},
})


def merge(base: Document, extension: Document) -> Document:
    """The extension laid over the base; neither is changed."""
    tables = {
        name: merge_entry(base.tables.get(name), extension.tables.get(name))
        for name in SINGLE_TABLES if name in base.tables or name in extension.tables
    }
    entries = {
        name: _merge_entries(base.entries.get(name, ()), extension.entries.get(name, ()))
        for name in ENTRY_TABLES if name in base.entries or name in extension.entries
    }
    text = f"{extension.text.rstrip()}\n\n# ---- extends {base.top.place.file} ----\n{base.text}"
    return Document(top=merge_entry(base.top, extension.top), tables=tables, entries=entries, text=text,
                    misplaced=base.misplaced | extension.misplaced)


def identity(entry: Entry) -> object:
    """What an entry is recognized by in the file that extends it; None where it says too little."""
    values = entry.values
    if entry.table in ("layers", "lines"):
        return entry.label or None
    if entry.table == "correlations":
        return frozenset(_texts(values.get("between"))) or None
    of = frozenset(_texts(values.get("of")))
    if not of:
        return None
    return (of, str(values.get("tolerance")).replace(" ", "")) if entry.table == "offers" else of


def _merge_entries(base: tuple[Entry, ...], extension: tuple[Entry, ...]) -> tuple[Entry, ...]:
    """Every entry of the base, with what the extension says about it, then what only the extension has.

    A second entry of the same identity in the extension is kept as it is, to be told as a repetition.
    """
    over: dict[object, Entry] = {}
    added: list[Entry] = []
    known = {identity(entry) for entry in base} - {None}
    for entry in extension:
        name = identity(entry)
        if name in known and name not in over:
            over[name] = entry
        else:
            added.append(entry)
    merged: list[Entry] = []
    for entry in base:
        merged.append(merge_entry(entry, over.pop(identity(entry), None)))
    return (*merged, *added)


def merge_entry(base: Entry | None, extension: Entry | None) -> Entry:
    """The keys of the extension laid over those of the base; one of the two may be missing."""
    if base is None or extension is None:
        entry = base or extension
        assert entry is not None  # the caller has at least one of the two
        return entry
    dropped = _giving_way(extension)
    if "dk" in extension.values and _MIXTURE & set(base.values):  # resin_dk was part of the mixture, not of a band
        dropped |= {"resin_dk"}
    kept = {key: value for key, value in base.values.items() if key not in dropped}
    places = {key: base.places[key] for key in kept} | dict(extension.places)
    return Entry(table=base.table, values=kept | dict(extension.values), place=extension.place, places=places)


def _giving_way(extension: Entry) -> frozenset[str]:
    rules = _GIVES_WAY.get(extension.table, {})
    dropped = frozenset[str]().union(*(rules.get(key, frozenset()) for key in extension.values))
    if extension.table == "variations":
        shape = extension.values.get("shape")
        dropped |= _SHAPE_GIVES_WAY.get(shape, frozenset()) if isinstance(shape, str) else frozenset()
    return dropped


def _texts(value: Any) -> tuple[str, ...]:
    items = value if isinstance(value, list) else [value]
    return tuple(item for item in items if isinstance(item, str))
