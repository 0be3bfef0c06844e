"""Made-up results with lots and an impedance test, for the tests of the report: the numbers are invented."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from tests.report_examples import around, made_up_result, many_lines, share
from tolerance.process.draws import LotSize
from tolerance.results import (
    GuardBand,
    LevelDriver,
    LineResult,
    LotAcceptance,
    Lots,
    NestedYield,
    OperatingPoint,
    ReadingRisks,
    RunResult,
    VarianceShares,
)
from tolerance.statistics.acceptance import SamplingPlan
from tolerance.statistics.reading import Reading


def made_up_nested(lots: int = 512, coupons: int = 40) -> NestedYield:
    """Lots of which most have no or few failing coupons."""
    failing = np.zeros(coupons + 1, dtype=np.int64)
    shares = 0.55 * 0.45 ** np.arange(min(coupons, 12))
    failing[:shares.size] = np.round(lots * shares)
    return NestedYield(share(0.9213, 0.004), share(0.551, 0.02), failing,
                       ((0.01, 0.80), (0.05, 0.90), (0.10, 0.925), (0.25, 0.975), (0.50, 1.0)))


def made_up_reading() -> ReadingRisks:
    """A reading that costs a little."""
    bands = tuple(GuardBand(wanted, around(band, 0.02, low=0.0), wanted, rejects)
                  for wanted, band, rejects in ((0.01, 0.0, 0.006), (0.001, 0.38, 0.021), (0.0001, 0.81, 0.055)))
    return ReadingRisks(Reading(0.5, 0.1, 0.05), share(0.9634), share(0.9601), share(0.0028, 0.0002),
                        share(0.0064, 0.0004), bands)


def made_up_acceptance() -> LotAcceptance:
    """Eight of forty, accept on zero."""
    curve = (OperatingPoint(0.0, 0.0, 0.551, 0.0, share(0.93, 0.01), 1.0),
             OperatingPoint(0.02, 0.05, 0.34, 0.033, share(0.71, 0.02), 0.74),
             OperatingPoint(0.05, 0.10, 0.109, 0.077, share(0.44, 0.05), 0.47))
    return LotAcceptance(SamplingPlan(8, 0), LotSize(20, 2), 512, share(0.8012, 0.02), 0.7544, share(0.983, 0.002),
                         curve)


def with_lots(line: LineResult) -> LineResult:
    """The line with levels and readings."""
    drivers = tuple(LevelDriver(driver.variable, share(0.2 * driver.total.value), share(0.3 * driver.total.value),
                                share(0.5 * driver.total.value)) for driver in line.drivers)
    variance = VarianceShares(share(0.262, 0.003), share(0.281, 0.002), share(0.457, 0.003), drivers)
    return replace(line, nested=made_up_nested(), variance=variance, reading=made_up_reading())


def made_up_lots(count: int = 2, *, long_names: bool = False) -> RunResult:
    """A run with lots, readings and their acceptance by sample."""
    result = made_up_result(tuple(with_lots(line) for line in many_lines(count, long_names=long_names)))
    return replace(result, lots=Lots(512, 20, 2), nested=made_up_nested(), reading=made_up_reading(),
                   acceptance=made_up_acceptance())
