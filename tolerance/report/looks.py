"""The family of looks of all figures: colours that stay apart in grey and for colour-blind eyes, sizes, letters.

Meaning never rests on colour alone: what fails is hatched, materials differ in lightness and hatch, and all is named.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import matplotlib as mpl
from matplotlib.ticker import MaxNLocator

if TYPE_CHECKING:
    from contextlib import AbstractContextManager

    from matplotlib.axes import Axes

INK = "#1d2433"  # letters, target, copper
FAINT_INK = "#6b7285"  # axes, remarks
HAIRLINE = "#d8dae2"  # grid
PAPER = "#ffffff"
BODY = "#8fa3c4"  # coupons that pass; bars
BODY_EDGE = "#4a5f86"
FAIL = "#a3184b"  # coupons that fail, and the word that says so
FAIL_FILL = "#e9b8c8"
COPPER = {"trace": "#1d2433", "ground": "#4b5267", "plane": "#4b5267"}
MATERIAL = {"mask": "#cbbde4", "prepreg": "#f6f1e4", "core": "#dbe3ec", "resin": "#ecdcb0"}
CORE_GRAIN = "#aebccc"
AIR = "#ffffff"
BAND, BAND_OPACITY = "#e59a1c", 0.55  # where tolerances move an edge

HATCH_FAIL = "////"
PAGE = (13.333, 7.5)  # inches, a slide
RESOLUTION = 120  # dots an inch
MOST_STEPS = 6  # between the ticks of an axis
SMALL, MEDIUM, LARGE, TITLE = 10.5, 12.0, 15.0, 22.0  # points


def our_looks() -> AbstractContextManager[None]:
    """A context in which figures get our looks; the settings of whoever calls come back after it."""
    return mpl.rc_context({
        "font.family": "sans-serif", "font.sans-serif": ["DejaVu Sans"], "font.size": MEDIUM,
        "text.hinting": "no_hinting", "text.parse_math": False, "text.usetex": False, "axes.unicode_minus": False,
        "figure.facecolor": PAPER, "savefig.facecolor": PAPER, "axes.facecolor": PAPER, "savefig.bbox": None,
        "axes.edgecolor": FAINT_INK, "axes.labelcolor": INK, "axes.linewidth": 0.8, "axes.spines.top": False,
        "axes.spines.right": False, "axes.grid": False, "axes.labelsize": MEDIUM, "axes.titlesize": LARGE,
        "axes.titlelocation": "left", "axes.titlepad": 10.0, "axes.titley": 1.0, "axes.titlecolor": INK,
        "text.color": INK,
        "xtick.color": FAINT_INK, "ytick.color": FAINT_INK, "xtick.labelcolor": INK, "ytick.labelcolor": INK,
        "xtick.labelsize": SMALL, "ytick.labelsize": SMALL, "hatch.linewidth": 0.9, "lines.linewidth": 1.6,
        "axes.formatter.use_locale": False,
    })


def quiet_axes(axes: Axes, *, grid: str) -> None:
    """Take away what does not inform: few ticks, and hair-thin grid lines across one axis only, behind everything."""
    axes.xaxis.set_major_locator(MaxNLocator(MOST_STEPS, steps=[1, 2, 5, 10]))
    axes.set_axisbelow(True)
    if grid == "x":
        axes.xaxis.grid(visible=True, color=HAIRLINE, linewidth=0.8)
    else:
        axes.yaxis.grid(visible=True, color=HAIRLINE, linewidth=0.8)
