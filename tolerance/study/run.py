"""`run`: the main job. The one place that knows the order of the steps.

Scenario -> draws of the process -> sections -> solved training sections -> prediction of every coupon -> yield,
drivers -> result. Each step has a stream of chance of its own, so that no step changes the draws of another.
"""

from __future__ import annotations

import os
import platform
import secrets
import time
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from importlib.metadata import version
from typing import TypeVar

import numpy as np
from threadpoolctl import threadpool_limits

from tolerance.arrays import BoolArray, FloatArray, IntArray
from tolerance.errors import UnfinishedError
from tolerance.process.draws import (
    REPLICATES,
    Process,
    ProcessDraws,
    columns_moving,
    draw_process,
    process_of,
)
from tolerance.results import DirectCheck, LineResult, Prediction, Record, RunResult, Spread
from tolerance.scenario.tables import Line, Scenario
from tolerance.sections.drawing import drawing_of
from tolerance.sections.surroundings import properties_that_reach
from tolerance.solver.plan import SolverSettings
from tolerance.statistics.estimates import Driver
from tolerance.statistics.ranking import model_of, rank_drivers
from tolerance.statistics.yields import Limits, LineYield, histogram, judge
from tolerance.study.lines import PreparedLine, nominal_impedance, prepare
from tolerance.surrogate.coordinates import Coordinates
from tolerance.surrogate.polynomial import HIGHEST_DEGREE, count_runs
from tolerance.surrogate.prediction import HELD_OUT_RUNS, Predictor, fit_predictor, largest_error_wanted

Progress = Callable[[str, int, int], None]
Task = TypeVar("Task")
Done = TypeVar("Done")
PACKAGES = ("tolerance", "numpy", "scipy", "pandas", "SALib")


@dataclass(frozen=True, slots=True)
class PredictedLine:
    """A line with the predicted impedance [ohm] of every coupon, nought where its section cannot exist."""

    prepared: PreparedLine
    predictor: Predictor
    prediction: Prediction
    impedance: FloatArray
    possible: BoolArray
    direct: DirectCheck | None


def run(
    scenario: Scenario, *, coupons: int | None = None, seed: int | None = None, direct: int = 0,
    on_progress: Progress | None = None,
) -> RunResult:
    """Yield and drivers of every line of a checked scenario.

    coupons, seed : instead of the scenario's.  direct : solve that many coupons themselves and report the difference.
    on_progress : called with the step's name, what is done of it, and how much there is.
    Raises UnfinishedError where a line's impedance cannot be predicted.
    """
    tell = on_progress or _silent
    coupons = scenario.evaluation.coupons if coupons is None else coupons
    seed = scenario.evaluation.seed if seed is None else seed
    seed = secrets.randbelow(2**31) if seed is None else seed
    process_chance, training_chance, driver_chance = np.random.default_rng(seed).spawn(3)
    clock = _Clock()

    process = process_of(scenario)
    draws = draw_process(process, coupons=coupons, chance=process_chance)
    clock.lap("draws")

    settings = SolverSettings()

    def predict(task: tuple[Line, np.random.Generator]) -> PredictedLine:
        return predict_line(prepare(scenario, task[0], settings), draws, chance=task[1], direct=direct)

    tasks = list(zip(scenario.lines, training_chance.spawn(len(scenario.lines)), strict=True))
    predicted = _on_all_cores(predict, tasks, "solving lines", tell)
    clock.lap("solving and prediction")

    judged = judge(
        np.stack([line.impedance for line in predicted]), np.stack([line.possible for line in predicted]),
        tuple(Limits(line.prepared.low_limit, line.prepared.high_limit) for line in predicted),
        replicates=draws.replicates, impedance_error=np.array([line.prediction.held_out_error for line in predicted]),
    )
    clock.lap("yield")


    def rank(task: tuple[PredictedLine, np.random.Generator]) -> tuple[Driver, ...]:
        return rank_drivers(model_of(task[0].predictor), chance=task[1], with_shapley=process.is_correlated)

    ranking = list(zip(predicted, driver_chance.spawn(len(predicted)), strict=True))
    drivers = _on_all_cores(rank, ranking, "ranking drivers", tell)
    results = [_line_result(*parts) for parts in zip(predicted, judged.lines, drivers, strict=True)]
    clock.lap("drivers")
    return RunResult(
        title=scenario.title, seed=seed, coupons=coupons, target_yield=scenario.evaluation.target_yield,
        inside=judged.inside, impossible=judged.impossible, lines=tuple(results),
        record=_record(scenario, settings, results, draws.replicates, clock), frequency=scenario.evaluation.frequency,
    )


def predict_line(
    prepared: PreparedLine, draws: ProcessDraws, *, chance: np.random.Generator, direct: int = 0,
) -> PredictedLine:
    """Fit the line's impedance on solved training sections and predict every coupon."""
    reaching = properties_that_reach(prepared.surroundings, prepared.line)
    columns = columns_moving(draws.process, reaching)
    coordinates = Coordinates(draws.process, columns, prepared.line.width)
    possible = prepared.section(draws).possible
    predictor, runs = _fit_line(prepared, coordinates, chance)
    held_out = _spread_rows(possible, HELD_OUT_RUNS)
    sample = draws.rows(held_out)
    root_mean_square, largest = predictor.held_out_errors(sample.germ, prepared.impedance(prepared.section(sample)))
    impedance = np.where(possible, predictor.impedance(draws.germ), 0.0)
    checked = _solve_directly(prepared, draws, impedance, possible, direct) if direct else None
    prediction = Prediction(
        solver_runs=runs + held_out.size + (checked.coupons if checked else 0),
        degree=predictor.polynomial.degree, terms=predictor.polynomial.terms,
        leave_one_out_error=predictor.leave_one_out_error, held_out_error=root_mean_square, held_out_largest=largest,
    )
    return PredictedLine(prepared, predictor, prediction, impedance, possible, checked)


def _fit_line(
    prepared: PreparedLine, coordinates: Coordinates, chance: np.random.Generator,
) -> tuple[Predictor, int]:
    """The prediction of degree 2, raised to 3 where its leave-one-out error asks for it, and the runs it took."""
    wanted = largest_error_wanted(
        target=prepared.line.target, limit=(prepared.high_limit - prepared.line.target) / prepared.line.target)
    state = chance.bit_generator.state
    germ, impedance = np.empty((0, len(coordinates.process.variables))), np.empty(0)
    for degree in range(2, HIGHEST_DEGREE + 1):
        chance.bit_generator.state = state  # the larger design begins with the smaller one
        wider = coordinates.training_germs(runs=count_runs(coordinates.dimensions, degree), chance=chance)
        more_germ, more_impedance = _solve_possible(prepared, coordinates.process, wider[len(germ) :])
        germ, impedance = np.concatenate([germ, more_germ]), np.concatenate([impedance, more_impedance])
        predictor = fit_predictor(coordinates, germ, impedance, degree=degree)
        if predictor.leave_one_out_error <= wanted:
            break
    return predictor, impedance.size


def _solve_possible(
    prepared: PreparedLine, process: Process, germ: FloatArray,
) -> tuple[FloatArray, FloatArray]:
    """Training germs whose section can exist, and their solved impedances."""
    section = prepared.section(ProcessDraws(process, germ))
    rows = np.flatnonzero(section.possible)
    return germ[rows], prepared.impedance(section.rows(rows))


def _spread_rows(possible: BoolArray, count: int) -> IntArray:
    """Up to `count` rows, evenly spread over the possible ones."""
    rows = np.flatnonzero(possible)
    if rows.size == 0:
        raise UnfinishedError("no coupon has a section that can exist")
    return rows[np.unique(np.linspace(0, rows.size - 1, min(count, rows.size)).astype(np.int64))]


def _solve_directly(
    prepared: PreparedLine, draws: ProcessDraws, impedance: FloatArray, possible: BoolArray, count: int,
) -> DirectCheck:
    rows = _spread_rows(possible, count)
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


def _on_all_cores(
    work: Callable[[Task], Done], tasks: Sequence[Task], step: str, tell: Progress,
) -> list[Done]:
    """`work` done on every task, in threads, results in the order of the tasks.

    Linear algebra is kept to one thread each: its matrices are small, and threads that wait for each other in it
    cost many times what they save.
    """
    results = []
    with threadpool_limits(limits=1, user_api="blas"), ThreadPoolExecutor(os.cpu_count()) as pool:
        tell(step, 0, len(tasks))
        try:
            for done, result in enumerate(pool.map(work, tasks), start=1):
                results.append(result)
                tell(step, done, len(tasks))
        except BaseException:
            pool.shutdown(cancel_futures=True)
            raise
    return results


def _line_result(line: PredictedLine, verdict: LineYield, drivers: tuple[Driver, ...]) -> LineResult:
    prepared = line.prepared
    edges, counts = histogram(line.impedance[line.possible])
    return LineResult(
        name=prepared.line.name, kind=prepared.kind, layer=prepared.line.layer, mode=prepared.mode,
        references=prepared.surroundings.references, target=prepared.line.target,
        low_limit=prepared.low_limit, high_limit=prepared.high_limit, nominal=nominal_impedance(prepared),
        mean=verdict.mean, deviation=verdict.deviation, below=verdict.below, above=verdict.above,
        inside=verdict.inside, cp=verdict.cp, cpk=verdict.cpk, impossible=verdict.impossible, drivers=drivers,
        spread=Spread(edges, counts), prediction=replace(line.prediction, solver_runs=line.prediction.solver_runs + 1),
        drawing=drawing_of(prepared.nominal, prepared.surroundings, prepared.line.layer), direct=line.direct,
        reading=prepared.reading,
    )


def _record(
    scenario: Scenario, settings: SolverSettings, lines: list[LineResult], replicates: int, clock: _Clock,
) -> Record:
    versions = {"python": platform.python_version(), **{package: version(package) for package in PACKAGES}}
    described = {f"solver {name.replace('_', ' ')}": str(getattr(settings, name)) for name in settings.__slots__}
    return Record(
        scenario_text=scenario.text, scenario_path=scenario.source, versions=versions, replicates=replicates,
        solver_runs=sum(line.prediction.solver_runs for line in lines),
        settings={**described, "replicates of the sample": str(REPLICATES)}, seconds=dict(clock.seconds),
    )


class _Clock:
    """Seconds of each step."""

    def __init__(self) -> None:
        self.seconds: dict[str, float] = {}
        self._last = time.perf_counter()

    def lap(self, step: str) -> None:
        now = time.perf_counter()
        self.seconds[step] = now - self._last
        self._last = now


def _silent(step: str, done: int, total: int) -> None:
    """Tell nobody."""
