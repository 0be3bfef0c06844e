"""The board that decisions are made on: every line fitted as `run` fits it, to be asked about other processes."""

from __future__ import annotations

import secrets
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from tolerance.arrays import BoolArray, FloatArray, read_only
from tolerance.cores import Progress, on_all_cores
from tolerance.decisions.board import Board, LineModel
from tolerance.process.draws import ETCH, Process, ProcessDraws, process_of
from tolerance.process.laws import Law, quantile
from tolerance.process.other_laws import seen_by_line, with_laws, with_variable
from tolerance.process.remembered import Remembered
from tolerance.process.resin import with_causes
from tolerance.scenario.properties import Property, properties
from tolerance.scenario.tables import Line, Scenario
from tolerance.sections.surroundings import properties_that_reach
from tolerance.solver.plan import SolverSettings
from tolerance.statistics.against_limit import LimitSample
from tolerance.statistics.yields import Limits
from tolerance.study.lines import PreparedLine, prepare
from tolerance.study.lots import draw
from tolerance.study.predicting import PredictedLine, SectionLogarithms, fit_line, predict_line
from tolerance.study.run import limit_sample
from tolerance.study.solved import SolvedCache
from tolerance.surrogate.coordinates import REACH as DRAWS_REACH
from tolerance.surrogate.prediction import BLOCK_ROWS, Predictor

STEP = "solving lines"


@dataclass(frozen=True, slots=True)
class FittedBoard:
    """A board with how it was come by, a fit for each line.

    draws : the sample.  prepared, predictors : one a line.  from_cache : of the solver runs.
    sample : impedances as `run` has them, with what was solved; None where nothing was.
    """

    board: Board
    draws: ProcessDraws
    prepared: tuple[PreparedLine, ...]
    predictors: tuple[Predictor, ...]
    solver_runs: int
    from_cache: int
    sample: LimitSample | None = None


def chosen_seed(scenario: Scenario, seed: int | None) -> int:
    """The seed given, else the scenario's, else a fresh one."""
    seed = scenario.evaluation.seed if seed is None else seed
    return secrets.randbelow(2**31) if seed is None else seed


def fit_board(
    scenario: Scenario, *, coupons: int | None, seed: int, tell: Progress, process: Process | None = None,
    cache: SolvedCache | None = None,
) -> FittedBoard:
    """Fit every line as `run` does, with the same draws and the same solver runs.

    process : the scenario's with its variables in other columns.
    """
    process_chance, training_chance = np.random.default_rng(seed).spawn(2)
    known = process_of(scenario) if process is None else process
    draws = draw(scenario, known, coupons=coupons or scenario.evaluation.coupons, chance=process_chance)
    settings = SolverSettings()

    def fit(task: tuple[Line, np.random.Generator]) -> PredictedLine:
        return predict_line(prepare(scenario, task[0], settings, cache), draws, chance=task[1])

    tasks = list(zip(scenario.lines, training_chance.spawn(len(scenario.lines)), strict=True))
    found = on_all_cores(fit, tasks, STEP, tell)
    fits = [(each.prepared, each.predictor, each.prediction.held_out_error, each.prediction.solver_runs)
            for each in found]
    return replace(_board(draws, fits, known), sample=limit_sample(found, draws))


def fit_wide_board(
    scenario: Scenario, *, coupons: int | None, seed: int, tell: Progress, names: Sequence[Sequence[str]],
    reach: Sequence[float], cache: SolvedCache | None = None,
) -> FittedBoard:
    """Fit every line over moves of the centres of properties too; no verdicts are solved.

    names : for each line the properties that may move.  reach : how far [m], for each line.
    """
    process_chance, training_chance = np.random.default_rng(seed).spawn(2)
    known = process_of(scenario)
    draws = draw(scenario, known, coupons=coupons or scenario.evaluation.coupons, chance=process_chance)
    missing = [name for name in dict.fromkeys(name for each in names for name in each)
               if not _varies(known, name)]
    for name in missing:
        known = with_variable(known, _property(scenario, name))
    still = np.zeros((draws.coupons, len(missing)))
    draws = replace(draws, process=known, germ=read_only(np.asfortranarray(np.hstack([draws.germ, still]))))
    settings = SolverSettings()

    def fit(task: tuple[Line, Sequence[str], float, np.random.Generator]) -> tuple[PreparedLine, Predictor, float, int]:
        line, moving, far, chance = task
        prepared = prepare(scenario, line, settings, cache)
        wide = replace(draws, process=widened(known, moving, far, width=line.width))
        return prepared, *fit_line(prepared, wide, chance=chance)

    tasks = list(zip(scenario.lines, names, reach, training_chance.spawn(len(scenario.lines)), strict=True))
    return _board(draws, on_all_cores(fit, tasks, STEP, tell), known)


def widened(process: Process, names: Sequence[str], reach: float, *, width: float) -> Process:
    """The process with the properties `names` spread evenly over all that they and moves of `reach` [m] come to."""
    laws = {}
    for variable in process.variables:
        for member, law in variable.members:
            if member.name in names:
                reference = width if member.property == ETCH else law.nominal
                low, high = quantile(law, np.array([-DRAWS_REACH, DRAWS_REACH]), reference=reference)
                laws[member.name] = Law("uniform", law.nominal, low=float(low) - reach, high=float(high) + reach)
    return with_laws(process, laws)


def _board(
    draws: ProcessDraws, fits: Sequence[tuple[PreparedLine, Predictor, float, int]], process: Process,
) -> FittedBoard:
    germs = _Germs()
    lines = tuple(_model(prepared, predictor, process, error, germs) for prepared, predictor, error, _ in fits)
    cluster = 1 if draws.lots is None else draws.lots.coupons
    return FittedBoard(Board(lines, draws.germ, draws.replicates, cluster), draws, tuple(fit[0] for fit in fits),
                       tuple(fit[1] for fit in fits), solver_runs=sum(fit[3] for fit in fits),
                       from_cache=sum(fit[0].from_cache for fit in fits))


def _model(
    prepared: PreparedLine, predictor: Predictor, process: Process, error: float, germs: _Germs,
) -> LineModel:
    names = with_causes(properties_that_reach(prepared.surroundings, prepared.line), process.resins)
    line = prepared.line
    own = seen_by_line(process, names, width=line.width)
    return LineModel(line.name, line.target, Limits(prepared.low_limit, prepared.high_limit), error, line.width,
                     names, own, _Answers(prepared, predictor, germs))


class _Answers:
    """A fitted line's answers for processes that differ from its own in a few laws."""

    def __init__(self, prepared: PreparedLine, predictor: Predictor, germs: _Germs) -> None:
        self._prepared, self._predictor, self._germs = prepared, predictor, germs
        assert isinstance(predictor.seen.logarithms, SectionLogarithms)
        self._dimensions = predictor.seen.logarithms.dimensions

    def __call__(self, process: Process, germ: FloatArray) -> tuple[FloatArray, BoolArray]:
        """Predicted impedances [ohm], and whether the sections can exist, both (coupons,)."""
        impedance, possible = np.empty(len(germ)), np.empty(len(germ), dtype=np.bool_)
        remembered, seen = self._germs.of(germ), self._predictor.seen
        for start in range(0, len(germ), BLOCK_ROWS):
            rows = slice(start, start + BLOCK_ROWS)
            section = self._prepared.section(remembered.draws(process, rows))
            at = seen.coordinates.of(self._dimensions.logarithms(section))
            impedance[rows] = np.exp(self._predictor.polynomial.evaluate(at))
            possible[rows] = section.possible
        return impedance, possible


class _Germs:
    """What the lines of a board share: the germs that were last asked about, with what is remembered of them."""

    def __init__(self) -> None:
        self._last: Remembered | None = None

    def of(self, germ: FloatArray) -> Remembered:
        last = self._last
        if last is None or last.germ is not germ:
            self._last = last = Remembered(germ)
        return last


def _varies(process: Process, name: str) -> bool:
    return any(member.name == name for variable in process.variables for member, _ in variable.members)


def _property(scenario: Scenario, name: str) -> Property:
    return next(each for each in properties(scenario) if each.name == name)
