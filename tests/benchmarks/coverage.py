"""How often the stated 95 % intervals hold the true yield: `python -m tests.benchmarks.coverage [SEEDS]`.

Two parts. Coupons of lines solved by the field solver, in the scenarios below: a line, all lines together, and with
levels the panels and lots; each seed draws, fits, certifies and judges anew as `run` does, and the yields of one run of
2^20 coupons (whole lots of as many), whose own error is an eighth of the intervals, stand for the truth. And coupons in
lots of a response that is linear and normal, whose yields are integrals (tests/nested_examples.py).
"""

from __future__ import annotations

import sys
from functools import partial
from pathlib import Path

import numpy as np

from tests.nested_examples import SIZE, exact_yields, nested_process, response
from tolerance.arrays import FloatArray
from tolerance.cores import on_all_cores, plain_algebra, silent
from tolerance.process.draws import REPLICATES, process_of
from tolerance.process.lots import draw_lots
from tolerance.scenario import Scenario, load
from tolerance.solver.plan import SolverSettings
from tolerance.statistics.estimates import Interval
from tolerance.statistics.levels import judge_lots
from tolerance.statistics.yields import Limits, judge
from tolerance.study.lines import prepare
from tolerance.study.lots import draw, judge_nesting
from tolerance.study.predicting import predict_line
from tolerance.study.run import coupons_of

SCENARIOS = Path(__file__).parents[2] / "scenarios"
SOLVED = (("tide-gauge-radio-4-layer.toml", 4096), ("fire-lookout-4-layer.toml", 8000))
TRUTH = 1 << 20
SEED_OF_TRUTH = 10_000_019

CASES = ((46.5, 54.0), (45.0, 54.5), (43.0, 57.0))  # limits of the first line; the second's are 1 and 3 ohm higher
COUPONS = (2000, 8000)
NAMES = ("coupon", "panel", "lot", "coupon, both", "panel, both", "lot, both")


def solved_yields(scenario: Scenario, coupons: int, seed: int) -> dict[str, Interval]:
    """Yields with their intervals as `run` tells them, by what they are of."""
    process_chance, training_chance = np.random.default_rng(seed).spawn(2)
    process = process_of(scenario)
    draws = draw(scenario, process, coupons=coupons, chance=process_chance)
    lines = [predict_line(prepare(scenario, line, SolverSettings()), draws, chance=chance) for line, chance in
             zip(scenario.lines, training_chance.spawn(len(scenario.lines)), strict=True)]
    sample = coupons_of(lines, draws)
    errors = np.array([line.verdict_error for line in lines])
    judged = judge(sample.impedance, sample.possible, sample.limits, replicates=sample.replicates,
                   impedance_error=sample.error, verdict_error=errors, cluster=sample.cluster)
    found = {line.name: each.inside for line, each in zip(scenario.lines, judged.lines, strict=True)}
    found["all lines"] = judged.inside
    nested = judge_nesting(sample, draws.lots, errors)
    if nested.every is not None:
        found["panels, all lines"], found["lots, all lines"] = nested.every.panel, nested.every.lot
    return found


@plain_algebra
def solved(file: str, coupons: int, seeds: int) -> dict[str, tuple[float, float]]:
    """True yield, and share of the seeds whose interval holds it."""
    scenario = load(SCENARIOS / file)
    truth = {name: each.value for name, each in solved_yields(scenario, TRUTH, SEED_OF_TRUTH).items()}
    found = on_all_cores(partial(solved_yields, scenario, coupons), range(seeds), file, silent)
    return {name: (value, float(np.mean([each[name].low <= value <= each[name].high for each in found])))
            for name, value in truth.items()}


def exact(low: float, high: float, coupons: int, seeds: int) -> dict[str, float]:
    """Share of the seeds whose interval holds the exact yield, by name."""
    limits = (Limits(low, high), Limits(low + 1.0, high + 3.0))
    known = (*exact_yields(limits[0]), *exact_yields(Limits(low + 1.0, high)))
    held: FloatArray = np.zeros(len(NAMES))
    for seed in range(seeds):
        draws = draw_lots(nested_process(), SIZE, coupons=coupons, chance=np.random.default_rng(seed))
        impedance = np.stack([response(draws.germ)] * 2)
        possible = np.ones(impedance.shape, dtype=np.bool_)
        judged = judge(impedance, possible, limits, replicates=REPLICATES, cluster=SIZE.coupons)
        nested = judge_lots(impedance, possible, limits, SIZE, replicates=REPLICATES)
        intervals = (judged.lines[0].inside, nested.lines[0].panel, nested.lines[0].lot,
                     judged.inside, nested.every.panel, nested.every.lot)
        held += [each.low <= value <= each.high for each, value in zip(intervals, known, strict=True)]
    return dict(zip(NAMES, (held / seeds).tolist(), strict=True))


def main() -> None:
    """Print a row for each yield."""
    seeds = int(sys.argv[1]) if len(sys.argv) > 1 else 200
    print(f"{seeds} seeds: share of the 95 % intervals that hold the true yield")
    for file, coupons in SOLVED:
        for name, (value, share) in solved(file, coupons, seeds).items():
            print(f"{file}, {coupons} coupons, {name}: yield {value:.5f}, held by {100.0 * share:.1f} %")
    for low, high in CASES:
        for coupons in COUPONS:
            held = exact(low, high, coupons, seeds)
            print(f"exact, {low:g} to {high:g} ohm, {coupons} coupons: "
                  + ", ".join(f"{name} {100.0 * share:.1f} %" for name, share in held.items()))


if __name__ == "__main__":
    main()
