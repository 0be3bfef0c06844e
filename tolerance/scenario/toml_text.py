"""TOML from a stranger: read, with what is wrong said in our words, and refused where it is out of all proportion.

The bounds lie far above any board. They are there because a text can be made that takes hours to read.
"""

from __future__ import annotations

import re
import tomllib
from typing import Any

from tolerance.errors import InputError

DEEPEST = 20  # tables and lists inside each other
MOST_ITEMS = 1_000  # entries of a table of entries, items of a list
MOST_LAYERS = 300
MOST_KEYS = 60  # of one table
MOST_NAMES = 3_000  # texts in lists, of all tables together
MOST_PATTERNS = 100  # texts with a *, of all tables together

_DOTTED = re.compile(r"""(?<![\w\-"'.])(?:(?:[\w-]+|"[^"\n]*"|'[^'\n]*')[ \t]*\.[ \t]*){20}""")
_PLACE = re.compile(r" \((at [^()]*)\)$")

#: how a message of tomllib begins -> what it means to who writes a scenario
_WORDS = (
    (r"Illegal character '\\n'", "a text is not closed: its quotes stand on one line"),
    ("Illegal character", "a text holds a control character; write it as an escape"),
    ("Found invalid character", "holds a control character"),
    ("Unterminated string", "a text is not closed"),
    (r"Expected [\"']'+[\"']", "a text is not closed"),
    (r"Unescaped '\\+' in a string", "a backslash in a text stands doubled, or the text in single quotes"),
    ("Invalid hex value|Escaped character", "an escape in a text stands for no character"),
    ("Expected newline or end of document",
     "something follows the value: a quantity stands in quotes, a number has a decimal point"),
    ("Invalid statement", "a line must be KEY = VALUE, or a header such as [evaluation] or [[layers]]"),
    ("Cannot declare", "a table stands twice; entries of a list each begin with [[...]]"),
    ("Cannot overwrite|Duplicate inline table key|Cannot redefine", "a key or table stands twice"),
    ("Cannot mutate immutable", "a table in braces is complete: nothing can be added to it"),
    (r"Expected '\]", "a header is not closed"),
    ("Expected '='", "after a key must come = and its value"),
    ("Invalid initial character for a key", "a key must begin with a letter or a digit"),
    ("Unclosed array", "a list is not closed"),
    ("Unclosed inline table", "a table in braces is not closed"),
    ("Invalid value", "a value must be a text in quotes, a number, true or false, a list or a table in braces"),
    ("Invalid date", "there is no such date"),
    ("Exceeds the limit", "a number has too many digits"),
)


def read_toml(text: str) -> dict[str, Any]:
    """The tables of a text. Raises InputError, saying why it is no TOML or no scenario."""
    if _DOTTED.search(text):
        raise InputError("is not a scenario: its lists or tables are nested too deeply")
    try:
        raw = tomllib.loads(text)
    except RecursionError:
        raise InputError("is not a scenario: its lists or tables are nested too deeply") from None
    except ValueError as problem:  # TOMLDecodeError, and numbers of too many digits
        raise InputError(f"is not valid TOML: {_in_our_words(str(problem))}") from None
    _refuse_excess(raw)
    return raw


def _in_our_words(message: str) -> str:
    place = _PLACE.search(message)
    reason = message[:place.start()] if place else message
    for beginning, words in _WORDS:
        if re.match(beginning, reason):
            reason = words
            break
    return f"{reason} ({place[1]})" if place else reason


def _refuse_excess(raw: dict[str, Any]) -> None:
    """Raise InputError for a text out of proportion: too deep, or too many of anything."""
    waiting: list[tuple[str, object, int]] = [("", raw, 1)]
    patterns = names = 0
    while waiting:
        name, value, depth = waiting.pop()
        patterns += isinstance(value, str) and "*" in value
        names += isinstance(value, list) and sum(isinstance(item, str) for item in value)
        if patterns > MOST_PATTERNS:
            raise InputError(f"has more than {MOST_PATTERNS} texts with a *: name the properties in full")
        if names > MOST_NAMES:
            raise InputError(f"has more than {MOST_NAMES} names in its lists: name properties by patterns, \"P*.dk\"")
        if not isinstance(value, (dict, list)):
            continue
        if depth > DEEPEST:
            raise InputError("is not a scenario: its lists or tables are nested too deeply")
        most, what = (MOST_KEYS, "keys in") if isinstance(value, dict) else (
            MOST_LAYERS if name == "layers" else MOST_ITEMS, "entries of")
        if len(value) > most:
            raise InputError(f"has {len(value)} {what} {name or 'one table'}; at most {most} are read")
        items = value.items() if isinstance(value, dict) else ((name, item) for item in value)
        waiting += [(key, item, depth + 1) for key, item in items]
