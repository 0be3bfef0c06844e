"""Which sets of priced offers are worth having: the whole front of cost and yield, exactly.

Branch and bound over the sets: a set is left out only where a set that costs no more is proven to reach at least what
any completion of it can. Yield need not rise with every offer, and the bound does not rely on it.
Source of the method: A. H. Land and A. G. Doig, "An automatic method of solving discrete programming problems",
Econometrica, volume 28, pages 497-520, 1960.
"""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Callable, Sequence
from dataclasses import dataclass

Prefix = tuple[bool, ...]


@dataclass(frozen=True, slots=True)
class Chosen:
    """A set of offers, by number, with its cost and what it reaches."""

    offers: tuple[int, ...]
    cost: float
    value: float


@dataclass(frozen=True, slots=True)
class Front:
    """Sets that no cheaper or equally dear set reaches, by rising cost; how many sets there are and were looked at."""

    sets: tuple[Chosen, ...]
    possible: int
    evaluated: int

    def cheapest(self, target: float) -> Chosen | None:
        """The cheapest set that reaches the target; of equally cheap ones the one that reaches most."""
        return next((each for each in self.sets if each.value >= target), None)


def front_of(
    costs: Sequence[float], value: Callable[[Prefix], float], bound: Callable[[Prefix], float],
) -> Front:
    """The front of all sets of offers.

    costs : of each offer, 0 or more.  value : what a whole set reaches.  bound : no completion of decisions on the
    first offers reaches more than this. Of sets equal in both the one with the fewest offers stands.
    """
    search = _Search(tuple(costs), value, bound)
    search.decide((), 0.0)
    return Front(tuple(search.front), 2 ** len(costs), search.evaluated)


class _Search:
    def __init__(
        self, costs: tuple[float, ...], value: Callable[[Prefix], float], bound: Callable[[Prefix], float],
    ) -> None:
        self.costs, self.value, self.bound = costs, value, bound
        self.front: list[Chosen] = []
        self.evaluated = 0

    def decide(self, prefix: Prefix, cost: float) -> None:
        """Look at every set that begins with the decisions `prefix`."""
        size = sum(prefix)
        if self.front and self._beaten(cost, size, self.bound(prefix)):
            return
        if len(prefix) < len(self.costs):
            self.decide((*prefix, False), cost)
            self.decide((*prefix, True), cost + self.costs[len(prefix)])
            return
        self.evaluated += 1
        reached = self.value(prefix)
        if not self._beaten(cost, size, reached):
            self._put(Chosen(tuple(number for number, taken in enumerate(prefix) if taken), cost, reached))

    def _beaten(self, cost: float, size: int, value: float) -> bool:
        """Whether a set on the front costs no more and reaches as much, and where equal in both has no more offers."""
        place = bisect_right(self.front, cost, key=lambda each: each.cost) - 1
        if place < 0 or self.front[place].value < value:
            return False
        best = self.front[place]
        return best.cost < cost or best.value > value or len(best.offers) <= size

    def _put(self, new: Chosen) -> None:
        self.front = [each for each in self.front if each.cost < new.cost or each.value > new.value]
        self.front.append(new)
        self.front.sort(key=lambda each: each.cost)
