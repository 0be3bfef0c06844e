"""Text as a workbook can hold it."""

from __future__ import annotations

import re

_NOT_HELD = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ud800-\udfff\ufffe\uffff]")


def clean_text(text: str) -> str:
    """Without the control characters, and the halves of characters, that a workbook cannot hold."""
    return _NOT_HELD.sub("\N{REPLACEMENT CHARACTER}", text)
