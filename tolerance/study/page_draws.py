"""The draws of a run in the shape in which a page carries them: as the rule that makes them, or as they are."""

from __future__ import annotations

import numpy as np

from tolerance.arrays import FloatArray, IntArray, read_only
from tolerance.paged import PagedDraws, SobolDraws
from tolerance.process.draws import SOBOL_BITS, ProcessDraws, correlated_groups, sobol_uniforms

MOST_COUPONS = 65536  # that a page computes with
MOST_STORED = 900_000  # germs that a page carries as they are


def paged_draws(draws: ProcessDraws, chance: np.random.Generator) -> PagedDraws:
    """The first coupons of each replicate of a run's draws; `chance` in the state that they were drawn from."""
    own = draws.coupons // draws.replicates
    variables = len(draws.process.variables)
    if draws.lots is None:
        block = min(own, MOST_COUPONS // draws.replicates)
        return PagedDraws(draws.replicates, block, variables, _roots(draws.process.correlation),
                          _sobol(draws, block, chance), None)
    block = min(own, MOST_STORED // (draws.replicates * max(variables, 1)))
    rows = (np.arange(draws.replicates)[:, np.newaxis] * own + np.arange(block)).ravel()
    return PagedDraws(draws.replicates, block, variables, (), None, read_only(draws.germ[rows]))


def _roots(correlation: FloatArray) -> tuple[tuple[tuple[int, ...], FloatArray], ...]:
    return tuple((tuple(group), read_only(np.linalg.cholesky(correlation[np.ix_(group, group)])))
                 for group in correlated_groups(correlation))


def _sobol(draws: ProcessDraws, block: int, chance: np.random.Generator) -> SobolDraws:
    """The shift and the direction numbers of each replicate, out of its own points.

    The points come in the order of Gray's code: point 2^k differs from the one before by direction number k.
    """
    variables = len(draws.process.variables)
    bits = max(block - 1, 1).bit_length()
    shifts = np.zeros((draws.replicates, variables), dtype=np.int64)
    directions = np.zeros((draws.replicates, variables, bits), dtype=np.int64)
    own = draws.coupons // draws.replicates
    for replicate, generator in enumerate(chance.spawn(draws.replicates)):
        points = _whole(sobol_uniforms(variables, own, generator))
        shifts[replicate] = points[0]
        for bit in range(min(bits, own.bit_length() - 1)):
            directions[replicate, :, bit] = points[1 << bit] ^ points[(1 << bit) - 1]
    return SobolDraws(shifts, directions, SOBOL_BITS)


def _whole(uniforms: FloatArray) -> IntArray:
    return np.asarray(np.floor(uniforms * 2.0**SOBOL_BITS), dtype=np.int64)
