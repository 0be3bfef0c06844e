"""Figures of decisions: yield against each tolerance, cost against yield, yield against the limit, yields compared."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from matplotlib.figure import Figure
from matplotlib.ticker import FixedLocator, NullLocator

from tolerance.report.letters import fitted
from tolerance.report.limit_plot import draw_yield_by_limit
from tolerance.report.looks import (
    BODY,
    BODY_EDGE,
    FAIL,
    FAIL_FILL,
    FAINT_INK,
    INK,
    LARGE,
    MEDIUM,
    PAGE,
    RESOLUTION,
    SMALL,
    TITLE,
    our_looks,
    quiet_axes,
)
from tolerance.report.wording import METRES_IN, LengthUnit, shorten, trimmed, two_rows

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from tolerance.decided import Basis, CenterResult, CompareResult, PromiseResult, Tightening, TightenResult

MARGIN = 0.025
ABREAST = 4
ROW = 2.45  # inches, of a row of panels
LEAST_FAILING = 0.5e-4
SCENARIOS = (FAINT_INK, BODY_EDGE, FAIL, INK)  # with a marker of its own each
YIELDS = (0.0, 0.9, 0.99, 0.999, 0.9999)
NAME = 28


def tighten_page(result: TightenResult) -> Figure:
    """A panel for each variation: yield of all lines together against its half-width."""
    with our_looks():
        page, grid = _panels(result.basis.title, "yield against each tolerance, as a multiple of what it is",
                             len(result.variations))
        for axes, one in zip(grid, result.variations, strict=True):
            draw_tightening(axes, one, result.basis)
        _key(page)
    return page


def front_page(result: TightenResult) -> Figure:
    """The front of cost and yield on the left; the six tolerances that gain most on the right."""
    assert result.offers is not None
    with our_looks():
        page = _page(result.basis.title, "what the offers buy, and what each tolerance does", PAGE[1])
        draw_front(page.add_axes((0.07, 0.11, 0.40, 0.68)), result)
        grid = page.add_gridspec(2, 3, left=0.55, right=0.98, top=0.79, bottom=0.11, wspace=0.5, hspace=0.75)
        for number, one in enumerate(result.variations[:6]):
            draw_tightening(page.add_subplot(grid[number // 3, number % 3]), one, result.basis, name_length=17)
        _key(page)
    return page


def _key(page: Figure) -> None:
    """What the two curves of a tolerance are, at the upper right."""
    handles, labels = page.axes[-1].get_legend_handles_labels()
    page.legend(handles, labels, loc="upper right", bbox_to_anchor=(1.0 - MARGIN, 1.0 - MARGIN), ncols=2, frameon=False,
                title="yield [%]")


def promise_page(result: PromiseResult) -> Figure:
    """Yield against the limit: all lines held to one, and each line."""
    curves = [result.together, *result.lines]
    with our_looks():
        page, grid = _panels(result.basis.title, "yield against the limit", len(curves))
        for number, (axes, one) in enumerate(zip(grid, curves, strict=True)):
            draw_yield_by_limit(axes, one.curve, name=one.name or "all lines held to one limit",
                                target_yield=result.basis.target_yield)
            if one.limit is not None:
                axes.axvline(100.0 * one.limit, color=INK, linestyle=(0, (5, 3)), linewidth=1.4)
            if number % ABREAST:
                axes.set_ylabel("")  # the panel on the left has it
    return page


def widths_page(result: CenterResult, lengths: LengthUnit) -> Figure:
    """Yield of every line as drawn, centred, and built to impedance, on a scale of what fails."""
    height = max(0.6 * PAGE[1], 2.2 + 0.65 * len(result.lines))
    with our_looks():
        page = _page(result.basis.title, "as drawn, centred, and built to impedance", height)
        axes = page.add_axes((0.25, 0.75 / height, 0.71, 1.0 - 2.2 / height))
        places = np.arange(len(result.lines))[::-1]
        for label, marker, color, values in (
            ("as drawn", "s", FAIL, [one.now for one in result.lines]),
            ("centred", "o", BODY_EDGE, [one.at_best for one in result.lines]),
            ("built to impedance", "D", FAINT_INK, [one.to_impedance for one in result.lines]),
        ):
            axes.plot([_failing(each.value) for each in values], places, marker=marker, color=color, linestyle="none",
                      markersize=8, label=label, clip_on=False)
        _failing_scale(axes, "x")
        axes.axvline(_failing(result.basis.target_yield), color=FAIL, linewidth=1.0, linestyle=(0, (2, 2)))
        axes.set_ylim(-0.5, len(places) - 0.5)
        axes.set_yticks(places, [_moved_words(one.name, one.width, one.best, lengths) for one in result.lines])
        axes.set_xlabel("yield [%]")
        axes.legend(loc="lower center", bbox_to_anchor=(0.5, 1.0), ncols=3, frameon=False)
        quiet_axes(axes, grid="x")
        _failing_scale(axes, "x")
    return page


def compare_page(result: CompareResult) -> Figure:
    """Yield of every line in every scenario, on a scale of what fails."""
    names = list(dict.fromkeys(name for one in result.scenarios for name in one.line_names))
    columns = 2 if all(len(one.title) <= 45 for one in result.scenarios) else 1
    head = 1.25 + 0.28 * -(-len(result.scenarios) // columns)
    height = max(0.7 * PAGE[1], 0.75 + head + 0.5 * (len(names) + 1))
    with our_looks():
        page = _page("Compared", f"{len(result.scenarios)} scenarios on the same {result.coupons:,} draws", height)
        axes = page.add_axes((0.25, 0.75 / height, 0.71, 1.0 - (0.75 + head) / height))
        for number, one in enumerate(result.scenarios):
            yields = {**dict(zip(one.line_names, one.yields.lines, strict=True)), "all lines together":
                      one.yields.together}
            shown = [(place, _failing(yields[name].value))
                     for place, name in enumerate(reversed([*names, "all lines together"])) if name in yields]
            axes.plot([value for _, value in shown], [place for place, _ in shown], marker="osD^v"[number % 5],
                      color=SCENARIOS[number % 4], linestyle="none", markersize=8, clip_on=False,
                      label=f"{number + 1}: {shorten(one.title, 60 if columns == 2 else 110)}")
        axes.set_ylim(-0.5, len(names) + 0.5)
        axes.set_yticks(range(len(names) + 1), [shorten(name, NAME) for name in reversed([*names,
                                                                                         "all lines together"])])
        axes.set_xlabel("yield [%]")
        axes.legend(loc="lower left", bbox_to_anchor=(-0.02, 1.0), ncols=columns, frameon=False)
        quiet_axes(axes, grid="x")
        _failing_scale(axes, "x")
    return page


def draw_tightening(axes: Axes, one: Tightening, basis: Basis, *, name_length: int = NAME) -> Axes:
    """Yield of all lines together, and of the lowest, against the factor of one half-width."""
    _failing_scale(axes, "y")
    lowest = one.lines.min(axis=0)
    axes.plot(one.factors, np.clip(1.0 - one.together, LEAST_FAILING, 1.0), color=BODY_EDGE, linewidth=2.0,
              label="all lines")
    axes.plot(one.factors, np.clip(1.0 - lowest, LEAST_FAILING, 1.0), color=INK, linewidth=1.2, linestyle=(0, (4, 2)),
              label="lowest line")
    axes.axhspan(1.25, _failing(basis.target_yield), facecolor=FAIL_FILL, edgecolor="none", alpha=0.35, zorder=0)
    axes.axvline(1.0, color=FAINT_INK, linewidth=0.8)
    axes.set_xlim(0.0, float(one.factors[-1]))
    axes.set_title(two_rows(one.name, name_length), fontsize=SMALL, weight="bold")
    axes.set_xlabel("times half-width", fontsize=SMALL)
    quiet_axes(axes, grid="y")
    _failing_scale(axes, "y")
    return axes


def draw_front(axes: Axes, result: TightenResult) -> Axes:
    """Cost against yield of the sets that nothing beats, the cheapest that reaches the target marked."""
    offers, basis = result.offers, result.basis
    assert offers is not None
    costs = [one.cost for one in offers.front]
    values = [_failing(one.yields.aimed(basis.aim)) for one in offers.front]
    _failing_scale(axes, "y")
    axes.step(costs, values, where="post", color=BODY, linewidth=1.6)
    axes.plot(costs, values, marker="o", markersize=8, linestyle="none", color=BODY_EDGE)
    axes.axhspan(1.25, _failing(basis.target_yield), facecolor=FAIL_FILL, edgecolor="none", alpha=0.35, zorder=0)
    best = offers.cheapest
    if best is not None:
        axes.plot([best.cost], [_failing(best.yields.aimed(basis.aim))], marker="o", markersize=13, color="none",
                  markeredgecolor=FAIL, markeredgewidth=2.0)
        axes.annotate(f"reaches {trimmed(100.0 * basis.target_yield, 3)} % for {best.cost:g}",
                      (best.cost, _failing(best.yields.aimed(basis.aim))), xytext=(12, -18),
                      textcoords="offset points", fontsize=SMALL)
    axes.set_xlabel("cost, per panel")
    axes.set_ylabel("yield [%], " + ("all lines together" if basis.aim == "together" else "lowest line"))
    quiet_axes(axes, grid="y")
    _failing_scale(axes, "y")
    return axes


def _failing(inside: float) -> float:
    return min(max(1.0 - inside, LEAST_FAILING), 1.0)


def _failing_scale(axes: Axes, which: str) -> None:
    """An axis of yields on which what fails goes by powers of ten."""
    axis = axes.xaxis if which == "x" else axes.yaxis
    (axes.set_xscale if which == "x" else axes.set_yscale)("log")
    (axes.set_xlim if which == "x" else axes.set_ylim)(1.25, LEAST_FAILING)
    axis.set_major_locator(FixedLocator([1.0 - share for share in YIELDS]))
    axis.set_minor_locator(NullLocator())
    axis.set_ticklabels([trimmed(100.0 * share, 2) for share in YIELDS])


def _panels(title: str, subtitle: str, count: int) -> tuple[Figure, list[Axes]]:
    abreast = min(ABREAST, max(count, 2))
    rows = max(-(-count // abreast), 1)
    height = max(PAGE[1], 1.6 + ROW * rows)
    page = _page(title, subtitle, height)
    grid = page.add_gridspec(rows, abreast, left=0.065, right=0.975, top=1.0 - 1.7 / height, bottom=0.65 / height,
                             wspace=0.3, hspace=0.85 if rows > 1 else 0.0)
    return page, [page.add_subplot(grid[number // abreast, number % abreast]) for number in range(count)]


def _page(title: str, subtitle: str, height: float) -> Figure:
    page = Figure(figsize=(PAGE[0], height), dpi=RESOLUTION)
    words, size = fitted(title, 72.0 * PAGE[0] * (1.0 - 2.0 * MARGIN), (TITLE, 18.0, LARGE), bold=True)
    page.text(MARGIN, 1.0 - 0.42 / height, words, fontsize=size, weight="bold", va="center")
    page.text(MARGIN, 1.0 - 0.78 / height, subtitle, fontsize=MEDIUM, color=FAINT_INK, va="center")
    return page


def _moved_words(name: str, width: float, best: float, lengths: LengthUnit) -> str:
    drawn, then = (trimmed(each / METRES_IN[lengths], 1) for each in (width, best))
    return f"{shorten(name, NAME)}\n{drawn} to {then} {lengths}"


