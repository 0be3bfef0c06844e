"""A linear response of normal variables with lots and panels, all of whose yields are integrals in one dimension.

Z = 50 ohm + 2 ohm x (what the lot, the panel and the coupon each have, normal), so that coupons are independent given
lot and panel, and P(all n coupons of a panel pass) = E[P(pass | lot, panel)^n]; the integrals are scipy's and numpy's
Gauss-Hermite rule (general libraries), the formula exact.
"""

from __future__ import annotations

import numpy as np
from scipy import stats

from tests.process_examples import variable
from tolerance.arrays import FloatArray, read_only
from tolerance.process.draws import LotSize, Process, Variable
from tolerance.scenario.amounts import LevelShares
from tolerance.statistics.drivers import Model
from tolerance.statistics.yields import Limits

SIZE = LotSize(panels=5, coupons_per_panel=3)
SCALE = 2.0
WEIGHTS = np.array([0.8, 0.5, np.sqrt(0.11)])  # squares add up to 1
LEVELS = (LevelShares(lot=0.5, panel=0.2, coupon=0.3), LevelShares(lot=0.2, panel=0.3, coupon=0.5),
          LevelShares(lot=1.0))
NODES, NODE_WEIGHTS = (np.asarray(each) for each in np.polynomial.hermite_e.hermegauss(120))
NODE_WEIGHTS = NODE_WEIGHTS / NODE_WEIGHTS.sum()


def level_parts() -> FloatArray:
    """Variances of lot, panel and coupon (3,), of 1 in all: squared weights times shares, by hand."""
    return np.asarray(WEIGHTS**2 @ np.array([(each.lot, each.panel, each.coupon) for each in LEVELS]))


def nested_process(correlation: float = 0.0) -> Process:
    """Three normal variables with these shares; the first two correlated where asked for, then of equal shares."""
    levels = (LEVELS[0], LEVELS[0] if correlation else LEVELS[1], LEVELS[2])
    variables = tuple(
        Variable(each.name, each.members, shares) for each, shares in zip(
            (variable("P1.thickness", 1.0, tolerance=0.3), variable("P1.dk", 1.0, tolerance=0.3),
             variable("L1.foil", 1.0, tolerance=0.3)), levels, strict=True))
    matrix = np.eye(3)
    matrix[0, 1] = matrix[1, 0] = correlation
    nominals = {member.name: member.nominal for each in variables for member, _ in each.members}
    return Process(variables, nominals, read_only(matrix))


def response(germ: FloatArray) -> FloatArray:
    """Impedances [ohm] (coupons,) of germs (coupons, 3)."""
    return np.asarray(50.0 + SCALE * (germ @ WEIGHTS), dtype=np.float64)


def linear_model(process: Process) -> Model:
    """The same as a model of the three germs."""
    names = tuple(each.name for each in process.variables)
    return Model(names, lambda _position, germ: germ, response, process.correlation)


def exact_yields(limit: Limits, size: LotSize = SIZE) -> tuple[float, float, float]:
    """Shares of coupons, of panels all of whose coupons pass, and of lots."""
    lot, panel, coupon = SCALE * np.sqrt(level_parts())
    shared = 50.0 + lot * NODES[:, None] + panel * NODES[None, :]
    passes = stats.norm.cdf((limit.high - shared) / coupon) - stats.norm.cdf((limit.low - shared) / coupon)
    panels = passes**size.coupons_per_panel @ NODE_WEIGHTS  # given the lot
    return (float(NODE_WEIGHTS @ passes @ NODE_WEIGHTS), float(NODE_WEIGHTS @ panels),
            float(NODE_WEIGHTS @ panels**size.panels))
