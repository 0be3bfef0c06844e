"""Plots of lots: variance by level, lots by their failing coupons, and the operating characteristic of the sampling.

Each takes finished results and the Axes to draw on, returns the Axes, and computes nothing but where its letters go.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from tolerance.report.looks import (
    BODY,
    BODY_EDGE,
    FAIL,
    FAIL_FILL,
    FAINT_INK,
    HAIRLINE,
    HATCH_FAIL,
    INK,
    PAPER,
    SMALL,
    quiet_axes,
)
from tolerance.report.wording import percent, share_with_range, shorten, trimmed

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from tolerance.results import LineResult, LotAcceptance, NestedYield

LEVEL_LOOKS = {"lot": (BODY_EDGE, PAPER), "panel": (BODY, INK), "coupon": (HAIRLINE, INK)}  # fill and letters
FEWEST_ROWS = 4  # so that a single line is not drawn as a wall
NARROWEST_LABELLED = 0.06  # share of the variance
NAME_LENGTH = 30
LONGEST_TAIL = 0.001  # of the lots beyond which failing coupons are no longer shown one by one
MOST_BARS = 40


def draw_levels(axes: Axes, lines: tuple[LineResult, ...]) -> Axes:
    """Share of each line's variance that lots, panels and coupons carry, one bar a line."""
    for row, line in enumerate(lines):
        start = 0.0
        for name, (fill, letters) in LEVEL_LOOKS.items():
            share = 0.0 if line.variance is None else getattr(line.variance, name).value
            axes.barh(row, 100.0 * share, left=start, height=0.52, color=fill, edgecolor=BODY_EDGE, linewidth=0.8)
            if share >= NARROWEST_LABELLED:
                axes.text(start + 50.0 * share, row, f"{name}\n{percent(share, 0)}", ha="center", va="center",
                          fontsize=SMALL, color=letters)
            start += 100.0 * share
        axes.text(0.0, row - 0.30, shorten(line.name, NAME_LENGTH), ha="left", va="bottom", fontsize=SMALL)
    axes.set_xlim(0.0, 100.0)
    axes.set_ylim(max(len(lines), FEWEST_ROWS) - 0.45, -0.62)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    axes.set(title="where the variance lies", xlabel="share of the variance [%]")
    quiet_axes(axes, grid="x")
    return axes


def draw_lots(axes: Axes, nested: NestedYield) -> Axes:
    """Lots by how many of their coupons fail on any line; hatched: lots with a failing coupon."""
    share = 100.0 * nested.failing / max(int(nested.failing.sum()), 1)
    beyond = np.cumsum(share[::-1])[::-1] > 100.0 * LONGEST_TAIL
    last = max(int(np.flatnonzero(beyond)[-1]), 1)
    step = -(-last // MOST_BARS)
    edges = np.arange(1, last + step + 1, step)
    heights = np.add.reduceat(np.append(share[1:], 0.0), np.minimum(edges[:-1] - 1, share.size - 1))
    axes.bar(0.5 - 0.5 * step, share[0], width=0.8 * step, color=BODY, edgecolor=BODY_EDGE)
    axes.bar(edges[:-1] + 0.5 * (step - 1), heights, width=0.8 * step, color=FAIL_FILL, edgecolor=FAIL,
             hatch=HATCH_FAIL, linewidth=0.9)
    axes.set_ylim(0.0, 1.25 * max(float(share[0]), float(heights.max(initial=0.0)), 1.0))
    axes.annotate(f"no coupon fails in {share_with_range(nested.lot)} of the lots", (1.0, 0.97),
                  xycoords="axes fraction", ha="right", va="top", fontsize=SMALL, weight="bold")
    axes.set(title="lots", xlabel=f"failing coupons of the {nested.failing.size - 1} in a lot, on any line",
             ylabel="lots [%]")
    quiet_axes(axes, grid="y")
    return axes


def draw_acceptance(axes: Axes, acceptance: LotAcceptance) -> Axes:
    """The operating characteristic: how likely lots of a quality are accepted, and were every reading true."""
    failing = [100.0 * point.failing for point in acceptance.curve]
    accepted = [100.0 * point.accepted.value for point in acceptance.curve]
    axes.plot(failing, [100.0 * point.as_known for point in acceptance.curve], color=FAINT_INK, linestyle=(0, (4, 2)),
              marker="o", markersize=4, markerfacecolor=PAPER, label="were every reading true")
    axes.vlines(failing, [100.0 * point.accepted.low for point in acceptance.curve],
                [100.0 * point.accepted.high for point in acceptance.curve], color=INK, linewidth=1.4)
    axes.plot(failing, accepted, color=INK, marker="D", markersize=6, label="as read")
    axes.set_xlim(0.0, 1.05 * max(*failing, 1.0))
    axes.set_ylim(0.0, 106.0)
    plan = acceptance.plan
    axes.set(title="accepted by sample", xlabel="failing coupons in the lot [%]", ylabel="chance of acceptance [%]")
    axes.annotate(f"{plan.sample_size} measured, at most {plan.accept_number} failing", (1.0, 1.0),
                  xycoords="axes fraction", xytext=(0, 11), textcoords="offset points", ha="right", va="bottom",
                  fontsize=SMALL, color=FAINT_INK)
    axes.annotate(f"of all lots {share_with_range(acceptance.accepted)} accepted\n"
                  f"({trimmed(100.0 * acceptance.if_independent, 1)} % by the formula for independent coupons)",
                  (1.0, 0.97), xycoords="axes fraction", ha="right", va="top", fontsize=SMALL)
    axes.legend(loc="lower left", frameon=False, fontsize=SMALL)
    quiet_axes(axes, grid="y")
    return axes
