"""The figure of measured coupons: predicted against measured, a row for each line."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from tolerance.report.files import put_in_place
from tolerance.report.letters import fitted, missing_glyphs_allowed
from tolerance.report.looks import (
    BODY,
    BODY_EDGE,
    FAIL,
    FAINT_INK,
    INK,
    LARGE,
    MEDIUM,
    PAGE,
    PAPER,
    RESOLUTION,
    SMALL,
    TITLE,
    our_looks,
    quiet_axes,
)
from tolerance.report.reconcile_words import fit_sentence, verdict_sentence
from tolerance.report.wording import LengthUnit, fixed, shorten

if TYPE_CHECKING:
    from pathlib import Path

    from matplotlib.axes import Axes

    from tolerance.reconciled import LinePicture, Reconciled

ROW = 0.62  # inches
HALF = 0.26  # of a row: half-height of the predicted bar
LONGEST_NAME = 26
KEY = ("Bar: middle 95 % of the predicted coupons, with their mean.  Dots: readings.  Diamond: mean after the most "
       "plausible shifts.  Dashed: limits.")


def write_reconcile_figure(result: Reconciled, path: Path, lengths: LengthUnit) -> Path:
    """Write the figure (PNG), whole or not at all."""
    page = reconcile_page(result, lengths)
    with missing_glyphs_allowed():
        return put_in_place(path, lambda beside: page.savefig(beside, format="png", dpi=RESOLUTION))


def reconcile_page(result: Reconciled, lengths: LengthUnit) -> Figure:
    """Predicted against measured on a page."""
    height = max(PAGE[1], 3.2 + ROW * len(result.pictures))
    with our_looks():
        page = Figure(figsize=(PAGE[0], height))
        FigureCanvasAgg(page)
        room = 0.95 * 72.0 * PAGE[0]
        heads = ((result.title, (TITLE, LARGE), 0.42, INK),
                 (fit_sentence(result.everything), (LARGE, MEDIUM), 0.85, INK),
                 (verdict_sentence(result, lengths), (MEDIUM, SMALL), 1.2, INK), (KEY, (SMALL,), 1.55, FAINT_INK))
        for words, sizes, top, colour in heads:
            shown, size = fitted(words, room, sizes)
            page.text(0.025, 1.0 - top / height, shown, fontsize=size, color=colour, va="center")
        axes = page.add_axes((0.225, 0.75 / height, 0.74, 1.0 - 2.65 / height))
        draw_predicted_and_measured(axes, result.pictures)
    return page


def draw_predicted_and_measured(axes: Axes, pictures: tuple[LinePicture, ...]) -> Axes:
    """A row for each line, in percent off its target."""
    for row, line in enumerate(pictures):
        low, mean, high, shifted, lowest, highest = (
            100.0 * (each / line.target - 1.0)
            for each in (line.low, line.mean, line.high, line.fitted, line.low_limit, line.high_limit))
        axes.barh(row, high - low, left=low, height=2.0 * HALF, color=BODY, edgecolor=BODY_EDGE, linewidth=0.8)
        axes.plot([mean, mean], [row - HALF, row + HALF], color=BODY_EDGE, linewidth=2.0)
        for limit in (lowest, highest):
            axes.plot([limit, limit], [row - 0.42, row + 0.42], color=FAIL, linestyle=(0, (3, 2)), linewidth=1.4)
        values = 100.0 * (np.asarray(line.readings) / line.target - 1.0)
        places = row + (0.18 * np.linspace(-1.0, 1.0, len(values)) if len(values) > 1 else np.zeros(len(values)))
        axes.plot(values, places, linestyle="none", marker="o", markersize=4.0, color=INK, markeredgecolor=PAPER,
                  markeredgewidth=0.4)
        if len(values):
            axes.plot([shifted], [row], linestyle="none", marker="D", markersize=7.5, markerfacecolor=PAPER,
                      markeredgecolor=INK, markeredgewidth=1.4)
    axes.margins(x=0.03)
    axes.set_ylim(len(pictures) - 0.4, -0.6)
    quiet_axes(axes, grid="x")
    axes.set_yticks(range(len(pictures)))
    axes.set_yticklabels([f"{shorten(line.name, LONGEST_NAME)}\n{fixed(line.target, 1)} ohm" for line in pictures])
    axes.set_xlabel("impedance, off the target [%]")
    return axes
