"""Lots and the impedance test within a run: how coupons are drawn, and what panels, lots and readings come to."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.process.draws import LotSize, Process, ProcessDraws, draw_process
from tolerance.process.lots import draw_lots, level_shares, rows_as_lots
from tolerance.results import LotAcceptance, Lots, NestedYield, ReadingRisks, VarianceShares
from tolerance.scenario.tables import ImpedanceTest, Scenario
from tolerance.statistics.acceptance import SamplingPlan, judge_lot_acceptance
from tolerance.statistics.drivers import Model
from tolerance.statistics.levels import judge_lots, variance_shares
from tolerance.statistics.reading import Coupons, Reading, judge_readings


@dataclass(frozen=True, slots=True)
class JudgedLots:
    """Yields of panels and lots; without levels there are none."""

    lots: Lots | None
    lines: tuple[NestedYield | None, ...]
    every: NestedYield | None


@dataclass(frozen=True, slots=True)
class JudgedTest:
    """What the impedance test does; where it is perfect, or none is told of, there is nothing to say."""

    lines: tuple[ReadingRisks | None, ...]
    every: ReadingRisks | None
    acceptance: LotAcceptance | None


def draw(scenario: Scenario, process: Process, *, coupons: int, chance: np.random.Generator) -> ProcessDraws:
    """A sample of the process: whole lots where anything varies by lot or panel, else coupons each for itself."""
    if process.has_levels:
        return draw_lots(process, lot_size(scenario), coupons=coupons, chance=chance)
    return draw_process(process, coupons=coupons, chance=chance)


def lot_size(scenario: Scenario) -> LotSize:
    """What a lot is made of, by [test] or its defaults."""
    test = ImpedanceTest() if scenario.test is None else scenario.test
    return LotSize(test.panels_per_lot, test.coupons_per_panel)


def judge_nesting(coupons: Coupons, size: LotSize | None, verdict_error: FloatArray) -> JudgedLots:
    """Yields of panels and lots of coupons that were drawn as lots of this size; verdict_error: (lines,) [ohm]."""
    if size is None:
        return JudgedLots(None, (None,) * len(coupons.limits), None)
    nested = judge_lots(coupons.impedance, coupons.possible, coupons.limits, size,
                        replicates=coupons.replicates, verdict_error=verdict_error)
    return JudgedLots(Lots(nested.lots, size.panels, size.coupons_per_panel), nested.lines, nested.every)


def judge_test(scenario: Scenario, draws: ProcessDraws, coupons: Coupons, chance: np.random.Generator) -> JudgedTest:
    """Readings of every line and of the coupon, and the acceptance of lots by sample, as far as [test] tells them."""
    test = ImpedanceTest() if scenario.test is None else scenario.test
    reading = Reading(test.repeatability, test.bias, test.guard_band)
    lines: tuple[ReadingRisks | None, ...] = (None,) * len(coupons.limits)
    every = acceptance = None
    if not reading.changes_nothing:
        lines = tuple(judge_readings(coupons.line(number), reading) for number in range(len(lines)))
        every = judge_readings(coupons, reading)
    if test.sample_size is not None and test.accept_number is not None:
        order_chance, sample_chance = chance.spawn(2)
        size = lot_size(scenario)
        rows = rows_as_lots(draws, size, order_chance)
        acceptance = judge_lot_acceptance(
            coupons.conforming()[rows], coupons.accepted(reading)[rows],
            SamplingPlan(test.sample_size, test.accept_number), size,
            replicates=coupons.replicates, chance=sample_chance)
    return JudgedTest(lines, every, acceptance)


def variance_by_level(process: Process, model: Model, chance: np.random.Generator) -> VarianceShares | None:
    """Shares of a line's variance by level; None without levels. The model's variables are some of the process's."""
    if not process.has_levels:
        return None
    columns = [column for column, variable in enumerate(process.variables) if variable.name in model.names]
    return variance_shares(model, level_shares(process)[:, columns], chance=chance)
