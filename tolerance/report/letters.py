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

    from matplotlib.axes import Axes

FAMILY = "DejaVu Sans"
HINTED = 1.04  # letters fitted to the points of a picture may come out a little wider


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


def width_in_points(axes: Axes) -> float:
    """How wide the axes are on their page [points]."""
    figure = axes.get_figure(root=True)
    assert figure is not None
    return float(72.0 * axes.get_position().width * figure.get_figwidth())


def fitted(text: str, room: float, sizes: Sequence[float], *, bold: bool = False) -> tuple[str, float]:
    """The text on one row no wider than `room` [points], and its size: the largest of `sizes` (falling) that fits.

    Where even the smallest is too wide, the text is cut in its middle.
    """
    text, room = " ".join(text.split()), room / HINTED
    for size in sizes:
        if width_of(text, size, bold=bold) <= room:
            return text, size
    length = len(text)
    while length > 4 and width_of(shorten(text, length), sizes[-1], bold=bold) > room:
        length -= 1
    return shorten(text, length), sizes[-1]
