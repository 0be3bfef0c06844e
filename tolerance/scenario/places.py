"""Where the keys of a TOML text stand, for the order of messages (tomllib keeps no line numbers)."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Iterator

_NAME = r"""(?:[A-Za-z0-9_-]+|"[^"]*"|'[^']*')"""
_PATH = rf"{_NAME}(?:\s*\.\s*{_NAME})*"
_ARRAY_HEADER = re.compile(rf"\s*\[\[\s*({_PATH})\s*\]\]")
_TABLE_HEADER = re.compile(rf"\s*\[\s*({_PATH})\s*\]")
_KEY = re.compile(rf"\s*({_PATH})\s*=")
_TRIPLE = re.compile(r'"""|\'\'\'')

Lines = dict[tuple[str, int, str], int]


def line_numbers(text: str) -> Lines:
    """(table, number of the entry, key) -> line, all counted from 1; entry 0 is the table itself, key "" its header.

    Keys above the first header have the table "". Good enough to sort by: what it misses falls to its entry.
    """
    found: Lines = {}
    entries: Counter[str] = Counter()
    table, entry, prefix = "", 0, ""
    for number, line in _lines_outside_texts(text):
        if header := _ARRAY_HEADER.match(line):
            table, prefix = _split(header[1])[0], ""
            entries[table] += 1
            entry = entries[table]
            found.setdefault((table, 0, ""), number)
            found.setdefault((table, entry, ""), number)
        elif header := _TABLE_HEADER.match(line):
            table, *rest = _split(header[1])
            entry, prefix = entries[table], rest[0] if rest else ""
            found.setdefault((table, entry, prefix), number)
        elif (key := _KEY.match(line)) and not prefix:
            first, *rest = _split(key[1])
            found.setdefault((table, entry, first) if table or not rest else (first, 0, rest[0]), number)
    return found


def _lines_outside_texts(text: str) -> Iterator[tuple[int, str]]:
    """Lines with their numbers, without those inside a text of several lines."""
    quote = ""
    for number, line in enumerate(text.split("\n"), start=1):
        inside = bool(quote)
        for mark in _TRIPLE.findall(line):
            quote = mark if not quote else "" if mark == quote else quote
        if not inside:
            yield number, line


def _split(path: str) -> list[str]:
    return [part.strip().strip("\"'") for part in re.findall(_NAME, path)]
