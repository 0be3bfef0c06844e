"""Sets of offers: the front of cost and yield against every set looked at, and what offers do to a board."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable

import numpy as np
import pytest
from scipy.special import ndtr

from tests.decision_examples import board_of, lognormals, product_line
from tolerance.arrays import FloatArray
from tolerance.decisions.board import Aim
from tolerance.decisions.choosing import Front, Prefix, front_of
from tolerance.decisions.offers import OfferModel, board_for_offers, front_of_offers, judged_set
from tolerance.scenario.amounts import Amount

PROBLEMS = 200


def brute_force(costs: list[float], value: Callable[[Prefix], float]) -> list[tuple[float, float]]:
    """Costs and values of the sets that nothing beats, by rising cost."""
    points = sorted((math.fsum(cost for cost, taken in zip(costs, chosen, strict=True) if taken), -value(chosen))
                     for chosen in itertools.product((False, True), repeat=len(costs)))
    front: list[tuple[float, float]] = []
    for cost, negative in points:
        if not front or -negative > front[-1][1]:
            front.append((cost, -negative))
    return front


def as_points(front: Front) -> FloatArray:
    return np.array([(one.cost, one.value) for one in front.sets])


def random_problem(number: int) -> tuple[list[float], Callable[[Prefix], float], Callable[[Prefix], float]]:
    """Costs with ties, values that need not rise with an offer, and the tightest bound there is."""
    chance = np.random.default_rng(number)
    count = int(chance.integers(1, 8))
    costs = [float(cost) for cost in chance.integers(0, 5, size=count)]
    effects = chance.normal(0.05, 0.1, size=count)
    pairs = chance.normal(0.0, 0.05, size=(count, count))

    def value(chosen: Prefix) -> float:
        taken = np.array(chosen, dtype=float)
        return float(np.round(0.5 + effects @ taken + taken @ pairs @ taken, 2))

    def bound(prefix: Prefix) -> float:
        left = count - len(prefix)
        return max(value((*prefix, *rest)) for rest in itertools.product((False, True), repeat=left))

    return costs, value, bound


@pytest.mark.parametrize("tight", [True, False])
def test_the_front_equals_brute_force_on_200_random_problems(tight: bool) -> None:
    for number in range(PROBLEMS):
        costs, value, bound = random_problem(number)
        front = front_of(costs, value, bound if tight else lambda _prefix: math.inf)
        expected = brute_force(costs, value)
        assert as_points(front) == pytest.approx(np.array(expected)), number
        for target in np.random.default_rng(number).uniform(0.3, 1.2, size=5):
            cheapest = front.cheapest(target)
            fitting = [cost for cost, reached in expected if reached >= target]
            assert (None if cheapest is None else cheapest.cost) == (fitting[0] if fitting else None), number


def test_bounds_spare_most_of_the_sets() -> None:
    costs = [1.0] * 12

    def value(chosen: Prefix) -> float:
        return 0.9 + 0.001 * chosen[0] + 0.0001 * chosen[1]

    def bound(prefix: Prefix) -> float:
        return value((*prefix, *[True] * (len(costs) - len(prefix))))

    front = front_of(costs, value, bound)
    assert front.possible == 4096
    assert front.evaluated < 100
    assert [one.offers for one in front.sets] == [(), (0,), (0, 1)]


def offer(name: str, tolerance: float, cost: float) -> OfferModel:
    return OfferModel(name, {f"{name}.dk": Amount(tolerance, relative=True)}, cost)


def exact_yield(tolerances: dict[str, float], powers: dict[str, float], *, off: float) -> float:
    deviation = math.hypot(*(power * math.log1p(tolerances[name]) / 3.0 for name, power in powers.items()))
    return float(ndtr((math.log(1.1) - math.log(off)) / deviation) - ndtr((math.log(0.9) - math.log(off)) / deviation))


LINES = ({"P1": 0.9, "P2": 0.5}, {"P2": 0.7, "P3": 0.8})
OFFS = (1.02, 0.98)
OFFERS = (offer("P1", 0.10, 1.0), offer("P1", 0.06, 3.0), offer("P2", 0.08, 2.0), offer("P3", 0.07, 2.5),
          offer("P3", 0.30, 0.5))  # the last is wider than what is


def example() -> tuple[dict[str, float], tuple[OfferModel, ...]]:
    return {"P1": 0.15, "P2": 0.15, "P3": 0.15}, OFFERS


def exact_of_set(chosen: tuple[int, ...]) -> list[float]:
    """Yield of each line with these offers: of two on one property the tighter holds."""
    tolerances, offers = example()
    held = dict(tolerances)
    for number in chosen:
        name = offers[number].name
        held[name] = min(held[name], offers[number].tolerances[f"{name}.dk"].value)
    return [exact_yield(held, powers, off=off) for powers, off in zip(LINES, OFFS, strict=True)]


def test_every_set_on_a_board_has_the_yields_of_the_closed_form() -> None:
    tolerances, offers = example()
    known = lognormals(**tolerances)
    board = board_of(known, *(product_line(known, powers, name=str(number), off=off) for number, (powers, off) in
                              enumerate(zip(LINES, OFFS, strict=True))))
    for count in range(len(offers) + 1):
        for chosen in itertools.combinations(range(len(offers)), count):
            judged, _ = judged_set(board, offers, chosen)
            for value, exact in zip(judged.lines, exact_of_set(chosen), strict=True):
                assert abs(value.value - exact) < 3.5 * math.sqrt(exact * (1.0 - exact) / board.coupons)


@pytest.mark.parametrize("aim", ["each line", "together"])
def test_the_front_of_a_board_equals_brute_force(aim: Aim) -> None:
    tolerances, offers = example()
    known = lognormals(**tolerances)
    board = board_of(known, *(product_line(known, powers, name=str(number), off=off) for number, (powers, off) in
                              enumerate(zip(LINES, OFFS, strict=True))), coupons=4096)

    def value(chosen: Prefix) -> float:
        judged, _ = judged_set(board, offers, [number for number, taken in enumerate(chosen) if taken])
        return judged.aimed(aim)

    front = front_of_offers(board, offers, aim=aim)
    assert as_points(front) == pytest.approx(np.array(brute_force([each.cost for each in offers], value)))
    assert all(4 not in one.offers for one in front.sets), "an offer wider than what is buys nothing"


def test_many_offers_thin_the_sample_and_keep_its_replicates() -> None:
    known = lognormals(**{f"P{number}": 0.1 for number in range(10)})
    line = product_line(known, {f"P{number}": 0.3 for number in range(10)})
    offers = [offer(f"P{number}", 0.05, 1.0) for number in range(10)]
    board = board_of(known, line, line)
    thin = board_for_offers(board, offers)
    assert 4096 <= thin.coupons < board.coupons
    assert np.array_equal(thin.germ[: thin.coupons // 8], board.germ[: thin.coupons // 8])
