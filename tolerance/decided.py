"""What decisions come to: frozen results with the tables a user sees. Shares are fractions of 1, lengths in metres."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import pandas as pd

from tolerance.decisions.board import Aim as Aim
from tolerance.decisions.comparing import Difference as Difference
from tolerance.decisions.comparing import is_real
from tolerance.decisions.tightening import Judged as Judged
from tolerance.decisions.tightening import Tightening as Tightening
from tolerance.statistics.against_limit import YieldByLimit as YieldByLimit
from tolerance.statistics.estimates import Driver as Driver
from tolerance.statistics.estimates import Interval as Interval


@dataclass(frozen=True, slots=True)
class Basis:
    """What a decision rests on. `aim`: which yield must reach `target_yield`, of each line or of all together.

    from_cache : of the solver runs, those that an earlier command had done.
    """

    title: str
    seed: int
    coupons: int
    target_yield: float
    aim: Aim
    line_names: tuple[str, ...]
    solver_runs: int
    from_cache: int = 0

    def reaches(self, yields: Judged) -> bool:
        return yields.aimed(self.aim) >= self.target_yield

    def lowest(self, yields: Judged) -> tuple[str, Interval]:
        """The line that yields least."""
        number = min(range(len(yields.lines)), key=lambda each: yields.lines[each].value)
        return self.line_names[number], yields.lines[number]


@dataclass(frozen=True, slots=True)
class JudgedOffer:
    """One offer taken alone; gain: of the yield of all lines together."""

    name: str
    tolerance: str
    cost: float
    yields: Judged
    gain: Interval


@dataclass(frozen=True, slots=True)
class OfferSet:
    """Offers taken together, by number from 0, none being what is."""

    offers: tuple[int, ...]
    cost: float
    yields: Judged


@dataclass(frozen=True, slots=True)
class Offers:
    """The offers, the front of cost and yield (by rising cost), and the cheapest set that reaches the target.

    coupons : on which they were judged.  sets, evaluated : how many there are, and how many had to be looked at; the
    others are proven no better.
    """

    offers: tuple[JudgedOffer, ...]
    front: tuple[OfferSet, ...]
    cheapest: OfferSet | None
    coupons: int
    sets: int
    evaluated: int

    def names(self, one: OfferSet) -> tuple[str, ...]:
        return tuple(f"{self.offers[number].name} {self.offers[number].tolerance}" for number in one.offers)


@dataclass(frozen=True, slots=True)
class TightenResult:
    """All that `tolerance tighten` answers; variations stand by what halving them gains, most first."""

    basis: Basis
    now: Judged
    variations: tuple[Tightening, ...]
    offers: Offers | None

    @property
    def table(self) -> pd.DataFrame:
        """One row a variation."""
        return pd.DataFrame([{
            "variation": one.name, **_columns("yield_halved", one.halved.together), **_columns("gain", one.gain),
            **_columns("yield_doubled", one.doubled.together), **_columns("loss", one.loss),
            "needed_factor": one.needed, "yield_at_nought": one.perfect.together.value,
            "relaxed_factor": one.relaxed,
        } for one in self.variations])

    @property
    def curve_table(self) -> pd.DataFrame:
        """Yield against the factor of the half-width: one row for each variation and factor, a column for each line."""
        names = self.basis.line_names
        return pd.DataFrame([
            {"variation": one.name, "factor": factor, "all lines together": together,
             **dict(zip(names, one.lines[:, place].tolist(), strict=True))}
            for one in self.variations
            for place, (factor, together) in enumerate(zip(one.factors.tolist(), one.together.tolist(), strict=True))])

    @property
    def front_table(self) -> pd.DataFrame:
        """The front of cost and yield, by rising cost."""
        offers = self.offers
        return pd.DataFrame([] if offers is None else [{
            "offers": ", ".join(offers.names(one)), "cost": one.cost, **_columns("yield", one.yields.together),
            "lowest_line": self.basis.lowest(one.yields)[0],
            "lowest_line_yield": self.basis.lowest(one.yields)[1].value,
            "reaches_target": self.basis.reaches(one.yields)} for one in offers.front])


@dataclass(frozen=True, slots=True)
class GapWidth:
    """A pair drawn with another gap: the width whose nominal impedance is the target, and its yield."""

    gap: float
    width: float
    inside: Interval


@dataclass(frozen=True, slots=True)
class CentredLine:
    """One line: what it is drawn with, where most coupons pass, and where its mean sits on the target.

    A pair keeps its pitch: what is added to the width is taken from the gap.
    best : on the grid where one is given.  at_end : a better width may lie beyond what was looked at.
    to_impedance : yield where the fabricator brings each lot's median to the target.
    """

    name: str
    layer: str
    width: float
    gap: float | None
    best: float
    on_target: float | None
    at_end: bool
    now: Interval
    at_best: Interval
    at_on_target: Interval | None
    gain: Interval
    to_impedance: Interval
    gaps: tuple[GapWidth, ...] = ()

    @property
    def gap_at_best(self) -> float | None:
        return None if self.gap is None else self.gap - (self.best - self.width)


@dataclass(frozen=True, slots=True)
class MovedDimension:
    """A dimension that is moved instead of the widths: from `nominal` to `best` [m]."""

    name: str
    nominal: float
    best: float
    at_end: bool


@dataclass(frozen=True, slots=True)
class Way:
    """One way to the target: centre, tighten (the cheapest set of offers), or both. cost None: it does not get there,
    or needs no price where it is 0."""

    name: str
    yields: Judged | None
    reaches: bool
    cost: float | None
    offers: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class CenterResult:
    """All that `tolerance center` answers. centring_error: what is left of a lot's offset, a share of the target."""

    basis: Basis
    now: Judged
    centred: Judged
    to_impedance: Interval
    centring_error: float
    reach: float
    grid: float | None
    lines: tuple[CentredLine, ...]
    moved: MovedDimension | None
    ways: tuple[Way, ...]

    @property
    def table(self) -> pd.DataFrame:
        """One row a line; lengths in metres."""
        return pd.DataFrame([{
            "line": one.name, "layer": one.layer, "width": one.width, "gap": one.gap, "best_width": one.best,
            "best_gap": one.gap_at_best, "on_target_width": one.on_target, **_columns("yield_now", one.now),
            **_columns("yield_best", one.at_best), **_columns("gain", one.gain),
            "yield_on_target": None if one.at_on_target is None else one.at_on_target.value,
            **_columns("yield_built_to_impedance", one.to_impedance), "at_end": one.at_end} for one in self.lines])


@dataclass(frozen=True, slots=True)
class Promise:
    """One line's yield against its limit; of all lines together `name` is empty and `limit` None."""

    name: str
    target: float | None
    limit: float | None
    curve: YieldByLimit


@dataclass(frozen=True, slots=True)
class PromiseResult:
    """All that `tolerance promise` answers: the tightest limits that meet the target yield.

    together_scaled : were the limits of all lines scaled alike, the factor at which all together meet it.
    """

    basis: Basis
    lines: tuple[Promise, ...]
    together: Promise

    @property
    def table(self) -> pd.DataFrame:
        """One row a line, then all together; limits are shares of the target."""
        return pd.DataFrame([{
            "line": one.name or "all lines held to one limit", "target_ohm": one.target, "limit": one.limit,
            **_columns("tightest_limit", one.curve.needed)} for one in (*self.lines, self.together)])

    @property
    def curve_table(self) -> pd.DataFrame:
        """Yield against the limit: one row a limit, one column a line, and all together."""
        named = {one.name: one.curve.value for one in self.lines}
        return pd.DataFrame({"limit": self.together.curve.limit, "all lines": self.together.curve.value, **named})


@dataclass(frozen=True, slots=True)
class Compared:
    """One scenario among several. difference: against the first; None of the first itself.

    cost : of the cheapest set of its offers that reaches the target; None where it has none that does.
    """

    file: str
    title: str
    target_yield: float
    line_names: tuple[str, ...]
    yields: Judged
    drivers: tuple[tuple[Driver, ...], ...]
    difference: Difference | None
    has_offers: bool
    cost: float | None
    cost_offers: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class CompareResult:
    """All that `tolerance compare` answers."""

    seed: int
    coupons: int
    aim: Aim
    scenarios: tuple[Compared, ...]
    solver_runs: int
    from_cache: int = 0  # of the solver runs

    @property
    def table(self) -> pd.DataFrame:
        """One row for each scenario and line, and for all lines together."""
        rows: list[dict[str, object]] = []
        for one in self.scenarios:
            named = list(zip(one.line_names, one.yields.lines, strict=True))
            for name, value in [*named, ("", one.yields.together)]:
                difference = None if one.difference is None else (
                    one.difference.lines.get(name) if name else one.difference.together)
                rows.append({"file": one.file, "line": name or "all lines together", **_columns("yield", value),
                             **_columns("difference", difference),
                             "real": None if difference is None else is_real(difference)})
        return pd.DataFrame(rows)


def _columns(name: str, interval: Interval | None) -> dict[str, float | None]:
    if interval is None:
        return dict.fromkeys((name, f"{name}_low", f"{name}_high"))
    return {name: interval.value, f"{name}_low": interval.low, f"{name}_high": interval.high}


def in_order(variations: Sequence[Tightening]) -> tuple[Tightening, ...]:
    """Variations by what halving them gains, most first; then by what doubling them costs."""
    return tuple(sorted(variations, key=lambda one: (-one.gain.value, one.loss.value)))
