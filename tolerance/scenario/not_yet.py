"""What the format has and this version does not yet act on. It is checked like everything else, then refused, so that
nothing is ever silently left out. An entry of NOT_YET goes when the work behind it is done."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from types import MappingProxyType
from typing import Any, NamedTuple

from tolerance.scenario.documents import Document, Entry, Finding


def _given(_value: Any) -> bool:
    return True


class NotYet(NamedTuple):
    """Keys (or, without one, a whole table) that are refused where they stand and `when` holds of the value.

    Of several keys that only work together the first that stands there is told.
    """

    table: str
    keys: tuple[str, ...] = ()
    when: Callable[[Any], bool] = _given


NOT_YET: tuple[NotYet, ...] = ()

_REMOVE: Mapping[bool, str] = MappingProxyType({
    True: "is part of the format but not yet acted on by this version; remove it to run",
    False: "this value is part of the format but not yet acted on by this version; change it to run",
})


def not_yet_findings(document: Document) -> Iterator[Finding]:
    """Every place that is well formed but not acted on yet."""
    for item in NOT_YET:
        for entry in _entries(document, item.table):
            key = next((key for key in item.keys if key in entry.values), "")
            if not item.keys:
                yield entry.finding("", _REMOVE[True])
            elif key and item.when(entry.values[key]):
                yield entry.finding(key, _REMOVE[item.when is _given])


def _entries(document: Document, table: str) -> tuple[Entry, ...]:
    if table in document.tables:
        return (document.tables[table],)
    return document.entries.get(table, ())
