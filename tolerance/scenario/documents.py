"""A scenario as written: its tables and entries, each key with the place where it stands. Nothing is checked but the
outline (which tables there are, and that a table is a table); values stay as TOML gives them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType
from typing import Any, NamedTuple

from tolerance.errors import Problem
from tolerance.scenario.keys import close_match, meant_by
from tolerance.scenario.places import Lines
from tolerance.scenario.trust import Trust

TOP_KEYS = ("format", "title", "extends", "preset")
SINGLE_TABLES = ("evaluation", "test", "report")
ENTRY_TABLES = ("layers", "lines", "variations", "correlations", "offers", "sweep")
_KNOWN = (*TOP_KEYS, *SINGLE_TABLES, *ENTRY_TABLES)
LABEL_KEYS: Mapping[str, str] = MappingProxyType({
    "layers": "name", "lines": "name", "variations": "of", "correlations": "between", "offers": "of",
    "sweep": "of",
})


class Place(NamedTuple):
    """Where something stands; sorts the way messages do: the scenario's own file before those it extends."""

    depth: int
    line: int
    number: int
    file: str
    folder: Path
    trust: Trust


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
    misspelled: Mapping[str, str] = field(default_factory=dict)  # key that is meant -> as it is written

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
        if key in self.misspelled:
            allowed = f'{unknown_key(key)} As "{key}": {allowed}'
            key = self.misspelled[key]
        return Finding(where, Problem(file=where.file, table=self.heading, entry=self.label, key=key, given=shown,
                                      allowed=allowed, number=number))


@dataclass(frozen=True, slots=True)
class Document:
    """All tables of a scenario, of one file or of several merged."""

    top: Entry
    tables: Mapping[str, Entry]
    entries: Mapping[str, tuple[Entry, ...]]
    text: str
    files: tuple[Path, ...] = ()  # it was read from: the scenario, then what it extends
    misplaced: frozenset[str] = frozenset()  # tables that stand there as something else, which is told


def outline(raw: Mapping[str, Any], *, text: str, lines: Lines, origin: Place) -> tuple[Document, list[Finding]]:
    """The document of one file, and what is wrong with its outline. `origin` is the place of the file itself.

    A misspelled name is told, and read as the one that is meant, so that it does not bring other problems with it.
    """
    findings: list[Finding] = []
    tops: dict[str, Any] = {}
    top_places: dict[str, Place] = {}
    tables: dict[str, Entry] = {}
    entries: dict[str, tuple[Entry, ...]] = {}
    misplaced: set[str] = set()
    for written, value in raw.items():
        place = origin._replace(line=_line(lines, written, 0, "") or _line(lines, "", 0, written))
        name = written if written in _KNOWN else meant_by(written, _KNOWN) or written
        if name != written or name not in _KNOWN:
            findings.append(_unknown(written, value, place))
            name = "" if name in raw else name
        if name in TOP_KEYS:
            tops[name], top_places[name] = value, place
        elif name in SINGLE_TABLES and isinstance(value, dict):
            tables[name] = _entry(name, 0, value, _renamed(lines, written, name), place)
        elif name in ENTRY_TABLES and isinstance(value, list) and all(isinstance(item, dict) for item in value):
            renamed = _renamed(lines, written, name)
            entries[name] = tuple(_entry(name, number, item, renamed, place) for number, item in enumerate(value, 1))
        elif written in _KNOWN:
            findings.append(_misplaced(written, value, place))
            misplaced.add(name)
    top = Entry(table="", values=tops, place=origin, places=top_places)
    return Document(top=top, tables=tables, entries=entries, text=text, misplaced=frozenset(misplaced)), findings


def unknown_key(meant: str) -> str:
    """What is said of a key that comes near to another one."""
    return f'unknown key; did you mean "{meant}"?'


def _entry(table: str, number: int, values: Mapping[str, Any], lines: Lines, base: Place) -> Entry:
    place = base._replace(line=_line(lines, table, number, "") or base.line, number=number)
    places = {key: place._replace(line=_line(lines, table, number, key) or place.line) for key in values}
    return Entry(table=table, values=values, place=place, places=places)


def _line(lines: Lines, table: str, number: int, key: str) -> int:
    return lines.get((table, number, key), 0)


def _renamed(lines: Lines, written: str, name: str) -> Lines:
    return {(name, number, key): line for (table, number, key), line in lines.items() if table == written}


def _unknown(name: str, value: object, place: Place) -> Finding:
    is_table = isinstance(value, (dict, list))
    allowed = f"unknown {'table' if is_table else 'key'}{close_match(name, _KNOWN)}"
    return Finding(place, Problem(file=place.file, table="", key=name, given=None if is_table else value,
                                  allowed=allowed))


def _misplaced(name: str, value: object, place: Place) -> Finding:
    """A table that is written as something else."""
    heading = f"[{name}]" if name in SINGLE_TABLES else f"[[{name}]]"
    what = "a table" if name in SINGLE_TABLES else "a list of tables, each"
    given = None if isinstance(value, (dict, list)) else value
    return Finding(place, Problem(file=place.file, table="", key=name, given=given,
                                  allowed=f"must be {what} headed {heading}"))
