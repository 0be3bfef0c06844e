"""Text as a workbook can hold it."""

from __future__ import annotations

import re

_NOT_HELD = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ud800-\udfff\ufffe\uffff]")


def clean_text(text: str) -> str:
    """Without the control characters, and the halves of characters, that a workbook cannot hold."""
    return _NOT_HELD.sub("\N{REPLACEMENT CHARACTER}", text)


_FORMULA = re.compile(r"[=+\-@\t\r]")
_QUANTITY = re.compile(r"[+-]?\d+(?:\.\d*)?(?:[eE][+-]?\d+)?(?: ?[%A-Za-z]+)?")


def plain_cell(text: str) -> str:
    """The text as a cell of a CSV file, which has no type: one that a spreadsheet may take for a formula gets an
    apostrophe before it. Signed quantities ("-3 um") are left as they are."""
    return f"'{text}" if _FORMULA.match(text) and not _QUANTITY.fullmatch(text) else text
