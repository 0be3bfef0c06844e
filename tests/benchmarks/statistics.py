"""What the statistics cost and whether the verdicts are the solver's: `python -m tests.benchmarks.statistics`.

One million predicted coupons of a line from normal draws, inverse distributions included; fit and Sobol' indices of
eight inputs; and the verdicts of a sample against the field solver on every one of its coupons (131,072; with
`--short` 4,096).
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
from scipy.special import ndtri

from tests.benchmarks.others import chaos_and_indices, sampled_indices
from tests.process_examples import predictor_of, process, variable
from tolerance.process.draws import draw_process, process_of, sobol_uniforms
from tolerance.process.values import ProcessValues
from tolerance.scenario import load
from tolerance.solver.plan import SolverSettings
from tolerance.statistics.drivers import sobol_indices
from tolerance.statistics.ranking import model_of
from tolerance.study.lines import PreparedLine, prepare
from tolerance.study.predicting import PredictedLine, predict_line
from tolerance.surrogate.polynomial import fit
from tolerance.surrogate.prediction import Predictor

SINGLE_THREAD = dict.fromkeys(
    ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "VECLIB_MAXIMUM_THREADS"), "1")
INSIDE = "--inside"
SHORT = "--short"
MILLION = 1 << 20
SCENARIOS = Path(__file__).parents[2] / "scenarios"
LINES = (("weir-module-10-layer.toml", "clock"), ("greenhouse-hub-6-layer.toml", "network pair"),
         ("tide-gauge-radio-4-layer.toml", "antenna feed"))


def main() -> None:
    """Measure in a child process whose linear algebra keeps to one thread."""
    if INSIDE not in sys.argv:
        command = [sys.executable, "-m", "tests.benchmarks.statistics", INSIDE, *sys.argv[1:]]
        sys.exit(subprocess.run(command, env={**os.environ, **SINGLE_THREAD}, check=False).returncode)
    coupons = 4096 if SHORT in sys.argv else 131072
    a_million_coupons()
    fit_and_indices()
    print(f"\n{'verdicts against the solver':<44}{'coupons':>9}{'runs':>7}{'near':>6}{'wrong':>7}{'uncertified':>13}")
    for file, name in LINES:
        verdicts(file, name, coupons)


def a_million_coupons() -> None:
    """Of a stripline of eight inputs."""
    prepared, predicted = predict("weir-module-10-layer.toml", "memory strobe pair", 4096)
    uniforms = sobol_uniforms(len(predicted.predictor.names), MILLION, np.random.default_rng(1))
    inverse = best_of(lambda: ndtri(uniforms))
    germ = np.asfortranarray(ndtri(uniforms))
    prediction = best_of(lambda: predicted.predictor.impedance_at(germ))
    print(f"2^20 coupons of a {prepared.kind}, {len(predicted.predictor.names)} inputs, one core: "
          f"inverse normals {inverse:.3f} s, laws, sections and prediction {prediction:.3f} s")


def fit_and_indices() -> None:
    """Of eight inputs, from 60 runs."""
    predictor = eight_inputs()
    at = predictor.seen.coordinates
    coordinates = 2.0 * sobol_uniforms(at.count, 64, np.random.default_rng(2))[:60] - 1.0
    values = predictor.polynomial.evaluate(coordinates)
    fitted = best_of(lambda: fit(coordinates, values))
    indices = best_of(lambda: sobol_indices(model_of(predictor), chance=np.random.default_rng(1)))
    print(f"eight inputs: fit of {predictor.polynomial.terms} terms to 60 runs {1e3 * fitted:.0f} ms, "
          f"indices (8 x 2048 x 10 points) {1e3 * indices:.0f} ms")
    work, totals = sampled_indices(predictor.polynomial.evaluate, at.count, 8 * 2048)
    print(f"    beside it: SALib's own sample of the same size and its analysis of the same polynomial "
          f"{1e3 * best_of(work, repeats=2):.0f} ms")
    if (chaos := chaos_and_indices(coordinates, values)) is None:
        print("    beside it: OpenTURNS is not installed")
        return
    work, chaotic = chaos
    print(f"    beside it: OpenTURNS, polynomial chaos of degree 3 from the same runs and its indices "
          f"{1e3 * best_of(work, repeats=2):.0f} ms; largest difference of a total index to SALib's "
          f"{np.max(np.abs(chaotic - totals)):.4f}")


def verdicts(file: str, name: str, coupons: int) -> None:
    """One line: its certificate, and how many verdicts are not those of the solver."""
    prepared, predicted = predict(file, name, coupons)
    scenario = load(str(SCENARIOS / file))
    draws = draw_process(process_of(scenario), coupons=coupons, chance=np.random.default_rng(5))
    solved = np.where(predicted.possible, prepared.impedance(prepared.section(draws)), 0.0)
    inside, certified, plain = (
        (values >= prepared.low_limit) & (values <= prepared.high_limit)
        for values in (solved, predicted.impedance, predicted.predictor.impedance(draws.germ)))
    print(f"{name + ', ' + prepared.kind:<44}{coupons:>9}{predicted.prediction.solver_runs:>7}"
          f"{predicted.certificate.solved:>6}{np.count_nonzero(inside != certified):>7}"
          f"{np.count_nonzero(inside != plain):>13}")


def predict(file: str, name: str, coupons: int) -> tuple[PreparedLine, PredictedLine]:
    """A line of a scenario, predicted."""
    scenario = load(str(SCENARIOS / file))
    line = next(line for line in scenario.lines if line.name == name)
    prepared = prepare(scenario, line, SolverSettings())
    draws = draw_process(process_of(scenario), coupons=coupons, chance=np.random.default_rng(5))
    return prepared, predict_line(prepared, draws, chance=np.random.default_rng(9))


def eight_inputs() -> Predictor:
    """A product of powers of eight inputs, bent a little."""
    names = tuple(f"P{number}.thickness" for number in range(8))
    known = process(*(variable(name, 1.0, tolerance=0.1) for name in names))

    def logarithms(values: ProcessValues) -> np.ndarray:
        return np.log([values.value(name) for name in names])

    powers = np.array([0.6, -0.5, 0.3, -0.2, 0.1, 0.05, 0.02, 0.01])
    return predictor_of(known, tuple(range(8)), lambda values: 50.0 * np.exp(
        np.sinh(powers @ logarithms(values))), logarithms)


def best_of(work: Callable[[], object], repeats: int = 5) -> float:
    """Shortest of several processor times [s]."""
    times = []
    for _ in range(repeats):
        start = time.process_time()
        work()
        times.append(time.process_time() - start)
    return min(times)


if __name__ == "__main__":
    main()
