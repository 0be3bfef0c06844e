"""Draws of whole lots: what a lot, a panel and a coupon each contribute to the standard normals of the process.

The germ of a variable is sqrt(lot share) x the lot's own normal + sqrt(panel share) x the panel's + sqrt(coupon share)
x the coupon's, so that coupons of a panel, and panels of a lot, are alike to the degree that the shares say. Shares of
correlated variables are equal, so that the correlation holds at every level.

Lots are points of scrambled Sobol' sequences in the lot level's normals; panels and coupons within them are drawn at
random. Within a lot they must be independent to the last digit, or the chance that all of them pass would be wrong.
Measured on a linear response of six variables, lots of 20 panels with 2 coupons, 256 lots: against lots at random the
error of the yield halves (0.0017 instead of 0.0037) and that of the mean falls to a fifth; Sobol' sequences within
the lots as well, one for each place in a lot and shuffled (A. B. Owen, "Latin supercube sampling for very
high-dimensional simulations", ACM Transactions on Modeling and Computer Simulation, volume 8, pages 71-102, 1998),
bring the yield no further (0.0016) at ten times the work.
"""

from __future__ import annotations

import numpy as np

from tolerance.arrays import FloatArray, IntArray, read_only
from tolerance.errors import InputError
from tolerance.process.draws import REPLICATES, LotSize, Process, ProcessDraws, correlate, sobol_normals

LARGEST_SAMPLE = 2**24  # coupons, as the format has it for samples without lots
FEWEST_LOTS = 256  # of each replicate, where coupons that were not drawn as lots are put together to some


def count_lots(coupons: int, size: LotSize, *, replicates: int = REPLICATES) -> int:
    """Lots for at least so many coupons: a power of two, and one or more for each replicate.

    Raises InputError where those lots have more coupons than a sample may have.
    """
    lots = max(1 << max(-(-coupons // size.coupons) - 1, 0).bit_length(), replicates)
    if lots * size.coupons > LARGEST_SAMPLE:
        raise InputError(f"{coupons} coupons make {lots} whole lots of {size.coupons} "
                         f"(panels_per_lot x coupons_per_panel), above the {LARGEST_SAMPLE} coupons of a sample")
    return lots


def draw_lots(
    process: Process, size: LotSize, *, coupons: int, chance: np.random.Generator, replicates: int = REPLICATES
) -> ProcessDraws:
    """A sample of whole lots with at least `coupons` coupons, in independent replicates of whole lots each.

    Raises InputError as `count_lots` does.
    """
    lots = count_lots(coupons, size, replicates=replicates)
    germ = np.empty((lots * size.coupons, len(process.variables)), order="F")
    block = lots // replicates
    for replicate, generator in enumerate(chance.spawn(replicates)):
        rows = slice(replicate * block * size.coupons, (replicate + 1) * block * size.coupons)
        germ[rows] = _lots(process, size, block, generator)
    correlate(germ, process.correlation)
    return ProcessDraws(process, read_only(germ), replicates, size)


def _lots(process: Process, size: LotSize, lots: int, chance: np.random.Generator) -> FloatArray:
    """Independent germs (lots x coupons of a lot, variables) of one replicate."""
    lot_chance, panel_chance, coupon_chance = chance.spawn(3)
    shares = level_shares(process)
    germ = np.zeros((lots, size.panels, size.coupons_per_panel, len(process.variables)))
    moved = np.flatnonzero(shares[0])
    germ[..., moved] += np.sqrt(shares[0, moved]) * sobol_normals(moved.size, lots, lot_chance)[:, None, None]
    moved = np.flatnonzero(shares[1])
    normals = panel_chance.standard_normal((lots, size.panels, 1, moved.size))
    germ[..., moved] += np.sqrt(shares[1, moved]) * normals
    moved = np.flatnonzero(shares[2])
    germ[..., moved] += np.sqrt(shares[2, moved]) * coupon_chance.standard_normal((*germ.shape[:3], moved.size))
    return germ.reshape(-1, len(process.variables))


def rows_as_lots(draws: ProcessDraws, size: LotSize, chance: np.random.Generator) -> IntArray:
    """Rows of the sample as lots (lots, coupons of a lot), replicate by replicate.

    Lots that were drawn as such stay; else every lot is coupons of one replicate at random, independent of each other
    (neighbours in a Sobol' sequence are not). Raises InputError where such lots are too large.
    """
    if draws.lots is not None:
        return np.arange(draws.coupons).reshape(-1, draws.lots.coupons)
    block = draws.coupons // draws.replicates
    most = LARGEST_SAMPLE // (size.coupons * draws.replicates)
    if most == 0:
        raise InputError(f"a lot of {size.coupons} coupons (panels_per_lot x coupons_per_panel) is too large: "
                         f"{draws.replicates} of them are above the {LARGEST_SAMPLE} coupons of a sample")
    lots = max(block // size.coupons, min(FEWEST_LOTS, most))
    rows = chance.integers(0, block, size=(draws.replicates, lots, size.coupons))
    return (rows + block * np.arange(draws.replicates)[:, None, None]).reshape(-1, size.coupons)


def level_shares(process: Process) -> FloatArray:
    """Shares of the variance of each variable's germ, (lot, panel and coupon, variables)."""
    levels = [variable.levels for variable in process.variables]
    return np.array([[getattr(each, name) for each in levels] for name in ("lot", "panel", "coupon")]).reshape(3, -1)
