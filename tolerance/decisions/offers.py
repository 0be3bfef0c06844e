"""Offers of tighter tolerances on a board: the yield of every set, worked out line by line and never twice.

Of two offers that name the same property the tighter holds; an offer wider than what is changes nothing.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from tolerance.arrays import BoolArray, IntArray
from tolerance.decisions.board import Aim, Board, LineModel, Side
from tolerance.decisions.choosing import Front, Prefix, front_of
from tolerance.decisions.tightening import Judged, judged
from tolerance.process.other_laws import Amount, half_width_of, laws_of, narrowed, with_laws

WORK = 2**24  # coupons of lines to be predicted, at most, before the sample is thinned
FEWEST_COUPONS = 4096
MOST_STATES = 256  # combinations of grades that reach one line: with more it gives no bound


@dataclass(frozen=True, slots=True)
class OfferModel:
    """One offer: the half-width offered for each property that it names, and its cost."""

    name: str
    tolerances: Mapping[str, Amount]
    cost: float


Grades = tuple[tuple[str, int], ...]  # which offer holds for a property, where one does; sorted


@dataclass(slots=True)
class OfferYields:
    """Yields of sets of offers on one board, kept once they are known."""

    board: Board
    offers: tuple[OfferModel, ...]
    aim: Aim
    _passes: list[dict[Grades, IntArray]] = field(default_factory=list)
    _shares: list[dict[Grades, float]] = field(default_factory=list)
    _best: list[dict[tuple[bool, ...], float]] = field(default_factory=list)
    _relevant: list[tuple[int, ...]] = field(default_factory=list)

    def __post_init__(self) -> None:
        for _ in self.board.lines:
            self._passes.append({})
            self._shares.append({})
            self._best.append({})
        self._relevant = [relevant(line, self.offers) for line in self.board.lines]

    def value(self, chosen: Prefix) -> float:
        """The yield aimed at of a whole set."""
        packed = [self._line(number, chosen) for number in range(len(self.board.lines))]
        lines = [self._shares[number][grades] for number, (grades, _) in enumerate(packed)]
        if self.aim == "each line":
            return min(lines)
        together = np.bitwise_and.reduce([passes for _, passes in packed])
        return _ones(together) / self.board.coupons

    def bound(self, prefix: Prefix) -> float:
        """No set that begins so reaches more: the best that its worst line can come to."""
        best = 1.0
        for number, offers in enumerate(self._relevant):
            if 2 ** len(offers) <= MOST_STATES:
                best = min(best, self._best_of_line(number, tuple(prefix[o] for o in offers if o < len(prefix))))
        return best

    def _best_of_line(self, number: int, decided: Prefix) -> float:
        known = self._best[number]
        if decided not in known:
            offers = self._relevant[number]
            if len(decided) == len(offers):
                chosen = [False] * len(self.offers)
                for offer, taken in zip(offers, decided, strict=True):
                    chosen[offer] = taken
                grades, _ = self._line(number, tuple(chosen))
                known[decided] = self._shares[number][grades]
            else:
                known[decided] = max(self._best_of_line(number, (*decided, taken)) for taken in (False, True))
        return known[decided]

    def _line(self, number: int, chosen: Prefix) -> tuple[Grades, IntArray]:
        """The grades that hold for a line, and its coupons that pass, a bit each."""
        line = self.board.lines[number]
        grades = grades_of(line, self.offers, [o for o in self._relevant[number] if chosen[o]])
        if grades not in self._passes[number]:
            passes = sides_with(self.board, line, self.offers, grades)[0]
            self._passes[number][grades] = _packed(passes)
            self._shares[number][grades] = float(np.mean(passes))
        return grades, self._passes[number][grades]


def front_of_offers(board: Board, offers: tuple[OfferModel, ...], *, aim: Aim) -> Front:
    """The whole front of cost and yield; on the coupons of `board`, see `board_for_offers`."""
    yields = OfferYields(board, offers, aim)
    return front_of([offer.cost for offer in offers], yields.value, yields.bound)


def board_for_offers(board: Board, offers: Sequence[OfferModel]) -> Board:
    """The board with so many coupons that all sets can be judged in a few seconds."""
    states = sum(min(2 ** len(relevant(line, offers)), MOST_STATES) for line in board.lines)
    wanted = board.coupons
    while wanted > FEWEST_COUPONS and states * wanted > WORK:
        wanted //= 2
    return board if wanted >= board.coupons else board.thinned(wanted)


def judged_set(board: Board, offers: Sequence[OfferModel], chosen: Sequence[int]) -> tuple[Judged, list[Side]]:
    """Yields, with their intervals, of one set of offers by number; and the verdicts."""
    sides = [sides_with(board, line, offers, grades_of(line, offers, chosen)) for line in board.lines]
    return judged(board, sides), sides


def relevant(line: LineModel, offers: Sequence[OfferModel]) -> tuple[int, ...]:
    """Numbers of the offers that change anything on a line."""
    return tuple(number for number in range(len(offers)) if grades_of(line, offers, [number]))


def grades_of(line: LineModel, offers: Sequence[OfferModel], chosen: Sequence[int]) -> Grades:
    """Which of the chosen offers holds for each property that reaches the line."""
    grades = []
    for name, law in laws_of(line.process).items():
        own, best = half_width_of(law), None
        for number in chosen:
            offered = offers[number].tolerances.get(name)
            if offered is not None and offered.of(_reference(line, name)) < own * (1.0 - 1e-12):
                own, best = offered.of(_reference(line, name)), number
        if best is not None:
            grades.append((name, best))
    return tuple(sorted(grades))


def sides_with(board: Board, line: LineModel, offers: Sequence[OfferModel], grades: Grades) -> Side:
    """Verdicts on a line with these grades held."""
    laws = laws_of(line.process)
    process = with_laws(line.process, {
        name: narrowed(laws[name], offers[number].tolerances[name].of(_reference(line, name)))
        for name, number in grades})
    return board.sides(line, process)


def _reference(line: LineModel, name: str) -> float:
    """What a percentage of a property is of [SI]: its nominal, for an etch the width of the line."""
    nominal = laws_of(line.process)[name].nominal
    return line.width if name.rpartition(".")[2] == "etch" else nominal


def _packed(passes: BoolArray) -> IntArray:
    """A bit a coupon, in whole words of 64."""
    packed = np.packbits(passes)
    return np.pad(packed, (0, -len(packed) % 8)).view(np.int64)


def _ones(packed: IntArray) -> int:
    return int(np.sum(np.bitwise_count(packed.view(np.uint64))))
