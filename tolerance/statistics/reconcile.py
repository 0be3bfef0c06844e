"""Which shifts of the process explain what was measured: the most plausible ones, and how well they are known.

A shift is a move of the germs (standard normals) of the process that all measured coupons share. Before measuring it
lies within the given distributions, germs being normal with the correlation of the process; the measurement is a smooth
function of the shift with normal errors. The most plausible shift is the mode of what is then known (maximum a
posteriori), found by Gauss-Newton steps; around it the function is taken as linear.
Source: A. Tarantola, "Inverse Problem Theory", SIAM 2005, section 3.2 (from memory); evidence by Laplace's method.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.special import gammaincc

from tolerance.arrays import FloatArray
from tolerance.errors import UnfinishedError

STEP = 0.05  # germs, for slopes
MOST_STEPS, HALVINGS = 60, 12
SETTLED = 1e-7  # germs
SMALLEST_NOISE = 1e-9  # of the largest variance of an observation: below it equations cannot be solved
EXPLAINS = 0.01  # chance of a larger misfit under which a cause does not explain the measurement
AS_GOOD = math.log(10.0)  # of the evidence: causes that lie nearer to the best cannot be told from it

Response = Callable[[FloatArray], FloatArray]  # germs (points, variables) -> observations (points, observations)


@dataclass(frozen=True, slots=True)
class Observed:
    """What was measured: values (observations,), and the covariance of their errors, both in their own units."""

    values: FloatArray
    noise: FloatArray


@dataclass(frozen=True, slots=True)
class Shifts:
    """The most plausible shift: mean (variables,) and covariance in germs; fitted (observations,): what it predicts.

    misfit : weighted sum of squares that is left, without what the shift itself costs.
    """

    mean: FloatArray
    covariance: FloatArray
    fitted: FloatArray
    misfit: float


@dataclass(frozen=True, slots=True)
class Cause:
    """One variable alone as the explanation, those correlated with it moving along.

    evidence : logarithm, against no shift at all: what the measurement says for this cause.
    """

    column: int
    germ: float
    deviation: float
    evidence: float
    misfit: float
    explains: bool


def most_plausible(response: Response, observed: Observed, prior: FloatArray) -> Shifts:
    """The shift of all variables at once; prior : covariance of the germs (variables, variables).

    Raises UnfinishedError where the steps do not settle.
    """
    weight = np.asarray(np.linalg.inv(_regular(observed.noise)), dtype=np.float64)
    stiffness = np.asarray(np.linalg.inv(prior), dtype=np.float64)
    shift = np.zeros(len(prior))
    cost = _cost(response, observed, weight, stiffness, shift)
    for _ in range(MOST_STEPS):
        slopes = _slopes(response, shift)
        misfit = observed.values - response(shift[np.newaxis])[0]
        bend = slopes.T @ weight @ slopes + stiffness
        step = np.linalg.solve(bend, slopes.T @ weight @ misfit - stiffness @ shift)
        shift, cost, moved = _downhill(response, observed, weight, stiffness, shift, step, cost)
        if moved < SETTLED:
            break
    else:
        raise UnfinishedError("the most plausible shift of the process could not be found: the search does not settle")
    fitted = response(shift[np.newaxis])[0]
    left = observed.values - fitted
    slopes = _slopes(response, shift)
    covariance = np.asarray(np.linalg.inv(slopes.T @ weight @ slopes + stiffness), dtype=np.float64)
    return Shifts(shift, covariance, fitted, float(left @ weight @ left))


def single_causes(response: Response, observed: Observed, prior: FloatArray) -> tuple[Cause, ...]:
    """Every variable alone, the most plausible cause first."""
    weight = np.linalg.inv(_regular(observed.noise))
    still = observed.values - response(np.zeros((1, len(prior))))[0]
    nothing = float(still @ weight @ still)
    causes = []
    for column in range(len(prior)):
        direction = prior[:, column] / prior[column, column]

        def along(germ: FloatArray, direction: FloatArray = direction) -> FloatArray:
            return response(germ * direction)

        alone = most_plausible(along, observed, prior[column : column + 1, column : column + 1])
        shift, variance = float(alone.mean[0]), float(alone.covariance[0, 0])
        costs = alone.misfit + shift**2 / prior[column, column] - math.log(variance / prior[column, column])
        causes.append(Cause(column, shift, math.sqrt(variance), 0.5 * (nothing - costs), alone.misfit,
                            chance_of_more(alone.misfit, len(still) - 1) >= EXPLAINS))
    return tuple(sorted(causes, key=lambda cause: -cause.evidence))


def verdict_of(causes: tuple[Cause, ...]) -> tuple[str, tuple[Cause, ...]]:
    """What can be said of the cause: "none" is needed, "one", "several" that cannot be told apart, or a "mixture"."""
    if not causes or causes[0].evidence <= 0.0:
        return "none", ()
    best = [cause for cause in causes if cause.evidence >= causes[0].evidence - AS_GOOD and cause.explains]
    if not best:
        return "mixture", ()
    return ("one" if len(best) == 1 else "several"), tuple(best)


def misfit_of(response: Response, observed: Observed, spread: FloatArray) -> float:
    """Weighted square distance of the measurement from the unshifted process, whose lots have germs with the
    covariance `spread`; chi-squared with as many degrees of freedom as observations where the lot is one of them."""
    germ = np.zeros((1, len(spread)))
    slopes = _slopes(response, germ[0])
    left = observed.values - response(germ)[0]
    return float(left @ np.linalg.solve(_regular(slopes @ spread @ slopes.T + observed.noise), left))


def chance_of_more(misfit: float, freedom: int) -> float:
    """Chance that chi-squared with `freedom` degrees is larger; 1 where there are none."""
    return float(gammaincc(0.5 * freedom, 0.5 * misfit)) if freedom > 0 else 1.0


def slopes_at_nominal(response: Response, variables: int) -> FloatArray:
    """Slopes (observations, variables) of the unshifted process, per germ."""
    return _slopes(response, np.zeros(variables))


def _slopes(response: Response, shift: FloatArray) -> FloatArray:
    step = STEP * np.eye(len(shift))
    both = response(np.concatenate([shift + step, shift - step]))
    return (both[: len(shift)] - both[len(shift) :]).T / (2.0 * STEP)


def _cost(response: Response, observed: Observed, weight: FloatArray, stiffness: FloatArray, at: FloatArray) -> float:
    left = observed.values - response(at[np.newaxis])[0]
    return float(left @ weight @ left + at @ stiffness @ at)


def _downhill(
    response: Response, observed: Observed, weight: FloatArray, stiffness: FloatArray, shift: FloatArray,
    step: FloatArray, cost: float,
) -> tuple[FloatArray, float, float]:
    """The step, halved until the cost does not rise and as long as it falls by that: (new shift, its cost, how far it
    moved). Where the response bends, as it does towards the end of a uniform law, whole steps would go to and fro."""
    best = shift, cost, 0.0
    for _ in range(HALVINGS):
        trial = shift + step
        new = _cost(response, observed, weight, stiffness, trial)
        if best[2] and new >= best[1]:
            break
        if new <= cost:
            best = trial, new, float(np.max(np.abs(step), initial=0.0))
        step = 0.5 * step
    return best


def _regular(noise: FloatArray) -> FloatArray:
    """The covariance with at least a little of its own variance on the diagonal."""
    floor = SMALLEST_NOISE * max(float(np.max(np.diag(noise), initial=0.0)), 1e-12)
    return noise + floor * np.eye(len(noise))
