"""`reconcile`: measured coupons against the prediction. The order of the steps.

Tables -> the lines' predictions, fitted as `run` fits them -> means of the readings and their covariance -> fit of each
lot -> most plausible shifts, single causes -> yields of the lots to come.
"""

from __future__ import annotations

import os
import secrets
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from scipy.special import stdtrit

from tolerance.arrays import BoolArray, FloatArray, IntArray
from tolerance.cores import Progress, on_all_cores, plain_algebra, silent
from tolerance.process.draws import ETCH, Process, ProcessDraws, Variable, process_of, sobol_normals
from tolerance.process.laws import Law, quantile
from tolerance.process.lots import level_shares
from tolerance.reconciled import (
    LinePicture,
    LineReadings,
    LineYields,
    LotFit,
    MovedProperty,
    PossibleCause,
    Reconciled,
    VariableShift,
)
from tolerance.scenario.properties import MEASURE, Property
from tolerance.scenario.tables import ImpedanceTest, Line, Scenario
from tolerance.solver.plan import SolverSettings
from tolerance.statistics.estimates import Interval
from tolerance.statistics.readings import LineMeans, Readings, line_means, numbered
from tolerance.statistics.reconcile import (
    Cause,
    Observed,
    Response,
    Shifts,
    chance_of_more,
    misfit_of,
    most_plausible,
    single_causes,
    slopes_at_nominal,
    verdict_of,
)
from tolerance.statistics.yields import Judgement, Limits, judge
from tolerance.study.coupon_tables import CouponTable, SectionReading, read_coupons, read_sections
from tolerance.study.lines import prepare
from tolerance.study.lots import draw
from tolerance.study.predicting import PredictedLine, predict_line
from tolerance.study.solved import SolvedCache

NINETY = 1.6448536269514722  # deviations of a normal that hold 90 %
FITS = 0.05  # chance of a larger misfit under which a lot does not fit
TIED = 0.7  # correlation of two shifts from which they are said to be known together only
SECTION_ERROR, SECTION_SHARE = 1e-6, 0.01  # of a microsection: lengths [m], share of others; common practice, no source
REPLICATES, POINTS = 8, 8192  # of the yields to come
ALL_LOTS, ALL_LINES = "all readings", "all lines together"


@dataclass(frozen=True, slots=True)
class FittedLines:
    """Every line predicted, and what coupons of the given process do: mean (lines,), covariance (lines, lines)."""

    process: Process
    draws: ProcessDraws
    lines: tuple[PredictedLine, ...]
    mean: FloatArray
    error: FloatArray
    slopes: FloatArray

    @property
    def spread(self) -> FloatArray:
        """Covariance [ohm^2] (lines, lines) of single coupons, to first order."""
        return np.asarray(self.slopes @ self.process.correlation @ self.slopes.T, dtype=np.float64)

    def impedance(self, germ: FloatArray) -> FloatArray:
        """Predicted impedance [ohm] (points, lines)."""
        return np.stack([line.predictor.impedance(germ) for line in self.lines], axis=1)


@plain_algebra
def reconcile(
    scenario: Scenario, measured: str | os.PathLike[str], *, sections: str | os.PathLike[str] | None = None,
    repeatability: float | None = None, sheet: str | None = None, coupons: int | None = None, seed: int | None = None,
    on_progress: Progress | None = None, cache: SolvedCache | None = None,
) -> Reconciled:
    """Measured coupons against the prediction of a checked scenario.

    repeatability [ohm] : of one reading, instead of the scenario's [test]; its bias is taken off the readings.
    sections : table of microsections.  sheet : of XLSX tables with several.
    Raises InputError where a table cannot be read.
    """
    seed = scenario.evaluation.seed if seed is None else seed
    seed = secrets.randbelow(2**31) if seed is None else seed
    test = ImpedanceTest() if scenario.test is None else scenario.test
    repeatability = test.repeatability if repeatability is None else repeatability
    process = process_of(scenario)
    table = read_coupons(Path(measured), scenario, sheet=sheet)
    cuts = () if sections is None else read_sections(Path(sections), scenario, process, sheet=sheet)
    fitted, chance = fit_lines(scenario, process, coupons, seed, on_progress or silent, cache)
    found = reconciled(scenario, fitted, _without_bias(table, test.bias), cuts, repeatability, seed, chance)
    return replace(found, solver_runs=sum(line.prediction.solver_runs for line in fitted.lines),
                   from_cache=sum(line.prepared.from_cache for line in fitted.lines))


def _without_bias(table: CouponTable, bias: float) -> CouponTable:
    """The readings without what each has too much [ohm]."""
    return replace(table, values=table.values - bias)


@plain_algebra
def reconciled(
    scenario: Scenario, fitted: FittedLines, table: CouponTable, cuts: Sequence[SectionReading], repeatability: float,
    seed: int, chance: np.random.Generator,
) -> Reconciled:
    """The same from lines that are fitted and tables that are read."""
    number = {line.name: place for place, line in enumerate(scenario.lines)}
    line = np.array([number[name] for name in table.lines], dtype=np.int64)
    lots = list(dict.fromkeys(table.lots))
    readings = Readings(line, table.values, _units(table, line, by_lot=len(lots) > 1))
    every = line_means(readings, spread=fitted.spread, repeatability=repeatability)
    within = [line_means(_one_lot(table, line, lot), spread=fitted.spread, repeatability=repeatability)
              for lot in lots]
    scatter = float(np.mean([means.scatter for means in within]))
    between = _between_lots(fitted.process)
    response, observed = _observations(fitted, every, cuts, scatter)
    shifts = most_plausible(response, observed, fitted.process.correlation)
    causes = single_causes(response, observed, fitted.process.correlation)
    verdict, best = verdict_of(causes)
    moved = _Moves(scenario, fitted.process)
    return Reconciled(
        title=scenario.title, seed=seed, readings=len(line), repeatability=repeatability,
        lots=tuple(_lot_fit(lot or "the lot", means, fitted, between) for lot, means in zip(lots, within, strict=True))
        if len(lots) > 1 else (),
        everything=_lot_fit(ALL_LOTS if len(lots) > 1 else lots[0] or "the lot", every, fitted, between),
        shifts=moved.shifts(shifts), verdict=verdict, causes=tuple(moved.cause(one, causes[0]) for one in best),
        others=tuple(moved.cause(one, causes[0]) for one in causes if one not in best),
        tied=_tied(fitted.process, shifts), scatter=scatter,
        yields=_yields(fitted, shifts, scatter, chance),
        pictures=_pictures(fitted, readings, shifts, scatter),
    )


def fit_lines(
    scenario: Scenario, process: Process, coupons: int | None, seed: int, tell: Progress,
    cache: SolvedCache | None = None,
) -> tuple[FittedLines, np.random.Generator]:
    """Every line fitted as `run` does it, with the same draws; and a stream of chance for what comes after."""
    process_chance, training_chance, yield_chance = np.random.default_rng(seed).spawn(3)
    draws = draw(scenario, process, coupons=coupons or scenario.evaluation.coupons, chance=process_chance)
    settings = SolverSettings()

    def fit(task: tuple[Line, np.random.Generator]) -> PredictedLine:
        return predict_line(prepare(scenario, task[0], settings, cache), draws, chance=task[1])

    tasks = list(zip(scenario.lines, training_chance.spawn(len(scenario.lines)), strict=True))
    lines = tuple(on_all_cores(fit, tasks, "solving lines", tell))
    mean = np.array([float(np.mean(line.impedance[line.possible])) for line in lines])
    error = np.array([line.prediction.held_out_error for line in lines])
    known = FittedLines(process, draws, lines, mean, error, np.zeros((len(lines), len(process.variables))))
    return replace(known, slopes=slopes_at_nominal(known.impedance, len(process.variables))), yield_chance


def _units(table: CouponTable, line: IntArray, *, by_lot: bool) -> IntArray:
    """What scatters together: lots where there are several, else panels, else coupons.

    Without panels the first readings of all lines are taken to be of the first coupon, and so on.
    """
    if by_lot:
        return numbered(table.lots)
    if len(set(table.panels)) > 1:
        return numbered(table.panels)
    seen: dict[int, int] = {}
    units = []
    for each in line.tolist():
        units.append(seen.get(each, 0))
        seen[each] = units[-1] + 1
    return np.array(units, dtype=np.int64)


def _one_lot(table: CouponTable, line: IntArray, lot: str) -> Readings:
    rows = np.flatnonzero(np.array([name == lot for name in table.lots]))
    part = CouponTable(tuple(table.lines[row] for row in rows), table.values[rows], (lot,) * len(rows),
                       tuple(table.panels[row] for row in rows))
    return Readings(line[rows], part.values, _units(part, line[rows], by_lot=False))


def _between_lots(process: Process) -> FloatArray:
    """Covariance of the germs of lots; where nothing is said of levels, a lot may lie anywhere in what is given."""
    if not process.has_levels:
        return process.correlation
    share = np.sqrt(level_shares(process)[0])
    return np.asarray(process.correlation * np.outer(share, share), dtype=np.float64)


def _observations(
    fitted: FittedLines, means: LineMeans, cuts: Sequence[SectionReading], scatter: float,
) -> tuple[Response, Observed]:
    """Means of lines, then microsections, as a function of the shift; with the covariance of their errors."""
    rows = means.lines
    bent = (fitted.mean - fitted.impedance(np.zeros((1, len(fitted.process.variables))))[0])[rows]
    laws = [_law(fitted.process, cut.property) for cut in cuts]
    slopes = np.array([(quantile(law, np.array([0.5]), reference=law.nominal)
                        - quantile(law, np.array([-0.5]), reference=law.nominal))[0] for _, law in laws])
    errors = np.array([SECTION_ERROR if MEASURE[cut.property.rpartition(".")[2]] in ("length", "copper length")
                       else SECTION_SHARE * abs(cut.value) for cut in cuts])

    def response(germ: FloatArray) -> FloatArray:
        lines = fitted.impedance(germ)[:, rows] + scatter * bent
        values = [quantile(law, germ[:, column], reference=law.nominal) / error
                  for (column, law), error in zip(laws, errors, strict=True)]
        return np.column_stack([lines, *values])

    size = len(rows) + len(cuts)
    noise = np.zeros((size, size))
    noise[: len(rows), : len(rows)] = means.covariance + np.diag(fitted.error[rows] ** 2)
    noise[len(rows):, len(rows):] = np.diag(1.0 + scatter * (slopes / errors) ** 2) if cuts else np.zeros((0, 0))
    seen = [cut.value / error for cut, error in zip(cuts, errors, strict=True)]
    return response, Observed(np.array([*means.mean, *seen]), noise)


def _law(process: Process, name: str) -> tuple[int, Law]:
    return next((column, law) for column, variable in enumerate(process.variables)
                for member, law in variable.members if member.name == name)


def _lot_fit(lot: str, means: LineMeans, fitted: FittedLines, between: FloatArray) -> LotFit:
    rows = means.lines
    slopes = fitted.slopes[rows]
    off = means.mean - fitted.mean[rows]
    noise = means.covariance + np.diag(fitted.error[rows] ** 2)
    expected = np.sqrt(np.diag(slopes @ between @ slopes.T + noise))
    misfit = misfit_of(lambda germ: germ @ slopes.T, Observed(off, noise), between)
    chance = chance_of_more(misfit, len(rows))
    reach = float(stdtrit(max(means.units - 1, 1), 0.975)) * np.sqrt(np.diag(noise))
    lines = tuple(
        LineReadings(fitted.lines[row].prepared.line.name, int(count), float(mean),
                     Interval(float(each), float(each - far), float(each + far)), float(each / size) if size else 0.0)
        for row, count, mean, each, far, size in zip(rows, means.count, means.mean, off, reach, expected, strict=True))
    return LotFit(lot, lines, misfit, chance, chance >= FITS)


@dataclass(frozen=True, slots=True)
class _Moves:
    """Shifts of germs as moves of the properties behind them."""

    scenario: Scenario
    process: Process

    def shifts(self, shifts: Shifts) -> tuple[VariableShift, ...]:
        """Every variable, the best known first."""
        found = []
        for column, variable in enumerate(self.process.variables):
            germ, deviation = float(shifts.mean[column]), float(np.sqrt(shifts.covariance[column, column]))
            found.append(VariableShift(
                variable.name, Interval(germ, germ - NINETY * deviation, germ + NINETY * deviation),
                max(1.0 - deviation**2 / float(self.process.correlation[column, column]), 0.0),
                self._members(variable, germ, deviation)))
        return tuple(sorted(found, key=lambda shift: -shift.learned))

    def cause(self, cause: Cause, best: Cause) -> PossibleCause:
        variable = self.process.variables[cause.column]
        odds = float(np.exp(min(best.evidence - cause.evidence, 50.0)))
        return PossibleCause(variable.name, self._members(variable, cause.germ, cause.deviation), odds, cause.explains)

    def _members(self, variable: Variable, germ: float, deviation: float) -> tuple[MovedProperty, ...]:
        germs = np.array([0.0, germ, germ - NINETY * deviation, germ + NINETY * deviation])
        found = []
        for member, law in variable.members:
            middle, value, low, high = quantile(law, germs, reference=self._reference(member)).tolist()
            found.append(MovedProperty(member.name, MEASURE[member.property], value - middle, low - middle,
                                       high - middle))
        return tuple(found)

    def _reference(self, member: Property) -> float:
        """What percentages are of: the nominal, of an etch the width of the first line on the layer."""
        if member.property != ETCH:
            return member.nominal
        widths = [line.width for line in self.scenario.lines if member.layer in (line.layer, line.partner)]
        return widths[0] if widths else 0.0


def _tied(process: Process, shifts: Shifts) -> tuple[tuple[str, str, float], ...]:
    """Pairs of variables of which mostly one combination is known, the strongest first."""
    deviations = np.sqrt(np.diag(shifts.covariance))
    correlation = shifts.covariance / np.outer(deviations, deviations)
    names = [variable.name for variable in process.variables]
    pairs = [(names[one], names[other], float(correlation[one, other]))
             for one in range(len(names)) for other in range(one)
             if abs(correlation[one, other]) > max(TIED, abs(process.correlation[one, other]))]
    return tuple(sorted(pairs, key=lambda pair: -abs(pair[2])))


def _yields(
    fitted: FittedLines, shifts: Shifts, scatter: float, chance: np.random.Generator,
) -> tuple[LineYields, ...]:
    """As given; of lots like those measured (shift known as it is, their scatter); shifted, all else as given."""
    free = np.concatenate([sobol_normals(len(fitted.process.variables), POINTS // REPLICATES, one)
                           for one in chance.spawn(REPLICATES)])
    given, alike, shifted = (
        _judged(fitted, middle + free @ _root(covariance).T) for middle, covariance in (
            (np.zeros(len(shifts.mean)), fitted.process.correlation),
            (shifts.mean, shifts.covariance + scatter * fitted.process.correlation),
            (shifts.mean, shifts.covariance + fitted.process.correlation)))
    rows = [LineYields(line.prepared.line.name, *(judged.lines[place].inside for judged in (given, alike, shifted)))
            for place, line in enumerate(fitted.lines)]
    return (*rows, LineYields(ALL_LINES, given.inside, alike.inside, shifted.inside))


def _judged(fitted: FittedLines, germ: FloatArray) -> Judgement:
    draws = ProcessDraws(fitted.process, np.asfortranarray(germ))
    possible: BoolArray = np.stack([line.prepared.section(draws).possible for line in fitted.lines])
    limits = tuple(Limits(line.prepared.low_limit, line.prepared.high_limit) for line in fitted.lines)
    return judge(fitted.impedance(draws.germ).T, possible, limits, replicates=REPLICATES,
                 impedance_error=fitted.error)


def _root(covariance: FloatArray) -> FloatArray:
    """A matrix that makes normals of this covariance, also where it has no inverse."""
    values, vectors = np.linalg.eigh(covariance)
    return np.asarray(vectors * np.sqrt(np.maximum(values, 0.0)), dtype=np.float64)


def _pictures(fitted: FittedLines, readings: Readings, shifts: Shifts, scatter: float) -> tuple[LinePicture, ...]:
    still, moved = fitted.impedance(np.stack([np.zeros_like(shifts.mean), shifts.mean]))
    found = []
    for place, line in enumerate(fitted.lines):
        values = readings.value[readings.line == place]
        low, high = np.quantile(line.impedance[line.possible], [0.025, 0.975]).tolist()
        found.append(LinePicture(
            line.prepared.line.name, line.prepared.line.target, line.prepared.low_limit, line.prepared.high_limit, low,
            float(fitted.mean[place]), high, tuple(values.tolist()),
            float(moved[place] + scatter * (fitted.mean[place] - still[place]))))
    return tuple(found)
