"""One line predicted: solved training sections, the fit, every coupon's impedance, and the certificate."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from tolerance.arrays import BoolArray, FloatArray, IntArray
from tolerance.errors import UnfinishedError
from tolerance.process.draws import ProcessDraws, columns_moving
from tolerance.process.values import NominalValues, ProcessValues
from tolerance.results import Certificate, DirectCheck, Prediction
from tolerance.sections.dimensions import Dimensions, dimensions_like
from tolerance.sections.surroundings import properties_that_reach
from tolerance.study.lines import PreparedLine
from tolerance.surrogate.coordinates import FARTHEST, BoxValues, training_shares
from tolerance.surrogate.prediction import Predictor, Seen, fit_predictor, see

RUNS = 60  # of the field solver for a line's prediction, the nominal section included; fewer for few variables
RUNS_PER_VARIABLE = 12
COUPON_SHARE = 0.4  # of these runs: coupons of the sample; the others lie evenly in the box
MOST_RUNS = 240
UNLIKE = 4  # places in the box where plies must have the same Dk to count as one
LARGEST_ERROR = 0.02  # of the distance from target to limit: above it the runs are doubled

MULTIPLE = 6.0  # standard errors from a limit within which a coupon is solved
CAP = 4096  # coupons of a line solved for its certificate at most
WORTH_A_REFIT = 160  # coupons within the band: with more, some are solved for a better prediction first
REFIT_RUNS = 48
REFITS = 3
WIDEST = 30.0  # root mean square errors from a limit beyond which no coupon is looked at


@dataclass(frozen=True, slots=True)
class SectionLogarithms:
    """From process values to the logarithms of the dimensions of a line's sections, (dimensions, points)."""

    prepared: PreparedLine
    dimensions: Dimensions

    def __call__(self, values: ProcessValues) -> FloatArray:
        return self.dimensions.logarithms(self.prepared.section(values))


@dataclass(slots=True)
class Training:
    """Solved sections: coordinates (runs, coordinates), impedance (runs,) [ohm]; the coupons among them by row.

    coupon_runs : which runs are coupons.  rows : their rows in the sample, in the same order.
    """

    coordinates: FloatArray
    impedance: FloatArray
    coupon_runs: IntArray
    rows: IntArray

    def add(self, coordinates: FloatArray, impedance: FloatArray, rows: IntArray | None = None) -> None:
        """Further runs; rows: where they are coupons."""
        if rows is not None:
            self.coupon_runs = np.concatenate([self.coupon_runs, len(self.impedance) + np.arange(rows.size)])
            self.rows = np.concatenate([self.rows, rows])
        self.coordinates = np.concatenate([self.coordinates, coordinates])
        self.impedance = np.concatenate([self.impedance, impedance])


@dataclass(frozen=True, slots=True)
class PredictedLine:
    """A line with the impedance [ohm] of every coupon, nought where its section cannot exist.

    Impedances are predicted, those near a limit solved: `certificate` says how many.
    """

    prepared: PreparedLine
    nominal: float
    predictor: Predictor
    prediction: Prediction
    impedance: FloatArray
    possible: BoolArray
    certificate: Certificate
    direct: DirectCheck | None
    training: Training

    def again(self, draws: ProcessDraws) -> tuple[BoolArray, FloatArray]:
        """Which sections of other draws can exist, and their predicted impedances [ohm]."""
        return self.prepared.section(draws).possible, self.predictor.impedance(draws.germ)

    @property
    def verdict_error(self) -> float:
        """Error [ohm] by which a coupon near a limit may be misjudged: none where they are solved."""
        return 0.0 if self.certificate.certified else max(self.certificate.error, self.prediction.held_out_error)


def predict_line(
    prepared: PreparedLine, draws: ProcessDraws, *, chance: np.random.Generator, direct: int = 0,
) -> PredictedLine:
    """Fit the line's impedance on solved sections, predict every coupon, and solve those near a limit."""
    possible = prepared.section(draws).possible
    if not np.any(possible):
        raise UnfinishedError("no coupon has a section that can exist")
    training, predictor = _train(prepared, draws, possible, chance)
    coupons = predictor.leave_one_out[training.coupon_runs] if training.rows.size else np.zeros(1)
    box = np.setdiff1d(np.arange(len(training.impedance)), training.coupon_runs)
    prediction = Prediction(
        solver_runs=len(training.impedance), degree=int(np.max(np.sum(predictor.polynomial.exponents, axis=1))),
        terms=predictor.polynomial.terms, leave_one_out_error=_root_mean_square(predictor.leave_one_out[box])
        if training.rows.size else 0.0,
        held_out_error=_root_mean_square(coupons), held_out_largest=float(np.max(np.abs(coupons))),
    )
    predictor, impedance, certificate = certify(prepared, draws, possible, training, predictor)
    checked = _solve_directly(prepared, draws, impedance, possible, direct) if direct else None
    runs = prediction.solver_runs + certificate.solved + (checked.coupons if checked else 0)
    return PredictedLine(
        prepared, float(prepared.impedance(prepared.nominal)[0]), predictor, replace(prediction, solver_runs=runs),
        impedance, possible,
        certificate, checked, training,
    )


def fit_line(
    prepared: PreparedLine, draws: ProcessDraws, *, chance: np.random.Generator,
) -> tuple[Predictor, float, int]:
    """Only the fit: the prediction, its root mean square error over coupons [ohm], and the solver runs it took."""
    possible = prepared.section(draws).possible
    if not np.any(possible):
        raise UnfinishedError("no coupon has a section that can exist")
    training, predictor = _train(prepared, draws, possible, chance)
    coupons = predictor.leave_one_out[training.coupon_runs] if training.rows.size else np.zeros(1)
    return predictor, _root_mean_square(coupons), len(training.impedance)


def _train(
    prepared: PreparedLine, draws: ProcessDraws, possible: BoolArray, chance: np.random.Generator,
) -> tuple[Training, Predictor]:
    """Training runs and the prediction from them, doubled while its error is large."""
    see_chance, box_chance, coupon_chance = chance.spawn(3)
    columns = columns_moving(draws.process, properties_that_reach(prepared.surroundings, prepared.line))
    seen = _seen(prepared, draws, columns, see_chance)
    training = _first_run(prepared, draws, seen, columns)
    wanted = LARGEST_ERROR * (prepared.high_limit - prepared.line.target)
    shares = training_shares(len(columns), runs=MOST_RUNS, chance=box_chance)
    rows = coupon_chance.permutation(np.flatnonzero(possible))[:MOST_RUNS]
    runs = min(RUNS, RUNS_PER_VARIABLE * (len(columns) + 1)) if columns else 1
    used, picked = 0, 0
    while True:
        coupons = math.floor(COUPON_SHARE * runs)
        box = BoxValues(draws.process, columns, prepared.line.width, shares[used : runs - 1 - coupons])
        _solve_possible(prepared, seen, box, training)
        fresh = rows[picked:coupons]
        if fresh.size:
            _solve_rows(prepared, seen, draws, fresh, training)
        predictor = fit_predictor(seen, training.coordinates, training.impedance)
        used, picked = runs - 1 - coupons, coupons
        error = _root_mean_square(predictor.leave_one_out[training.coupon_runs]) if columns else 0.0
        if error <= wanted or 2 * runs > MOST_RUNS:
            return training, predictor
        runs *= 2


def _first_run(prepared: PreparedLine, draws: ProcessDraws, seen: Seen, columns: tuple[int, ...]) -> Training:
    """The nominal section; where the process lies so far from it that the fit cannot see it, the middle of the box."""
    none = np.empty(0, dtype=np.int64)
    at = seen.of(NominalValues(draws.process.nominals))
    if np.all(np.abs(at) < FARTHEST):
        return Training(at, prepared.impedance(prepared.nominal), none, none)
    middle = BoxValues(draws.process, columns, prepared.line.width, np.zeros((1, len(columns))))
    training = Training(at[:0], np.empty(0), none, none)
    _solve_possible(prepared, seen, middle, training)
    return training


def _seen(
    prepared: PreparedLine, draws: ProcessDraws, columns: tuple[int, ...], chance: np.random.Generator,
) -> Seen:
    own_chance, chance = chance.spawn(2)
    shares = training_shares(len(columns), runs=UNLIKE, chance=own_chance)
    unlike = prepared.section(BoxValues(draws.process, columns, prepared.line.width, shares))
    logarithms = SectionLogarithms(prepared, dimensions_like(unlike, scale_free=prepared.frequency is None))
    return see(draws.process, columns, logarithms, width=prepared.line.width, chance=chance)


def _solve_possible(prepared: PreparedLine, seen: Seen, values: ProcessValues, training: Training) -> None:
    section = prepared.section(values)
    rows = np.flatnonzero(section.possible)
    training.add(seen.of(values)[rows], prepared.impedance(section.rows(rows)))


def _solve_rows(
    prepared: PreparedLine, seen: Seen, draws: ProcessDraws, rows: IntArray, training: Training,
) -> None:
    sample = draws.rows(rows)
    training.add(seen.of(sample), prepared.impedance(prepared.section(sample)), rows)


def certify(
    prepared: PreparedLine, draws: ProcessDraws, possible: BoolArray, training: Training, predictor: Predictor,
) -> tuple[Predictor, FloatArray, Certificate]:
    """Impedance of every coupon [ohm] (coupons,), those solved that lie within MULTIPLE errors of a limit.

    Where many lie there, a few of them are solved first and taken into the fit, which makes the error near the limits
    smaller. Where more than CAP remain, none of them is solved and the line is not certified.
    """
    before = training.rows.size
    band = _Band(prepared, draws, possible, predictor)
    for _ in range(REFITS):
        rows = band.rows_within(training)
        if rows.size <= WORTH_A_REFIT:
            break
        _solve_rows(prepared, predictor.seen, draws, _spread(rows, REFIT_RUNS), training)
        predictor = fit_predictor(predictor.seen, training.coordinates, training.impedance,
                                  prior=predictor.polynomial.prior)
        band = _Band(prepared, draws, possible, predictor)
    impedance = band.impedance.copy()
    impedance[training.rows] = training.impedance[training.coupon_runs]
    solved, certified, within = training.rows, True, band.rows_within(training)
    needed = within.size
    while within.size:
        needed = solved.size - before + within.size
        if needed > CAP:
            certified = False
            break
        impedance[within] = prepared.impedance(prepared.section(draws.rows(within)))
        solved = np.concatenate([solved, within])
        band.learn(within, impedance[within])
        within = np.setdiff1d(band.rows_within(training), solved)
    return predictor, impedance, Certificate(
        certified=certified, solved=int(solved.size - before), needed=int(needed), cap=CAP, multiple=MULTIPLE,
        error=band.error,
    )


class _Band:
    """The coupons near a limit, and how far the prediction may be off there."""

    def __init__(
        self, prepared: PreparedLine, draws: ProcessDraws, possible: BoolArray, predictor: Predictor,
    ) -> None:
        self.impedance = np.where(possible, predictor.impedance(draws.germ), 0.0)
        typical = _root_mean_square(predictor.leave_one_out)
        distance = np.minimum(np.abs(self.impedance - prepared.low_limit), np.abs(self.impedance - prepared.high_limit))
        self.rows = np.flatnonzero(possible & (distance < WIDEST * typical))
        self.distance = distance[self.rows]
        self.doubt = predictor.doubt(draws.germ[self.rows]) if self.rows.size else np.empty(0)
        self.factor = max(1.0, _root_mean_square(predictor.leave_one_out_in_doubts))

    @property
    def error(self) -> float:
        """Root mean square of the expected errors [ohm] within the band, 0 where there is nobody."""
        near = self.distance < MULTIPLE * self.factor * self.doubt
        return self.factor * _root_mean_square(self.doubt[near]) if np.any(near) else 0.0

    def rows_within(self, training: Training) -> IntArray:
        """Rows within MULTIPLE errors of a limit that no training run has solved."""
        near = self.rows[self.distance < MULTIPLE * self.factor * self.doubt]
        return np.setdiff1d(near, training.rows)

    def learn(self, rows: IntArray, solved: FloatArray) -> None:
        """Raise the error where solved impedances lie farther from the prediction than it said."""
        places = np.searchsorted(self.rows, rows)
        ratio = (self.impedance[rows] - solved) / self.doubt[places]
        self.factor = max(self.factor, _root_mean_square(ratio))


def _root_mean_square(values: FloatArray) -> float:
    return float(np.sqrt(np.mean(values**2)))


def _spread(rows: IntArray, count: int) -> IntArray:
    """Up to `count` of the rows, evenly spread."""
    return rows[np.unique(np.linspace(0, rows.size - 1, min(count, rows.size)).astype(np.int64))]


def _solve_directly(
    prepared: PreparedLine, draws: ProcessDraws, impedance: FloatArray, possible: BoolArray, count: int,
) -> DirectCheck:
    rows = _spread(np.flatnonzero(possible), count)
    solved = prepared.impedance(prepared.section(draws.rows(rows)))
    difference = np.abs(solved - impedance[rows])
    inside, predicted = (
        (values >= prepared.low_limit) & (values <= prepared.high_limit) for values in (solved, impedance[rows]))
    return DirectCheck(
        coupons=rows.size, largest=float(difference.max()),
        root_mean_square=float(np.sqrt(np.mean(difference**2))),
        verdicts_that_differ=int(np.count_nonzero(inside != predicted)),
        share_inside_solved=float(inside.mean()), share_inside_predicted=float(predicted.mean()),
    )
