"""Lots, panels and coupons: yields of whole panels and lots, and how much of the variance each level carries.

The shares follow from pairs of responses that have some of the levels' normals in common: with the coupon's drawn anew,
half the mean squared difference is what coupons carry; with the panel's and the coupon's drawn anew, what both carry;
with all drawn anew, the variance. So lot = Var(E[Z | lot draws]) / Var(Z), the three add up to 1, and a level that
nothing varies at has exactly nought.
Source: M. J. W. Jansen, "Analysis of variance designs for model output", Computer Physics Communications, volume 117,
pages 35-43, 1999.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tolerance.arrays import BoolArray, FloatArray, IntArray
from tolerance.process.draws import LotSize, correlate, correlated_groups, sobol_normals
from tolerance.statistics.drivers import REPLICATES, Model, sobol_indices
from tolerance.statistics.estimates import Interval, interval_of
from tolerance.statistics.yields import Limits, passes, share_interval

POINTS = 4096  # of each replicate, for the shares of the levels: errors below 0.002 on a product of ten variables
DRIVER_POINTS = 1024  # of each replicate, for the variables within the levels
LOT_QUANTILES = (0.01, 0.05, 0.10, 0.25, 0.50)  # of the lots, the worst first
LEVELS = ("lot", "panel", "coupon")


@dataclass(frozen=True, slots=True)
class NestedYield:
    """What coupons come to as panels and lots: the shares of panels, and of lots, all coupons of which pass.

    failing : (coupons of a lot + 1,) number of lots with 0, 1, 2, ... failing coupons.
    quantiles : ((share of lots, yield), ...): so large a share of the lots has this yield or a lower one.
    """

    panel: Interval
    lot: Interval
    failing: IntArray
    quantiles: tuple[tuple[float, float], ...]


@dataclass(frozen=True, slots=True)
class NestedYields:
    """Every line, and the coupon as a whole."""

    size: LotSize
    lots: int
    lines: tuple[NestedYield, ...]
    every: NestedYield


@dataclass(frozen=True, slots=True)
class LevelDriver:
    """What one variable does at each level to a line's impedance: total effects, shares of the variance."""

    variable: str
    lot: Interval
    panel: Interval
    coupon: Interval


@dataclass(frozen=True, slots=True)
class VarianceShares:
    """Shares of one line's variance by level; they add up to 1, or are all 0 where nothing varies.

    drivers : in the order of the model; none where variables are correlated, for then a variable has no share its own.
    """

    lot: Interval
    panel: Interval
    coupon: Interval
    drivers: tuple[LevelDriver, ...]


def judge_lots(
    impedance: FloatArray, possible: BoolArray, limits: tuple[Limits, ...], size: LotSize, *,
    replicates: int, verdict_error: FloatArray | None = None,
) -> NestedYields:
    """Yields of panels and lots from impedance [ohm] and possible (lines, coupons), drawn as whole lots.

    verdict_error : (lines,) [ohm], as in `yields.judge`.
    """
    errors = np.zeros(len(limits)) if verdict_error is None else verdict_error
    margins = np.stack([np.zeros_like(errors), -errors, errors])  # as predicted, surely, perhaps
    verdicts = np.stack([
        [passes(values, exists, limit, margin=float(margin)) for margin in of_line]
        for values, exists, limit, of_line in zip(impedance, possible, limits, margins.T, strict=True)])
    return NestedYields(
        size, impedance.shape[1] // size.coupons,
        tuple(_nested(of_line, size, replicates) for of_line in verdicts),
        _nested(np.all(verdicts, axis=0), size, replicates),
    )


def _nested(verdicts: BoolArray, size: LotSize, replicates: int) -> NestedYield:
    """From verdicts (as predicted, surely and perhaps; coupons)."""
    panels = np.all(verdicts.reshape(3, -1, size.coupons_per_panel), axis=2)
    lots = np.all(panels.reshape(3, -1, size.panels), axis=2)
    failing = np.count_nonzero(~verdicts[0].reshape(-1, size.coupons), axis=1)
    shares = 1.0 - failing / size.coupons
    return NestedYield(
        panel=share_interval(panels[0], replicates=replicates, surely=panels[1], perhaps=panels[2],
                             cluster=size.panels),
        lot=share_interval(lots[0], replicates=replicates, surely=lots[1], perhaps=lots[2]),
        failing=np.bincount(failing, minlength=size.coupons + 1).astype(np.int64),
        quantiles=tuple((share, float(np.quantile(shares, share, method="inverted_cdf"))) for share in LOT_QUANTILES),
    )


def variance_shares(
    model: Model, shares: FloatArray, *, chance: np.random.Generator, points: int = POINTS,
    replicates: int = REPLICATES,
) -> VarianceShares:
    """Shares of the variance by level, and of each variable within the levels.

    shares : (lot, panel and coupon; dimensions of the model), of the variance of each germ.
    """
    level_chance, driver_chance = chance.spawn(2)
    parts = np.zeros((replicates, 3))
    for replicate, generator in enumerate(level_chance.spawn(replicates)):
        parts[replicate] = _parts(model, shares, points, generator)
    lot, panel, coupon = (interval_of(part).within(0.0, 1.0) for part in parts.T)
    return VarianceShares(lot, panel, coupon, _level_drivers(model, shares, driver_chance))


def _parts(model: Model, shares: FloatArray, points: int, chance: np.random.Generator) -> FloatArray:
    """Shares of lot, panel and coupon (3,) from one scramble."""
    level, _ = np.nonzero(shares)
    normals = sobol_normals(2 * level.size, points, chance)
    kept, fresh = normals[:, : level.size], normals[:, level.size :]
    base = _response(model, shares, kept)
    carried = []  # by the coupon; by panel and coupon; by all
    for lowest in (2, 1, 0):
        mate = _response(model, shares, np.where(level >= lowest, fresh, kept))
        carried.append(0.5 * float(np.mean((base - mate) ** 2)))
    if carried[2] <= (1e-12 * float(np.mean(base))) ** 2:
        return np.zeros(3)
    return np.array([carried[2] - carried[1], carried[1] - carried[0], carried[0]]) / carried[2]


def _response(model: Model, shares: FloatArray, normals: FloatArray) -> FloatArray:
    """Responses (points,) at independent normals (points, levels of dimensions with a share, lots' first)."""
    germ = np.zeros((len(normals), model.dimensions), order="F")
    for column, (level, dimension) in enumerate(zip(*np.nonzero(shares), strict=True)):
        germ[:, dimension] += np.sqrt(shares[level, dimension]) * normals[:, column]
    correlate(germ, model.correlation)
    return model.response(model.coordinates(germ))


def _level_drivers(model: Model, shares: FloatArray, chance: np.random.Generator) -> tuple[LevelDriver, ...]:
    """Total effects of each variable at each level, its normals at the levels taken for variables of their own."""
    if not model.names or correlated_groups(model.correlation):
        return ()
    places = list(zip(*np.nonzero(shares), strict=True))
    widened = Model(
        names=tuple(f"{model.names[dimension]}, {LEVELS[level]}" for level, dimension in places),
        coordinate=lambda _position, germ: germ,
        response=lambda normals: _response(model, shares, normals),
        correlation=np.eye(len(places)),
    )
    total = sobol_indices(widened, chance=chance, points=DRIVER_POINTS).total
    found = {place: interval_of(total[:, column]) for column, place in enumerate(places)}
    none = Interval(0.0, 0.0, 0.0)
    return tuple(
        LevelDriver(name, *(found.get((level, dimension), none) for level in range(3)))
        for dimension, name in enumerate(model.names)
    )
