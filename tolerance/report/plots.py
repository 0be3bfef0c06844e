"""Plots of impedances and drivers: each takes finished results and the Axes to draw on, returns the Axes, computes
nothing but where its letters go."""

from __future__ import annotations

from typing import TYPE_CHECKING

from matplotlib.patches import Rectangle
from matplotlib.ticker import MaxNLocator

from tolerance.report.looks import (
    BODY,
    BODY_EDGE,
    FAIL,
    FAIL_FILL,
    FAINT_INK,
    HATCH_FAIL,
    INK,
    LARGE,
    MEDIUM,
    PAPER,
    SMALL,
    quiet_axes,
)
from tolerance.report.tables import MISSES, LineWords, line_words, ranking
from tolerance.report.weights import gain_words, worthwhile
from tolerance.report.wording import percent, shorten, trimmed, variable_words

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.axes import Axes

    from tolerance.results import Driver, LineResult, RunResult

HEADROOM = 1.50  # of the histogram, for the words above it
ROOM_BESIDE = 0.24  # outside each limit, of the distance between the limits
ROOM_FOR_WORDS = 0.18  # outside each limit at least, of all that is shown
DRIVERS_SHOWN = 6
FEWEST_ROWS = 5  # so that a single driver is not drawn as a wall
LONGEST_DRIVER = 60
OVERVIEW_NAME = 34


def draw_spread(axes: Axes, line: LineResult, *, target_yield: float) -> Axes:
    """The spread of one line's impedance between its limits; what lies outside is hatched and counted."""
    words = line_words(line, target_yield)
    edges, counts = line.spread.edges, line.spread.counts
    height = HEADROOM * max(float(counts.max(initial=0)), 1.0)
    room = ROOM_BESIDE * (line.high_limit - line.low_limit)
    left, right = min(float(edges[0]), line.low_limit - room), max(float(edges[-1]), line.high_limit + room)
    left = min(left, line.low_limit - ROOM_FOR_WORDS * (right - left))
    right = max(right, line.high_limit + ROOM_FOR_WORDS * (right - left))
    axes.set_xlim(left, right)
    axes.set_ylim(0.0, height)
    axes.stairs(counts, edges, fill=True, facecolor=BODY, edgecolor="none")
    axes.stairs(counts, edges, color=BODY_EDGE, linewidth=1.2)
    for start, end in ((left, line.low_limit), (line.high_limit, right)):
        tail = axes.stairs(counts, edges, fill=True, facecolor=FAIL_FILL, edgecolor=FAIL, hatch=HATCH_FAIL,
                           linewidth=1.2)
        tail.set_clip_path(Rectangle((start, 0.0), end - start, height, transform=axes.transData))
    for limit in (line.low_limit, line.high_limit):
        axes.axvline(limit, ymax=0.97, color=INK, linestyle=(0, (5, 3)), linewidth=1.6)
    axes.axvline(line.target, ymax=0.675, color=INK, linewidth=1.2)
    axes.plot([line.nominal], [0.0], marker="^", markersize=11, color=PAPER, markeredgecolor=INK,
              markeredgewidth=1.4, clip_on=False, zorder=6)
    _spread_words(axes, line, words)
    axes.set(title="spread", xlabel="impedance [ohm]", ylabel="coupons in each bin")
    axes.yaxis.set_major_locator(MaxNLocator(4, integer=True))
    _remark(axes, f"mean {words.mean}, deviation {words.deviation} ohm; triangle: nominal {words.nominal} ohm")
    quiet_axes(axes, grid="y")
    return axes


def _spread_words(axes: Axes, line: LineResult, words: LineWords) -> None:
    """Beside each limit, on its outer side: what it is, and the share that fails there."""
    low, high = words.limits.split(" to ")
    for limit, text, share, outwards in ((line.low_limit, low, f"{words.below}\nbelow", -1),
                                         (line.high_limit, high, f"{words.above}\nabove", 1)):
        side = "right" if outwards < 0 else "left"
        fails = bool(float(share.split(" %")[0]))
        for remark, height, size, weight, color in (
            (f"limit {text}", 0.97, SMALL, "normal", INK),
            (share, 0.88, MEDIUM, "bold" if fails else "normal", FAIL if fails else FAINT_INK),
        ):
            axes.annotate(remark, (limit, height), xycoords=("data", "axes fraction"), xytext=(6 * outwards, 0),
                          textcoords="offset points", va="top", ha=side, fontsize=size, weight=weight, color=color)
    axes.annotate(f"target {words.target}", (line.target, 0.675), xycoords=("data", "axes fraction"), xytext=(0, 2),
                  textcoords="offset points", va="bottom", ha="center", fontsize=SMALL)


def _remark(axes: Axes, text: str) -> None:
    """A few faint words at the end of the title's row."""
    axes.annotate(text, (1.0, 1.0), xycoords="axes fraction", xytext=(0, 11), textcoords="offset points",
                  ha="right", va="bottom", fontsize=SMALL, color=FAINT_INK)


def draw_drivers(axes: Axes, line: LineResult) -> Axes:
    """What drives one line's impedance: ranked bars with intervals, the first-order effect marked on each."""
    shown = line.drivers[:DRIVERS_SHOWN]
    axes.set_title("what drives it")
    if not shown:
        axes.set_axis_off()
        axes.text(0.0, 0.9, "Nothing that varies reaches this line.", transform=axes.transAxes, va="top")
        return axes
    rows = max(len(shown), FEWEST_ROWS)
    reach = 100.0 * max(max(ranking(driver).high, driver.total.high, driver.first.high) for driver in shown)
    axes.set_xlim(0.0, 1.17 * max(reach, 1.0))
    axes.set_ylim(rows - 0.45, -0.55)
    gains = {lever.variable: gain_words(lever) for lever in worthwhile(line, len(line.drivers))}
    for row, driver in enumerate(shown):
        _draw_driver(axes, row, driver)
        if driver.variable in gains:
            words = f"halved: yield {gains[driver.variable]}" + (" points" if row == 0 else "")
            axes.annotate(words, (1.0, row + 0.01), xycoords=("axes fraction", "data"), ha="right", va="bottom",
                          fontsize=SMALL, color=FAINT_INK)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    axes.set_xlabel("share of the variance [%]", loc="left")
    with_shapley = any(driver.shapley is not None for driver in shown)
    _remark(axes, "bar: Shapley; diamond: first-order; cross: total" if with_shapley
            else "bar: total effect; diamond: first-order")
    quiet_axes(axes, grid="x")
    rest = line.drivers[DRIVERS_SHOWN:]
    if rest:
        most = max(ranking(driver).value for driver in rest)
        bound = f"at most {percent(most, 1)}" if most >= 0.0005 else "below 0.1 %"
        axes.annotate(f"and {len(rest)} more, {'each ' if len(rest) > 1 else ''}{bound}", (1.0, 0.0),
                      xycoords="axes fraction", xytext=(0, -24), textcoords="offset points", ha="right", va="top",
                      fontsize=SMALL, color=FAINT_INK)
    return axes


def _draw_driver(axes: Axes, row: int, driver: Driver) -> None:
    ranked = ranking(driver)
    value, low, high = (100.0 * part for part in (ranked.value, ranked.low, ranked.high))
    height = row + 0.25
    axes.barh(height, max(value, 0.0), height=0.30, color=BODY, edgecolor=BODY_EDGE)
    axes.plot([low, high], [height, height], color=INK, linewidth=1.4, marker="|", markersize=8,
              solid_capstyle="butt")
    axes.plot([100.0 * driver.first.value], [height], marker="D", markersize=6, color=PAPER, markeredgecolor=INK,
              clip_on=False, zorder=5)
    if driver.shapley is not None:
        axes.plot([100.0 * driver.total.value], [height], marker="x", markersize=7.5, color=INK, markeredgewidth=1.8,
                  clip_on=False, zorder=5)
    name = shorten(variable_words(driver.variable), LONGEST_DRIVER)
    axes.text(0.0, row + 0.01, f" {name}", ha="left", va="bottom", fontsize=SMALL, zorder=6)
    end = max(high, 100.0 * driver.first.value, 100.0 * driver.total.value if driver.shapley else 0.0)
    axes.annotate(percent(ranked.value, 0 if value >= 0.95 else 1), (end, height), xytext=(9, 0),
                  textcoords="offset points", ha="left", va="center", fontsize=SMALL, weight="bold")


def draw_overview(axes: Axes, result: RunResult, lines: Sequence[LineResult]) -> Axes:
    """All lines under each other: the spread of each as a share of its target, limits, yield and verdict."""
    reach = max(max(abs(edge / line.target - 1.0) for edge in (line.low_limit, line.high_limit)) for line in lines)
    widest = max(max(abs(edge / line.target - 1.0) for edge in line.spread.edges[[0, -1]]) for line in lines)
    reach = 100.0 * min(max(1.06 * widest, 1.15 * reach), 2.0 * reach)
    axes.set_xlim(-reach, reach)
    axes.set_ylim(len(lines) - 0.85, -0.95)
    for row, line in enumerate(lines):
        _draw_overview_row(axes, row, line, reach=reach, target_yield=result.target_yield)
    axes.axvline(0.0, color=INK, linewidth=0.9, zorder=0.5)
    names = [f"{shorten(line.name, OVERVIEW_NAME)}\n{trimmed(line.target, 2)} ohm" for line in lines]
    axes.set_yticks([row - 0.4 for row in range(len(lines))], names)
    axes.tick_params(axis="y", length=0)
    axes.spines["left"].set_visible(False)
    axes.set_xlabel("impedance off its target [%]; dashed: limits; hatched: what fails")
    quiet_axes(axes, grid="x")
    return axes


def _draw_overview_row(axes: Axes, row: int, line: LineResult, *, reach: float, target_yield: float) -> None:
    words = line_words(line, target_yield)
    off_target = 100.0 * (line.spread.edges / line.target - 1.0)
    low, high = (100.0 * (limit / line.target - 1.0) for limit in (line.low_limit, line.high_limit))
    ridge = row - 0.78 * line.spread.counts / max(float(line.spread.counts.max(initial=0)), 1.0)
    axes.stairs(ridge, off_target, baseline=row, fill=True, facecolor=BODY, edgecolor="none")
    axes.stairs(ridge, off_target, baseline=row, color=BODY_EDGE, linewidth=0.9)
    for start, end in ((-reach, low), (high, reach)):
        tail = axes.stairs(ridge, off_target, baseline=row, fill=True, facecolor=FAIL_FILL, edgecolor=FAIL,
                           hatch=HATCH_FAIL, linewidth=0.9)
        tail.set_clip_path(Rectangle((start, row - 1.0), end - start, 1.0, transform=axes.transData))
    if min(abs(off_target[0]), abs(off_target[-1])) > reach and off_target[0] * off_target[-1] > 0.0:
        _say_beyond(axes, row, 100.0 * (line.mean.value / line.target - 1.0))
    axes.plot([low, low], [row, row - 0.82], color=INK, linestyle=(0, (4, 2)), linewidth=1.3)
    axes.plot([high, high], [row, row - 0.82], color=INK, linestyle=(0, (4, 2)), linewidth=1.3)
    axes.axhline(row, color=FAINT_INK, linewidth=0.7)
    missed = words.verdict == MISSES
    axes.annotate(words.headline, (1.0, row - 0.40), xycoords=("axes fraction", "data"), xytext=(14, 0),
                  textcoords="offset points", va="center", fontsize=LARGE, weight="bold",
                  color=FAIL if missed else INK)
    axes.annotate(f"{words.inside_range}\n{words.verdict}", (1.0, row - 0.40), xycoords=("axes fraction", "data"),
                  xytext=(150, 0), textcoords="offset points", va="center", fontsize=SMALL,
                  color=FAIL if missed else FAINT_INK)


def _say_beyond(axes: Axes, row: int, mean: float) -> None:
    """A spread that lies outside the picture altogether is told of at its edge."""
    right = mean > 0.0
    axes.annotate(f"all beyond: mean {mean:+.0f} %", (1.0 if right else 0.0, row - 0.40),
                  xycoords=("axes fraction", "data"), xytext=(-8 if right else 8, 0), textcoords="offset points",
                  ha="right" if right else "left", va="center", fontsize=SMALL, color=FAIL,
                  bbox={"facecolor": PAPER, "edgecolor": "none", "pad": 2.0})
