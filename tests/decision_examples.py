"""Boards whose yields are known exactly: lines that are products of lognormals, or sums of normals."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from tests.process_examples import process, variable
from tolerance.arrays import BoolArray, FloatArray
from tolerance.decisions.board import Board, LineModel
from tolerance.process.draws import Process, ProcessDraws, draw_process
from tolerance.process.other_laws import seen_by_line
from tolerance.scenario.amounts import Amount
from tolerance.statistics.yields import Limits

Answers = Callable[[Process, FloatArray], tuple[FloatArray, BoolArray]]

COUPONS = 65536
ETCH_HALF_WIDTH = 12e-6


def lognormals(**tolerances: float) -> Process:
    """Lognormal Dk of plies by name, nominal 4, tolerance (a share) at three log deviations."""
    return process(*(variable(f"{name}.dk", 4.0, shape="lognormal", tolerance=tolerance)
                     for name, tolerance in tolerances.items()))


def product_line(
    known: Process, powers: dict[str, float], *, name: str = "line", target: float = 50.0, limit: float = 0.1,
    off: float = 1.0,
) -> LineModel:
    """Z = target x off x product of (Dk / 4) to its power: ln Z is normal."""
    names = frozenset(f"{layer}.dk" for layer in powers)

    def impedance(changed: Process, germ: FloatArray) -> FloatArray:
        draws = ProcessDraws(changed, germ)
        logarithm = sum(power * np.log(draws.value(f"{layer}.dk") / 4.0) for layer, power in powers.items())
        return np.asarray(target * off * np.exp(logarithm), dtype=np.float64)

    return LineModel(name, target, Limits(target * (1.0 - limit), target * (1.0 + limit)), 0.0, 1e-4, names,
                     seen_by_line(known, names, width=1e-4), all_possible(impedance))


def sum_line(known: Process, *, slope: float, start: float, target: float = 50.0, limit: float = 0.1) -> LineModel:
    """Z = start + slope x etch: normal with a normal etch."""
    names = frozenset({"L1.etch"})

    def impedance(changed: Process, germ: FloatArray) -> FloatArray:
        return start + slope * ProcessDraws(changed, germ).etch("L1", width=1e-4)

    return LineModel("line", target, Limits(target * (1.0 - limit), target * (1.0 + limit)), 0.0, 1e-4, names,
                     seen_by_line(known, names, width=1e-4), all_possible(impedance))


def normal_etch() -> Process:
    """Etch with a deviation of 4 um."""
    return process(variable("L1.etch", 0.0, tolerance=Amount(ETCH_HALF_WIDTH, relative=False)))


def all_possible(impedance: Callable[[Process, FloatArray], FloatArray]) -> Answers:
    """Answers of a line whose every section exists."""
    return lambda changed, germ: (impedance(changed, germ), np.ones(len(germ), dtype=np.bool_))


def board_of(known: Process, *lines: LineModel, coupons: int = COUPONS, seed: int = 0) -> Board:
    """A board on scrambled Sobol' draws of the process."""
    draws = draw_process(known, coupons=coupons, chance=np.random.default_rng(seed))
    return Board(lines, draws.germ, draws.replicates)
