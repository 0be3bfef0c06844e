"""How wide letters are drawn, and words made to fit a given room."""

from __future__ import annotations

import warnings
from contextlib import contextmanager
from typing import TYPE_CHECKING

from matplotlib.font_manager import FontProperties
from matplotlib.textpath import text_to_path

from tolerance.report.wording import shorten

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

FAMILY = "DejaVu Sans"


@contextmanager
def missing_glyphs_allowed() -> Iterator[None]:
    """Signs that our letters lack are drawn as an empty box, without a warning."""
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="Glyph .* missing from font")
        yield


def width_of(text: str, size: float, *, bold: bool = False) -> float:
    """Width [points] of one row of text in the letters of our figures, `size` [points] high."""
    letters = FontProperties(family=FAMILY, size=size, weight="bold" if bold else "normal")
    with missing_glyphs_allowed():
        width, _, _ = text_to_path.get_text_width_height_descent(text, letters, ismath=False)
    return float(width)


def fitted(text: str, room: float, sizes: Sequence[float], *, bold: bool = False) -> tuple[str, float]:
    """The text on one row no wider than `room` [points], and its size: the largest of `sizes` (falling) that fits.

    Where even the smallest is too wide, the text is cut in its middle.
    """
    text = " ".join(text.split())
    for size in sizes:
        if width_of(text, size, bold=bold) <= room:
            return text, size
    length = len(text)
    while length > 4 and width_of(shorten(text, length), sizes[-1], bold=bold) > room:
        length -= 1
    return shorten(text, length), sizes[-1]
