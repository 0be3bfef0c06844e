"""Text as a workbook can hold it."""

from __future__ import annotations

from openpyxl.cell.cell import ILLEGAL_CHARACTERS_RE


def clean_text(text: str) -> str:
    """Without the control characters that a workbook cannot hold."""
    return ILLEGAL_CHARACTERS_RE.sub("\N{REPLACEMENT CHARACTER}", text)
