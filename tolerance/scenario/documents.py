"""A scenario as written: its tables and entries, each key with the place where it stands. Nothing is checked but the
outline (which tables there are, and that a table is a table); values stay as TOML gives them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType
from typing import Any, NamedTuple

from tolerance.errors import Problem
from tolerance.scenario.keys import close_match
from tolerance.scenario.places import Lines

TOP_KEYS = ("format", "title", "extends")
SINGLE_TABLES = ("evaluation", "test", "report")
ENTRY_TABLES = ("layers", "lines", "variations", "correlations", "offers")
LABEL_KEYS: Mapping[str, str] = MappingProxyType({
    "layers": "name", "lines": "name", "variations": "of", "correlations": "between", "offers": "of",
})


class Place(NamedTuple):
    """Where something stands; sorts the way messages do: the scenario's own file before those it extends."""

    depth: int
    line: int
    number: int
    file: str
    folder: Path


class Finding(NamedTuple):
    """A problem and the place it is sorted by."""

    place: Place
    problem: Problem


@dataclass(frozen=True, slots=True)
class Entry:
    """A table, or one entry of an array of tables; `places` tells where each key stands."""

    table: str  # "layers"; "" for the keys above all tables
    values: Mapping[str, Any]
    place: Place
    places: Mapping[str, Place] = field(default_factory=dict)

    @property
    def heading(self) -> str:
        """The table as its header writes it: [[layers]], [test]."""
        return f"[[{self.table}]]" if self.table in ENTRY_TABLES else f"[{self.table}]" if self.table else ""

    @property
    def label(self) -> str:
        """What the entry is called by: its name, or the properties it is about; "" where it does not say."""
        value = self.values.get(LABEL_KEYS.get(self.table, ""))
        if isinstance(value, list) and all(isinstance(item, str) for item in value):
            return ", ".join(value)
        return value if isinstance(value, str) else ""

    def finding(self, key: str, allowed: str, *, given: object = None, place: Place | None = None) -> Finding:
        """A problem with this entry; `given` defaults to the value of the key."""
        where = place or self.places.get(key, self.place)
        shown = self.values.get(key) if given is None else given
        number = 0 if self.label or self.table not in ENTRY_TABLES else where.number
        return Finding(where, Problem(file=where.file, table=self.heading, entry=self.label, key=key, given=shown,
                                      allowed=allowed, number=number))


@dataclass(frozen=True, slots=True)
class Document:
    """All tables of a scenario, of one file or of several merged."""

    top: Entry
    tables: Mapping[str, Entry]
    entries: Mapping[str, tuple[Entry, ...]]
    text: str


def outline(raw: Mapping[str, Any], *, text: str, lines: Lines, origin: Place) -> tuple[Document, list[Finding]]:
    """The document of one file, and what is wrong with its outline. `origin` is the place of the file itself."""
    findings: list[Finding] = []
    top = _entry("", 0, {key: raw[key] for key in TOP_KEYS if key in raw}, lines, origin)
    tables: dict[str, Entry] = {}
    entries: dict[str, tuple[Entry, ...]] = {}
    for name, value in raw.items():
        place = origin._replace(line=_line(lines, name, 0, "") or lines.get(("", 0, name), 0))
        if name in SINGLE_TABLES and isinstance(value, dict):
            tables[name] = _entry(name, 0, value, lines, place)
        elif name in ENTRY_TABLES and isinstance(value, list) and all(isinstance(item, dict) for item in value):
            entries[name] = tuple(_entry(name, number, item, lines, place) for number, item in enumerate(value, 1))
        elif name not in TOP_KEYS:
            findings.append(_misplaced(name, value, place))
    return Document(top=top, tables=tables, entries=entries, text=text), findings


def _entry(table: str, number: int, values: Mapping[str, Any], lines: Lines, base: Place) -> Entry:
    place = base._replace(line=_line(lines, table, number, "") or base.line, number=number)
    places = {key: place._replace(line=_line(lines, table, number, key) or place.line) for key in values}
    return Entry(table=table, values=values, place=place, places=places)


def _line(lines: Lines, table: str, number: int, key: str) -> int:
    return lines.get((table, number, key), 0)


def _misplaced(name: str, value: object, place: Place) -> Finding:
    """A top-level key that is none, or a table written as something else."""
    if name in SINGLE_TABLES:
        shown, allowed = name, f"must be a table, headed [{name}]"
    elif name in ENTRY_TABLES:
        shown, allowed = name, f"must be a list of tables, each headed [[{name}]]"
    else:
        known = (*TOP_KEYS, *SINGLE_TABLES, *ENTRY_TABLES)
        what = "table" if isinstance(value, (dict, list)) else "key"
        shown, allowed = name, f"unknown {what}{close_match(name, known)}"
    given = None if isinstance(value, (dict, list)) else value
    return Finding(place, Problem(file=place.file, table="", key=shown, given=given, allowed=allowed))
