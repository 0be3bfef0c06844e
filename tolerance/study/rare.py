"""A line that hardly ever fails: its share of failures by integration, held to the field solver where it fails."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.process.draws import ProcessDraws
from tolerance.results import Tail
from tolerance.statistics.estimates import Interval, interval_of
from tolerance.statistics.tails import (
    FARTHEST_MASS,
    Bundle,
    Crossings,
    Failing,
    Response,
    bundle,
    failing,
    failing_along,
    profile,
)
from tolerance.statistics.yields import Limits
from tolerance.study.predicting import PredictedLine, Training
from tolerance.surrogate.prediction import Predictor, fit_predictor

RARE = 1e-4  # share of failing coupons below which the sample says too little
FIRST_STEPS = 12  # between the ends of a line, where only places to solve are looked for
POINTS = 12  # solved at each limit, first for the fit and then for the check
COUNTS = 1e-3  # share of all failures that a limit must have for points to be spent on it


@dataclass(frozen=True, slots=True)
class _Checked:
    """Solved where predictions lie at a limit: how far off the limit they are [ohm]."""

    coordinates: FloatArray
    impedance: FloatArray
    difference: FloatArray


def is_rare(line: PredictedLine) -> bool:
    """Whether so few coupons fail that their count says little, and the tails of the laws are known beyond them.

    Not with measured laws: what readings say of parts per million is nothing.
    """
    limits = line.prepared
    inside = (line.impedance >= limits.low_limit) & (line.impedance <= limits.high_limit)
    seen = line.predictor.seen
    laws = [law for column in seen.columns for _, law in seen.process.variables[column].members]
    known = bool(laws) and all(law.measured is None for law in laws)
    return known and bool(np.all(line.possible)) and float(np.mean(~inside)) < RARE


def tail_of(line: PredictedLine, *, chance: np.random.Generator) -> Tail:
    """Share of coupons below and above the limits, from lines along the direction of the impedance.

    Points where the prediction says that the line starts to fail are solved and taken into the fit; then as many
    others are solved, and what they are off by moves the limits for the ends of the interval.
    """
    limits = Limits(line.prepared.low_limit, line.prepared.high_limit)
    bundle_chance, first_chance, second_chance = chance.spawn(3)
    through = bundle(response_of(line.predictor), len(line.predictor.names), chance=bundle_chance)
    found = failing(response_of(line.predictor), through, limits, steps=FIRST_STEPS)
    learnt = _solve_where_it_fails(line, line.predictor, through, found, first_chance)
    predictor = _refitted(line.predictor, line.training, learnt)
    along = profile(response_of(predictor), through)
    found = failing_along(along, limits)
    checked = _solve_where_it_fails(line, predictor, through, found, second_chance)
    error = float(np.sqrt(np.mean(checked.difference**2))) if checked.difference.size else 0.0
    wide, close = (failing_along(along, Limits(limits.low - side * error, limits.high + side * error))
                   for side in (1.0, -1.0))
    return Tail(
        below=_share(through, found.below, wide.below, close.below),
        above=_share(through, found.above, wide.above, close.above),
        failing=_share(through, found.below + found.above, wide.below + wide.above, close.below + close.above),
        monotone=found.monotone, solver_runs=learnt.impedance.size + checked.impedance.size,
        largest_difference=float(np.max(np.abs(checked.difference), initial=0.0)),
    )


def response_of(predictor: Predictor) -> Response:
    """Predicted impedance [ohm] of independent standard normals (points, variables that reach the line)."""
    root = np.linalg.cholesky(predictor.correlation)
    return lambda points: predictor.impedance_at(points @ root.T)


def _share(through: Bundle, found: FloatArray, wide: FloatArray, close: FloatArray) -> Interval:
    """A share with its interval; wide and close: with the limits moved by the error."""
    each, fewest, most = (through.by_replicate(values) for values in (found, wide, close))
    interval = interval_of(each)
    widened = interval.widened(max(0.0, float(np.mean(each - fewest))), max(0.0, float(np.mean(most - each))))
    return Interval(widened.value, max(widened.low, 0.0), min(max(widened.high, FARTHEST_MASS), 1.0))


def _solve_where_it_fails(
    line: PredictedLine, predictor: Predictor, through: Bundle, found: Failing, chance: np.random.Generator,
) -> _Checked:
    """Solved points at the limits, picked as often as failures lie beyond them."""
    whole = float(np.sum(found.below + found.above))
    parts = []
    for crossings, shares, limit in ((found.low, found.below, line.prepared.low_limit),
                                     (found.high, found.above, line.prepared.high_limit)):
        if crossings.lines.size and np.sum(shares) > COUNTS * whole:
            parts.append(_solved(line, predictor, _picked(through, crossings, shares, chance), limit))
    if not parts:
        nothing = np.empty(0)
        return _Checked(np.empty((0, predictor.seen.coordinates.count)), nothing, nothing)
    return _Checked(*(np.concatenate([getattr(part, name) for part in parts])
                      for name in ("coordinates", "impedance", "difference")))


def _picked(through: Bundle, crossings: Crossings, shares: FloatArray, chance: np.random.Generator) -> FloatArray:
    """Up to POINTS places (points, d) of crossings, each as likely as its line's share of failures."""
    weights = np.cumsum(shares[crossings.lines])
    targets = (np.arange(POINTS) + chance.uniform()) / POINTS * weights[-1]
    picked = np.unique(np.minimum(np.searchsorted(weights, targets), weights.size - 1))
    return through.points(crossings.lines[picked], crossings.along[picked])


def _solved(line: PredictedLine, predictor: Predictor, points: FloatArray, limit: float) -> _Checked:
    seen = predictor.seen
    germ = np.zeros((len(points), len(seen.process.variables)))
    germ[:, seen.columns] = points @ np.linalg.cholesky(predictor.correlation).T
    draws = ProcessDraws(seen.process, germ)
    section = line.prepared.section(draws)
    rows = np.flatnonzero(section.possible)
    impedance = line.prepared.impedance(section.rows(rows))
    return _Checked(seen.of(draws)[rows], impedance, impedance - limit)


def _refitted(predictor: Predictor, training: Training, learnt: _Checked) -> Predictor:
    if learnt.impedance.size == 0:
        return predictor
    return fit_predictor(
        predictor.seen, np.concatenate([training.coordinates, learnt.coordinates]),
        np.concatenate([training.impedance, learnt.impedance]), slopes=training.slopes,
        prior=predictor.polynomial.prior)
