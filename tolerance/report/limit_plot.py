"""Yield against the limit: what would pass were the limits wider or closer.

The height is a scale of what fails, by powers of ten, so that 99 and 99.9 % stand as far apart as 90 and 99 %; its
ticks are named by what passes.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from matplotlib.ticker import FixedLocator, MaxNLocator, NullLocator

from tolerance.report.letters import fitted, width_in_points
from tolerance.report.looks import (
    BODY,
    BODY_EDGE,
    FAIL,
    FAIL_FILL,
    FAINT_INK,
    INK,
    MEDIUM,
    PAPER,
    SMALL,
    quiet_axes,
)
from tolerance.report.wording import percent, percent_digits, trimmed

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from tolerance.results import Interval, YieldByLimit

LEAST_FAILING = 0.5e-4  # the end of the scale, 99.995 %
YIELDS = (0.0, 0.9, 0.99, 0.999, 0.9999)


def draw_yield_by_limit(
    axes: Axes, curve: YieldByLimit, *, name: str, target_yield: float, limit: float | None = None,
    inside: Interval | None = None,
) -> Axes:
    """Yield against the half-width of the limits with its interval; the line's own limit and yield are marked."""
    limits = 100.0 * curve.limit
    failing, most, least = (np.clip(1.0 - share, LEAST_FAILING, 1.0) for share in (curve.value, curve.low, curve.high))
    axes.set_yscale("log")
    axes.set_ylim(1.25, LEAST_FAILING)
    axes.set_xlim(0.0, float(limits[-1]))
    axes.fill_between(limits, most, least, where=(most > LEAST_FAILING).tolist(), color=BODY, linewidth=0.0, alpha=0.6)
    shown = int(np.count_nonzero(curve.value < 1.0)) + 1  # up to where it leaves the scale
    axes.plot(limits[:shown], failing[:shown], color=BODY_EDGE, linewidth=2.0)
    axes.axhspan(1.25, max(1.0 - target_yield, LEAST_FAILING), facecolor=FAIL_FILL, edgecolor="none", alpha=0.35,
                 zorder=0)
    axes.axhline(max(1.0 - target_yield, LEAST_FAILING), color=FAIL, linewidth=1.0, linestyle=(0, (2, 2)))
    if limit is not None and inside is not None:
        _mark_own(axes, 100.0 * limit, inside, target_yield)
    axes.yaxis.set_major_locator(FixedLocator([1.0 - share for share in YIELDS]))
    axes.yaxis.set_minor_locator(NullLocator())
    axes.set_yticklabels([trimmed(100.0 * share, 2) for share in YIELDS])
    axes.set_xlabel("limit, of the target [%]")
    axes.set_ylabel("yield [%]")
    words, size = fitted(name, width_in_points(axes), (MEDIUM, SMALL), bold=True)
    axes.set_title(words, fontsize=size, weight="bold", pad=20.0)
    axes.annotate(_needed_words(curve.needed, target_yield), (0.0, 1.0), xycoords="axes fraction", xytext=(0, 5),
                  textcoords="offset points", va="bottom", fontsize=SMALL, color=FAINT_INK)
    quiet_axes(axes, grid="y")
    axes.xaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 5, 10]))
    return axes


def _mark_own(axes: Axes, limit: float, inside: Interval, target_yield: float) -> None:
    misses = inside.value < target_yield
    axes.axvline(limit, color=INK, linestyle=(0, (5, 3)), linewidth=1.4)
    axes.plot([limit], [min(max(1.0 - inside.value, LEAST_FAILING), 1.0)], marker="o", markersize=7,
              color=FAIL if misses else PAPER, markeredgecolor=FAIL if misses else INK, markeredgewidth=1.6,
              clip_on=False, zorder=6)


def _needed_words(needed: Interval | None, target_yield: float) -> str:
    aim = f"{trimmed(100.0 * target_yield, 3)} %"
    if needed is None:
        return f"no limit lets {aim} pass"
    return f"{aim} would pass at {percent(needed.value, min(max(percent_digits(needed), 1), 2))}"
