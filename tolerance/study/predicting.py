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
from tolerance.study.lines import PreparedLine, section_parameters
from tolerance.surrogate.coordinates import FARTHEST, BoxValues, box_spans, gathered, training_shares
from tolerance.surrogate.polynomial import Prior, Slopes
from tolerance.surrogate.prediction import Predictor, Seen, fit_predictor, see
from tolerance.surrogate.steps import OwnValues, Stepped, along_coordinates


@dataclass(frozen=True, slots=True)
class Budget:
    """Runs of the field solver for a line's prediction, the nominal section included.

    runs : at first, fewer for few variables.  most : where the prediction is poor.
    coupon_share : of these runs, coupons of the sample; the others lie in the box.
    """

    runs: int
    per_variable: int
    most: int
    coupon_share: float


WITH_SLOPES, VALUES_ONLY = Budget(24, 5, 96, 0.33), Budget(60, 12, 240, 0.4)
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


@dataclass(frozen=True, slots=True)
class SolvedRuns:
    """Solved sections: coordinates (runs, coordinates), impedance (runs,) [ohm], and what is known of its slopes."""

    coordinates: FloatArray
    impedance: FloatArray
    slopes: Slopes


@dataclass(slots=True)
class Training:
    """Solved sections: coordinates (runs, coordinates), impedance (runs,) [ohm]; the coupons among them by row.

    coupon_runs : which runs are coupons.  rows : their rows in the sample, in the same order.
    slopes : of ln Z by the coordinates, in the runs where they are known.
    """

    coordinates: FloatArray
    impedance: FloatArray
    coupon_runs: IntArray
    rows: IntArray
    slopes: Slopes

    @staticmethod
    def empty(coordinates: int) -> Training:
        """No runs yet."""
        none = np.empty(0, dtype=np.int64)
        nowhere = np.empty((0, coordinates))
        return Training(nowhere, np.empty(0), none, none, Slopes(none, nowhere))

    def add(self, solved: SolvedRuns, rows: IntArray | None = None) -> None:
        """Further runs; rows: where they are coupons."""
        first = len(self.impedance)
        if rows is not None:
            self.coupon_runs = np.concatenate([self.coupon_runs, first + np.arange(rows.size)])
            self.rows = np.concatenate([self.rows, rows])
        self.coordinates = np.concatenate([self.coordinates, solved.coordinates])
        self.impedance = np.concatenate([self.impedance, solved.impedance])
        self.slopes = Slopes(np.concatenate([self.slopes.points, first + solved.slopes.points]),
                             np.concatenate([self.slopes.values, solved.slopes.values]))

    def fit(self, seen: Seen, *, prior: Prior | None = None) -> Predictor:
        """The prediction from these runs."""
        return fit_predictor(seen, self.coordinates, self.impedance, slopes=self.slopes, prior=prior)


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
        prepared, _nominal(prepared, draws, training, predictor.seen), predictor,
        replace(prediction, solver_runs=runs), impedance, possible, certificate, checked, training,
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
    budget = WITH_SLOPES if prepared.has_gradient else VALUES_ONLY
    training = _first_run(prepared, draws, seen, columns)
    wanted = LARGEST_ERROR * (prepared.high_limit - prepared.line.target)
    shares = gathered(draws.process, columns, training_shares(len(columns), runs=budget.most, chance=box_chance))
    rows = coupon_chance.permutation(np.flatnonzero(possible))[: budget.most]
    runs = min(budget.runs, budget.per_variable * (len(columns) + 1)) if columns else 1
    used, picked = 0, 0
    while True:
        coupons = math.floor(budget.coupon_share * runs)
        box = BoxValues(draws.process, columns, prepared.line.width, shares[used : runs - 1 - coupons])
        training.add(_solve_box(prepared, seen, box))
        fresh = rows[picked:coupons]
        if fresh.size:
            training.add(solve_runs(prepared, seen, draws.rows(fresh), slopes=True), fresh)
        predictor = training.fit(seen)
        used, picked = runs - 1 - coupons, coupons
        error = _root_mean_square(predictor.leave_one_out[training.coupon_runs]) if columns else 0.0
        if error <= wanted or 2 * runs > budget.most:
            return training, predictor
        runs *= 2


def _first_run(prepared: PreparedLine, draws: ProcessDraws, seen: Seen, columns: tuple[int, ...]) -> Training:
    """The nominal section; where the process lies so far from it that the fit cannot see it, the middle of the box."""
    training = Training.empty(seen.coordinates.count)
    if _sees_nominal(draws, seen):
        training.add(solve_runs(prepared, seen, NominalValues(draws.process.nominals), slopes=True))
    else:
        middle = BoxValues(draws.process, columns, prepared.line.width, np.zeros((1, len(columns))))
        training.add(_solve_box(prepared, seen, middle))
    return training


def _sees_nominal(draws: ProcessDraws, seen: Seen) -> bool:
    return bool(np.all(np.abs(seen.of(NominalValues(draws.process.nominals))) < FARTHEST))


def _nominal(prepared: PreparedLine, draws: ProcessDraws, training: Training, seen: Seen) -> float:
    """Impedance [ohm] of the nominal section: the first run, where the fit sees it."""
    return float(training.impedance[0] if _sees_nominal(draws, seen) else prepared.impedance(prepared.nominal)[0])


def _seen(
    prepared: PreparedLine, draws: ProcessDraws, columns: tuple[int, ...], chance: np.random.Generator,
) -> Seen:
    own_chance, chance = chance.spawn(2)
    shares = training_shares(len(columns), runs=UNLIKE, chance=own_chance)
    unlike = prepared.section(BoxValues(draws.process, columns, prepared.line.width, shares))
    logarithms = SectionLogarithms(prepared, dimensions_like(unlike, scale_free=prepared.frequency is None))
    return see(draws.process, columns, logarithms, width=prepared.line.width, chance=chance)


def _solve_box(prepared: PreparedLine, seen: Seen, box: BoxValues) -> SolvedRuns:
    """Those of the sections in the box that can exist."""
    rows = np.flatnonzero(prepared.section(box).possible)
    return solve_runs(prepared, seen, replace(box, shares=box.shares[rows]), slopes=True)


def solve_runs(prepared: PreparedLine, seen: Seen, values: OwnValues, *, slopes: bool = False) -> SolvedRuns:
    """Solved sections of process values, all possible; slopes: with those of ln Z where the solver knows them."""
    at, section = seen.of(values), prepared.section(values)
    if not (slopes and prepared.has_gradient and seen.columns):
        none = np.empty(0, dtype=np.int64)
        return SolvedRuns(at, prepared.impedance(section), Slopes(none, np.empty((0, at.shape[1]))))
    impedance, gradient = prepared.impedance_and_gradient(section)
    process = seen.process
    spans = box_spans(process, seen.columns, width=prepared.line.width)
    stepped = Stepped(values, spans, len(seen.columns), process.resins)
    moved = stepped.by_variable(section_parameters(prepared.section(stepped)).T)
    by_variable = np.einsum("vrp,pr->vr", moved, gradient / impedance)
    along = along_coordinates(by_variable, stepped.by_variable(seen.of(stepped)))
    near = np.flatnonzero(np.all(np.abs(at) < FARTHEST, axis=1))
    return SolvedRuns(at, impedance, Slopes(near, along[near]))


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
        some = _spread(rows, REFIT_RUNS)
        training.add(solve_runs(prepared, predictor.seen, draws.rows(some)), some)
        predictor = training.fit(predictor.seen, prior=predictor.polynomial.prior)
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
