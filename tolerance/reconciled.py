"""What measured coupons come to against the prediction: fit, offsets, the shifts that explain them, yields to come.

Impedances are in ohm, shares fractions of 1, values of properties SI. Intervals of yields and means are at 95 %,
those of shifts at 90 %.
"""

from __future__ import annotations

from dataclasses import dataclass

import pandas as pd

from tolerance.statistics.estimates import Interval


@dataclass(frozen=True, slots=True)
class LineReadings:
    """One line's readings in one lot, or in all. off : mean of the readings less the predicted mean, with its interval.

    score : off in standard deviations of what a lot may be off by, reading included.
    """

    line: str
    readings: int
    mean: float
    off: Interval
    score: float


@dataclass(frozen=True, slots=True)
class LotFit:
    """Whether a lot fits the prediction. chance : of a larger misfit were it a lot of the process as given."""

    lot: str
    lines: tuple[LineReadings, ...]
    misfit: float
    chance: float
    fits: bool


@dataclass(frozen=True, slots=True)
class MovedProperty:
    """How far a property has moved from the middle of what is given: value, low, high in SI (90 %)."""

    name: str
    measure: str  # "length", "number", ...
    value: float
    low: float
    high: float


@dataclass(frozen=True, slots=True)
class VariableShift:
    """The most plausible shift of one variable. germ : in deviations of its given distribution, with 90 % interval.

    learned : share of the variance of its shift that the measurement takes away; near 0 nothing is known of it.
    """

    variable: str
    germ: Interval
    learned: float
    members: tuple[MovedProperty, ...]


@dataclass(frozen=True, slots=True)
class PossibleCause:
    """One variable as all that has moved. odds : how many times less plausible than the best cause."""

    variable: str
    members: tuple[MovedProperty, ...]
    odds: float
    explains: bool


@dataclass(frozen=True, slots=True)
class LineYields:
    """Yield of a line, or of "all lines together".

    given : of the scenario.  alike : of lots like those measured.  shifted : the shifts stay, all else as given.
    """

    name: str
    given: Interval
    alike: Interval
    shifted: Interval


@dataclass(frozen=True, slots=True)
class LinePicture:
    """What the figure shows of a line: the predicted middle 95 % of coupons, readings, the mean after the shifts."""

    name: str
    target: float
    low_limit: float
    high_limit: float
    low: float
    mean: float
    high: float
    readings: tuple[float, ...]
    fitted: float


@dataclass(frozen=True, slots=True)
class Reconciled:
    """All that `tolerance reconcile` answers.

    verdict : "none" (no shift is needed), "one" cause, "several" that cannot be told apart, or a "mixture".
    tied : pairs of variables of whose shifts mostly the sum or the difference is known, with the correlation.
    scatter : variance of coupons within the lots, as a share of that given.
    """

    title: str
    seed: int
    readings: int
    repeatability: float
    lots: tuple[LotFit, ...]
    everything: LotFit
    shifts: tuple[VariableShift, ...]
    verdict: str
    causes: tuple[PossibleCause, ...]
    others: tuple[PossibleCause, ...]
    tied: tuple[tuple[str, str, float], ...]
    scatter: float
    yields: tuple[LineYields, ...]
    pictures: tuple[LinePicture, ...]
    notes: tuple[str, ...] = ()
    solver_runs: int = 0
    from_cache: int = 0  # of the solver runs

    @property
    def line_table(self) -> pd.DataFrame:
        """One row for each lot and line; the unit stands in the column's name."""
        return pd.DataFrame([
            {"lot": lot.lot, "fits": lot.fits, "line": line.line, "readings": line.readings, "mean_ohm": line.mean,
             "off_ohm": line.off.value, "off_ohm_low": line.off.low, "off_ohm_high": line.off.high,
             "score": line.score} for lot in (*self.lots, self.everything) for line in lot.lines])

    @property
    def shift_table(self) -> pd.DataFrame:
        """One row for each property that may have moved, best known first; values in SI, interval at 90 %."""
        return pd.DataFrame([
            {"variable": shift.variable, "property": member.name, "shift": member.value, "shift_low": member.low,
             "shift_high": member.high, "deviations": shift.germ.value, "learned": shift.learned}
            for shift in self.shifts for member in shift.members])

    @property
    def yield_table(self) -> pd.DataFrame:
        """One row a line, the last for all together."""
        return pd.DataFrame([
            {"line": each.name, "given": each.given.value, "alike": each.alike.value, "shifted": each.shifted.value}
            for each in self.yields])
