"""What a run comes to: frozen results, each estimate with its interval beside it, and the tables a user sees.

Impedances are in ohm, shares are fractions of 1, lengths in metres; every interval is two-sided at 95 %.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import pandas as pd

from tolerance.arrays import FloatArray, IntArray
from tolerance.hypertext import hypertext
from tolerance.sections.drawing import Conductor as Conductor
from tolerance.sections.drawing import Drawing as Drawing
from tolerance.sections.drawing import Region as Region
from tolerance.sections.reading import ReadingRise as ReadingRise
from tolerance.statistics.acceptance import LotAcceptance as LotAcceptance
from tolerance.statistics.acceptance import OperatingPoint as OperatingPoint
from tolerance.statistics.against_limit import YieldByLimit as YieldByLimit
from tolerance.statistics.estimates import Driver as Driver
from tolerance.statistics.estimates import Interval as Interval
from tolerance.statistics.levels import LevelDriver as LevelDriver
from tolerance.statistics.levels import NestedYield as NestedYield
from tolerance.statistics.levels import VarianceShares as VarianceShares
from tolerance.statistics.levers import Lever as Lever
from tolerance.statistics.levers import Levers as Levers
from tolerance.statistics.reading import GuardBand as GuardBand
from tolerance.statistics.reading import ReadingRisks as ReadingRisks

if TYPE_CHECKING:
    from collections.abc import Mapping


@dataclass(frozen=True, slots=True)
class Spread:
    """Histogram of a line's impedances: `counts` (bins,) coupons between `edges` (bins + 1,) [ohm]."""

    edges: FloatArray
    counts: IntArray


@dataclass(frozen=True, slots=True)
class Prediction:
    """How a line's impedances were predicted, and how well: errors in ohm, from points the fit has not seen."""

    solver_runs: int
    degree: int
    terms: int
    leave_one_out_error: float
    held_out_error: float
    held_out_largest: float


@dataclass(frozen=True, slots=True)
class Certificate:
    """Coupons near a limit are solved, not predicted, so that every verdict is the field solver's.

    solved : coupons solved for it.  needed : how many lay within `multiple` standard errors of a limit, `solved`
    included; above `cap` those are not solved, the line is not `certified`, and the interval of the yield is widened.
    error : root mean square of the standard errors [ohm] of the prediction there.
    """

    certified: bool
    solved: int
    needed: int
    cap: int
    multiple: float
    error: float


@dataclass(frozen=True, slots=True)
class Tail:
    """Failures too rare to be counted, by integration: shares of coupons [-].

    monotone : on every line of the integration the impedance rises throughout.
    solver_runs, largest_difference : field solver runs where the line starts to fail, and how far those of the check
        lie off the limit at most [ohm].
    """

    below: Interval
    above: Interval
    failing: Interval
    monotone: bool
    solver_runs: int
    largest_difference: float


@dataclass(frozen=True, slots=True)
class Group:
    """Variables of one layer, or of one kind of material, and the share of the variance that goes with all of them.

    total : what would be left were everything else known.
    """

    name: str
    of: str  # layer | material
    variables: tuple[str, ...]
    total: Interval


@dataclass(frozen=True, slots=True)
class DirectCheck:
    """The field solver run on `coupons` of the sample itself, against the prediction: differences in ohm."""

    coupons: int
    largest: float
    root_mean_square: float
    verdicts_that_differ: int
    share_inside_solved: float
    share_inside_predicted: float


@dataclass(frozen=True, slots=True)
class LineResult:
    """One line: its target and limits, what its impedance does, and what drives it."""

    name: str
    kind: str  # in words: "mask-coated microstrip pair"
    layer: str
    mode: str  # single | differential | common
    references: tuple[str, ...]
    target: float
    low_limit: float
    high_limit: float
    nominal: float
    mean: Interval
    deviation: Interval
    below: Interval
    above: Interval
    inside: Interval  # the yield of the line
    cp: Interval | None  # None where the line does not vary
    cpk: Interval | None
    impossible: int  # coupons whose section cannot exist; they fail
    drivers: tuple[Driver, ...]  # ranked, largest first; only variables that reach the line
    spread: Spread
    by_limit: YieldByLimit  # the yield were the limits wider or closer
    prediction: Prediction
    certificate: Certificate
    drawing: Drawing
    direct: DirectCheck | None = None
    tail: Tail | None = None  # where hardly any coupon fails; yield, below and above then come from it
    levers: Levers | None = None  # None where nothing varies, or where some coupon cannot exist
    groups: tuple[Group, ...] = ()
    nested: NestedYield | None = None  # panels and lots; with levels only
    variance: VarianceShares | None = None  # by level; with levels only
    reading: ReadingRisks | None = None  # with a [test] of readings only
    rise: ReadingRise | None = None  # what series resistance adds to a reading; the judged impedance is without it

    @property
    def limit(self) -> float:
        """Half-width of the limits, a share of the target."""
        return self.high_limit / self.target - 1.0


@dataclass(frozen=True, slots=True)
class MeasuredInput:
    """What was taken from a table of readings for one property; lengths in metres, shares as fractions.

    method : "smoothed" quantiles, or the fitted shape "normal" or "lognormal".  p_normal, p_lognormal : of the tests
    of fit (Shapiro and Wilk); None where there is none.
    """

    of: str
    file: str
    sheet: str | None
    column: str
    readings: int
    method: str
    mean: float
    deviation: float
    lowest: float
    highest: float
    measure: str  # length | copper length | share | number
    p_normal: float | None
    p_lognormal: float | None


@dataclass(frozen=True, slots=True)
class Lots:
    """How coupons were drawn as whole lots."""

    lots: int
    panels_per_lot: int
    coupons_per_panel: int


@dataclass(frozen=True, slots=True)
class Record:
    """What re-makes a run: the text, the seed, the versions, and what it cost."""

    scenario_text: str
    scenario_path: str
    versions: Mapping[str, str]
    replicates: int
    solver_runs: int
    settings: Mapping[str, str]
    seconds: Mapping[str, float]  # per step; never in the JSON, which is the same for every run
    from_cache: int = 0  # of the solver runs: solved by an earlier run; never in the JSON either


@dataclass(frozen=True, slots=True)
class RunResult:
    """All that `tolerance run` answers."""

    title: str
    seed: int
    coupons: int
    target_yield: float
    inside: Interval  # share of coupons on which every line passes
    impossible: int  # coupons on which some line cannot exist
    lines: tuple[LineResult, ...]
    by_limit: YieldByLimit  # of all lines together, were all held to the same limit
    record: Record
    lots: Lots | None = None  # with levels only
    nested: NestedYield | None = None  # of all lines together
    reading: ReadingRisks | None = None  # of all lines together
    acceptance: LotAcceptance | None = None  # with sample_size only
    frequency: float | None = None  # [Hz] where the lines are evaluated; None: lossless and static
    measured: tuple[MeasuredInput, ...] = ()

    def _repr_html_(self) -> str:
        """What a notebook shows: the yields with their intervals, and what drives each line."""
        sentence = (f"All lines together: {_percent(self.inside)} of {self.coupons:,} coupons pass (seed {self.seed}). "
                    f"Target of each line: {100.0 * self.target_yield:g} %. In brackets: 95 % intervals of the "
                    "computation alone.")
        headings = ("line", "target [ohm]", "limits [ohm]", "nominal [ohm]", "mean [ohm]", "deviation [ohm]", "yield",
                    "below", "above", "Cpk", "verdict", "largest drivers, share of the variance")
        rows = [_notebook_row(line, self.target_yield) for line in self.lines]
        return hypertext(self.title, [sentence], headings, rows)

    @property
    def misses_target(self) -> bool:
        """Whether some line's yield lies under the target yield."""
        return any(line.inside.value < self.target_yield for line in self.lines)

    @property
    def line_table(self) -> pd.DataFrame:
        """One row a line; the unit of a column stands in its name."""
        return pd.DataFrame([_line_row(line) for line in self.lines])

    @property
    def driver_table(self) -> pd.DataFrame:
        """One row for each line and driver, ranked within the line."""
        return pd.DataFrame([_driver_row(line, rank, driver) for line in self.lines
                             for rank, driver in enumerate(line.drivers, start=1)])

    @property
    def limit_table(self) -> pd.DataFrame:
        """Yield against the limit (a share of the target): one row a limit, one column a line, and all together."""
        named = {line.name: line.by_limit.value for line in self.lines}
        return pd.DataFrame({"limit": self.by_limit.limit, "all lines together": self.by_limit.value, **named})


DRIVERS_TOLD = 3  # of each line, in a notebook


def _percent(share: Interval) -> str:
    """The share with its interval, "98.43 % [98.38, 98.48]"."""
    return f"{100.0 * share.value:.2f} % [{100.0 * share.low:.2f}, {100.0 * share.high:.2f}]"


def _notebook_row(line: LineResult, target_yield: float) -> tuple[str, ...]:
    drivers = [(driver.variable, driver.shapley or driver.total) for driver in line.drivers[:DRIVERS_TOLD]]
    return (
        line.name, f"{line.target:g}", f"{line.low_limit:g} to {line.high_limit:g}", f"{line.nominal:.2f}",
        f"{line.mean.value:.2f}", f"{line.deviation.value:.2f}", _percent(line.inside),
        f"{100.0 * line.below.value:.2f} %", f"{100.0 * line.above.value:.2f} %",
        "-" if line.cpk is None else f"{line.cpk.value:.2f}", "MISSES" if line.inside.value < target_yield else "meets",
        ", ".join(f"{name} {100.0 * share.value:.0f} %" for name, share in drivers) or "none",
    )


def _interval_columns(name: str, interval: Interval | None) -> dict[str, float | None]:
    if interval is None:
        return dict.fromkeys((name, f"{name}_low", f"{name}_high"))
    return {name: interval.value, f"{name}_low": interval.low, f"{name}_high": interval.high}


def _line_row(line: LineResult) -> dict[str, object]:
    return {
        "line": line.name, "kind": line.kind, "layer": line.layer, "mode": line.mode,
        "references": ", ".join(line.references), "target_ohm": line.target,
        "low_limit_ohm": line.low_limit, "high_limit_ohm": line.high_limit, "nominal_ohm": line.nominal,
        **_interval_columns("mean_ohm", line.mean), **_interval_columns("std_ohm", line.deviation),
        **_interval_columns("yield", line.inside), **_interval_columns("below", line.below),
        **_interval_columns("above", line.above), **_interval_columns("cp", line.cp),
        **_interval_columns("cpk", line.cpk), **_interval_columns("needed_limit", line.by_limit.needed),
        "impossible": line.impossible,
        "certified": line.certificate.certified, "coupons_solved": line.certificate.solved,
        "solver_runs": line.prediction.solver_runs, "held_out_error_ohm": line.prediction.held_out_error,
        **_nested_columns(line),
    }


def _nested_columns(line: LineResult) -> dict[str, float | None]:
    """With levels and with readings only."""
    columns: dict[str, float | None] = {}
    if line.nested is not None and line.variance is not None:
        columns |= {
            **_interval_columns("panel_yield", line.nested.panel), **_interval_columns("lot_yield", line.nested.lot),
            "variance_lot": line.variance.lot.value, "variance_panel": line.variance.panel.value,
            "variance_coupon": line.variance.coupon.value,
        }
    if line.reading is not None:
        for name in ("as_read", "accepted", "false_accepts", "false_rejects"):
            columns |= _interval_columns(name, getattr(line.reading, name))
    return columns


def _driver_row(line: LineResult, rank: int, driver: Driver) -> dict[str, object]:
    row: dict[str, object] = {
        "line": line.name, "rank": rank, "variable": driver.variable,
        **_interval_columns("first", driver.first), **_interval_columns("total", driver.total),
    }
    if driver.shapley is not None:
        row.update(_interval_columns("shapley", driver.shapley))
    return row
