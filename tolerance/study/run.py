"""`run`: the main job. The one place that knows the order of the steps.

Scenario -> draws of the process -> sections -> solved training sections -> prediction of every coupon -> yield,
drivers -> result. Each step has a stream of chance of its own, so that no step changes the draws of another.
"""

from __future__ import annotations

import secrets
import time
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from tolerance.cores import Progress, on_all_cores, plain_algebra, silent
from tolerance.process.draws import REPLICATES, ProcessDraws, process_of
from tolerance.results import Drawing, LineResult, Record, RunResult, Spread, VarianceShares
from tolerance.scenario.tables import Line, Scenario
from tolerance.solver.plan import SolverSettings
from tolerance.statistics.against_limit import LimitSample, YieldByLimit, limit_grid, yields_by_limit
from tolerance.statistics.ranking import model_of
from tolerance.statistics.reading import Coupons
from tolerance.statistics.sampling import Figures, widened_by_sampling
from tolerance.statistics.yields import Judgement, Limits, LineYield, histogram, judge
from tolerance.study.drawing import draw_line
from tolerance.study.lines import prepare
from tolerance.study.lots import draw, judge_nesting, judge_test, variance_by_level
from tolerance.study.measured import RESAMPLES, has_measured, judged_again, measured_inputs
from tolerance.study.predicting import PredictedLine, predict_line
from tolerance.study.solved import SolvedCache
from tolerance.study.versions import settings_of, versions
from tolerance.study.weighing import Weights, weigh


@plain_algebra
def run(
    scenario: Scenario, *, coupons: int | None = None, seed: int | None = None, direct: int = 0,
    on_progress: Progress | None = None, cache: SolvedCache | None = None, brief: bool = False,
) -> RunResult:
    """Yield and drivers of every line of a checked scenario.

    coupons, seed : instead of the scenario's.  direct : solve that many coupons themselves and report the difference.
    on_progress : called with the step's name, what is done of it, and how much there is.
    cache : of solved sections, such as tolerance.user_cache(); none is used if left out.
    brief : without the groups of drivers and without what would raise the yield; all else is the same.
    Raises UnfinishedError where a line's impedance cannot be predicted.
    """
    tell = on_progress or silent
    coupons = scenario.evaluation.coupons if coupons is None else coupons
    seed = scenario.evaluation.seed if seed is None else seed
    seed = secrets.randbelow(2**31) if seed is None else seed
    process_chance, training_chance, driver_chance, level_chance, test_chance, sampling_chance = (
        np.random.default_rng(seed).spawn(6))
    clock = _Clock()

    process = process_of(scenario)
    draws = draw(scenario, process, coupons=coupons, chance=process_chance)
    clock.lap("draws")

    settings = SolverSettings()

    def predict(task: tuple[Line, np.random.Generator]) -> PredictedLine:
        return predict_line(prepare(scenario, task[0], settings, cache), draws, chance=task[1], direct=direct)

    tasks = list(zip(scenario.lines, training_chance.spawn(len(scenario.lines)), strict=True))
    predicted = on_all_cores(predict, tasks, "solving lines", tell)
    clock.lap("solving and prediction")

    sample = coupons_of(predicted, draws)
    verdict_error = np.array([line.verdict_error for line in predicted])
    judged = judge(sample.impedance, sample.possible, sample.limits, replicates=sample.replicates,
                   impedance_error=sample.error, verdict_error=verdict_error, cluster=sample.cluster)
    nested = judge_nesting(sample, draws.lots, verdict_error)
    tested = judge_test(scenario, draws, sample, test_chance)
    by_limit, together = yields_by_limit(
        limit_sample(predicted, draws), limit_grid(max(scenario.limit_of(line) for line in scenario.lines)),
        target_yield=scenario.evaluation.target_yield)
    clock.lap("yield")
    judged = _with_doubt_of_readings(judged, predicted, draws, sampling_chance, tell)
    clock.lap("doubt of readings")

    def rank(task: tuple[PredictedLine, np.random.Generator]) -> Weights:
        return weigh(scenario, task[0], chance=task[1], with_shapley=process.is_correlated, brief=brief)

    ranking = list(zip(predicted, driver_chance.spawn(len(predicted)), strict=True))
    weights = on_all_cores(rank, ranking, "ranking drivers", tell)

    def share_out(task: tuple[PredictedLine, np.random.Generator]) -> VarianceShares | None:
        return variance_by_level(process, model_of(task[0].predictor), task[1])

    variances = on_all_cores(share_out, list(zip(predicted, level_chance.spawn(len(predicted)), strict=True)),
                              "variance by level", tell) if draws.lots else [None] * len(predicted)
    drawings = [draw_line(line.prepared, process) for line in predicted]
    results = [
        replace(_line_result(line, verdict, weight, curve, drawing), nested=of_lots, variance=variance, reading=reading)
        for line, verdict, weight, curve, drawing, of_lots, variance, reading in zip(
            predicted, judged.lines, weights, by_limit, drawings, nested.lines, variances, tested.lines, strict=True)
    ]
    clock.lap("drivers")
    return RunResult(
        title=scenario.title, seed=seed, coupons=draws.coupons, target_yield=scenario.evaluation.target_yield,
        inside=judged.inside.at_most(min(line.inside.value for line in results)), impossible=judged.impossible,
        lines=tuple(results), by_limit=together,
        record=replace(_record(scenario, settings, results, draws.replicates, clock),
                       from_cache=sum(weight.from_cache for weight in weights)),
        frequency=scenario.evaluation.frequency,
        lots=nested.lots, nested=nested.every, reading=tested.every, acceptance=tested.acceptance,
        measured=measured_inputs(scenario, process),
    )


def limit_sample(predicted: Sequence[PredictedLine], draws: ProcessDraws) -> LimitSample:
    """The sample as it is held against one limit and another."""
    sample = coupons_of(predicted, draws)
    targets = np.array([line.prepared.line.target for line in predicted])
    return LimitSample(sample.impedance, sample.possible, targets, sample.error, sample.replicates, sample.cluster)


def coupons_of(predicted: Sequence[PredictedLine], draws: ProcessDraws) -> Coupons:
    """The sample as it is judged."""
    return Coupons(
        np.stack([line.impedance for line in predicted]), np.stack([line.possible for line in predicted]),
        tuple(Limits(line.prepared.low_limit, line.prepared.high_limit) for line in predicted),
        np.array([line.prediction.held_out_error for line in predicted]), draws.replicates,
        cluster=1 if draws.lots is None else draws.lots.coupons,
    )


def _with_doubt_of_readings(
    judged: Judgement, predicted: Sequence[PredictedLine], draws: ProcessDraws, chance: np.random.Generator,
    tell: Progress,
) -> Judgement:
    """The judgement with what the number of readings of measured data leaves open in its intervals."""
    if not has_measured(draws.process):
        return judged
    limits = [Limits(line.prepared.low_limit, line.prepared.high_limit) for line in predicted]
    lines = [line.again for line in predicted]

    def judge_again(chance_of_law: np.random.Generator) -> Figures:
        return judged_again(lines, limits, draws, chance_of_law)

    others = on_all_cores(judge_again, chance.spawn(RESAMPLES), "laws of other readings", tell)
    return widened_by_sampling(judged, judged_again(lines, limits, draws, None), others)


def _line_result(
    line: PredictedLine, verdict: LineYield, weights: Weights, by_limit: YieldByLimit, drawing: Drawing,
) -> LineResult:
    prepared, tail = line.prepared, weights.tail
    verdict = verdict if tail is None else verdict.from_tails(tail.below, tail.above, tail.failing)
    runs = line.prediction.solver_runs + (0 if tail is None else tail.solver_runs)
    edges, counts = histogram(line.impedance[line.possible])
    return LineResult(
        name=prepared.line.name, kind=prepared.kind, layer=prepared.line.layer, mode=prepared.mode,
        references=prepared.surroundings.references, target=prepared.line.target,
        low_limit=prepared.low_limit, high_limit=prepared.high_limit, nominal=line.nominal,
        mean=verdict.mean, deviation=verdict.deviation, below=verdict.below, above=verdict.above,
        inside=verdict.inside, cp=verdict.cp, cpk=verdict.cpk, impossible=verdict.impossible,
        drivers=weights.drivers, groups=weights.groups, levers=weights.levers, tail=tail,
        spread=Spread(edges, counts), by_limit=by_limit, prediction=replace(line.prediction, solver_runs=runs),
        certificate=line.certificate,
        drawing=drawing, direct=line.direct, rise=prepared.rise,
    )


def _record(
    scenario: Scenario, settings: SolverSettings, lines: list[LineResult], replicates: int, clock: _Clock,
) -> Record:
    return Record(
        scenario_text=scenario.text, scenario_path=scenario.source, versions=versions(), replicates=replicates,
        solver_runs=sum(line.prediction.solver_runs for line in lines),
        settings={**settings_of(settings), "replicates of the sample": str(REPLICATES)}, seconds=dict(clock.seconds),
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
