"""What `tolerance fit` answers: what the columns of a table of readings say. Values in the unit of each column."""

from __future__ import annotations

from dataclasses import dataclass

from tolerance.statistics.estimates import Interval
from tolerance.statistics.nested import Component


@dataclass(frozen=True, slots=True)
class ColumnLimits:
    """Limits the readings are held to, and what they make of them; `outside` of the readings lie beyond."""

    low: float | None
    high: float | None
    cp: Interval | None
    cpk: Interval | None
    outside: int
    share_outside: Interval


@dataclass(frozen=True, slots=True)
class FittedColumn:
    """One column. method : the law that `shape = "measured"` would take: smoothed | normal | lognormal.

    tolerance_low, tolerance_high : where 95 % of all readings lie, were they normal, with 95 % confidence (Howe).
    range_content : share of all readings between the smallest and the largest, whatever their law, with 95 %
    confidence (Wilks).  components : by level, outermost first, where the table has lots or panels.
    suggestion : text of a variation.
    """

    heading: str
    unit: str
    count: int
    mean: Interval
    deviation: Interval
    lowest: float
    highest: float
    method: str
    p_normal: float | None
    p_lognormal: float | None
    tolerance_low: float
    tolerance_high: float
    range_content: float
    components: tuple[Component, ...]
    shares: tuple[tuple[str, float], ...]
    limits: ColumnLimits | None
    suggestion: str


@dataclass(frozen=True, slots=True)
class FitResult:
    """All columns of a table; `left_out` are those that hold no readings (labels, text)."""

    file: str
    sheet: str | None
    columns: tuple[FittedColumn, ...]
    left_out: tuple[str, ...]
