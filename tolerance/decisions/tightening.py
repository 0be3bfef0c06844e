"""What a tolerance is worth: the yield were it tighter or wider, how far it must shrink alone, how far it may grow.

The half-width of everything that one variation names is scaled by one factor, its germs staying what they are.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import partial

import numpy as np

from tolerance.arrays import FloatArray, read_only
from tolerance.decisions.board import Aim, Board, Side, aimed, every, sides_of
from tolerance.decisions.interpolation import Path, logarithm_of, path_of
from tolerance.process.draws import Process
from tolerance.process.other_laws import laws_of, scaled, with_laws
from tolerance.statistics.estimates import Interval

FACTORS = (0.0, 0.5, 1.0, 2.0)  # of the half-width: where impedances are predicted anew; between, interpolated
CURVE = tuple(step / 10.0 for step in range(21))
BISECTIONS = 20  # the factor is then known to a millionth


@dataclass(frozen=True, slots=True)
class Judged:
    """Yields of a board: of each line, and of all together."""

    lines: tuple[Interval, ...]
    together: Interval

    def aimed(self, aim: Aim) -> float:
        return aimed([line.value for line in self.lines], self.together.value, aim)


@dataclass(frozen=True, slots=True)
class Tightening:
    """One variation. Yields with its half-width halved, doubled, and at nought; gains against what is, paired.

    needed : the largest factor, up to 1, at which the aim is reached; 1 where it is reached already; None: not alone.
    relaxed : the largest factor from 1 to 2 at which it is still reached; None where it is not reached as it is.
    factors (places,), together (places,), lines (lines, places) : the curve of yield against the factor.
    """

    name: str
    halved: Judged
    doubled: Judged
    perfect: Judged
    gain: Interval  # of the yield of all together, halved
    loss: Interval  # of the same, doubled
    needed: float | None
    relaxed: float | None
    factors: FloatArray
    together: FloatArray
    lines: FloatArray


@dataclass(frozen=True, slots=True)
class Alone:
    """Lines as they are, and as one variation's half-width changes. paths: of the lines that it reaches, by number."""

    board: Board
    base: tuple[Side, ...]
    paths: Mapping[int, Path]

    def sides(self, factor: float) -> list[Side]:
        """Verdicts on every line with the half-width times `factor`."""
        return [self.paths[number].sides(factor) if number in self.paths and factor != 1.0 else side
                for number, side in enumerate(self.base)]

    def yields(self, factor: float) -> tuple[list[float], float]:
        """Yield of each line and of all together."""
        passes = [self.paths[number].passes(factor) if number in self.paths and factor != 1.0 else side[0]
                  for number, side in enumerate(self.base)]
        together = np.logical_and.reduce(passes)
        return [float(np.mean(each)) for each in passes], float(np.mean(together))

    def aimed(self, factor: float, aim: Aim) -> float:
        lines, together = self.yields(factor)
        return aimed(lines, together, aim)


def base_sides(board: Board) -> tuple[Side, ...]:
    """Verdicts on every line as it is."""
    return tuple(board.sides(line, line.process) for line in board.lines)


def base_of(board: Board) -> tuple[tuple[Side, ...], tuple[FloatArray, ...]]:
    """The same, and ln of the impedance in ohm of every line as it is, (coupons,) each."""
    found = [line.answers(line.process, board.germ) for line in board.lines]
    sides = tuple(sides_of(*one, line) for one, line in zip(found, board.lines, strict=True))
    return sides, tuple(logarithm_of(impedance) for impedance, _ in found)


def judged(board: Board, sides: Sequence[Side]) -> Judged:
    """Yields with their intervals."""
    return Judged(tuple(board.share(side) for side in sides), board.share(every(sides, board.coupons)))


def alone(
    board: Board, base: tuple[Side, ...], names: frozenset[str], logarithms: Sequence[FloatArray] | None = None,
) -> Alone:
    """Follow the properties `names`, all scaled together, on the lines that they reach.

    logarithms : of every line as it is, see `base_of`, where they are at hand.
    """
    factors = np.array(FACTORS)
    paths = {}
    for number, line in enumerate(board.lines):
        if names & set(laws_of(line.process)):
            known = {} if logarithms is None else {1.0: logarithms[number]}
            paths[number] = path_of(line, board.germ, factors, partial(scaled_process, line.process, names),
                                    known=known)
    return Alone(board, base, paths)


def scaled_process(process: Process, names: frozenset[str], factor: float) -> Process:
    """The process with the half-widths of the properties `names` times `factor`."""
    return with_laws(process, {name: scaled(law, factor) for name, law in laws_of(process).items() if name in names})


def tightening(one: Alone, name: str, *, aim: Aim, target_yield: float) -> Tightening:
    """All that is asked of one variation."""
    board, now = one.board, every(one.base, one.board.coupons)
    sides = {factor: one.sides(factor) for factor in (0.0, 0.5, 2.0)}
    together = {factor: every(each, board.coupons) for factor, each in sides.items()}
    curve = [one.yields(factor) for factor in CURVE]
    reached = [aimed(lines, all_lines, aim) >= target_yield for lines, all_lines in curve]

    def reaches(factor: float) -> bool:
        return one.aimed(factor, aim) >= target_yield

    return Tightening(
        name, judged(board, sides[0.5]), judged(board, sides[2.0]), judged(board, sides[0.0]),
        gain=board.difference(together[0.5], now), loss=board.difference(together[2.0], now),
        needed=_needed(reached, reaches), relaxed=_relaxed(reached, reaches),
        factors=read_only(CURVE), together=read_only([all_lines for _, all_lines in curve]),
        lines=read_only(np.array([lines for lines, _ in curve]).T),
    )


def _needed(reached: Sequence[bool], reaches: Callable[[float], bool]) -> float | None:
    """The largest factor up to 1 that reaches the aim."""
    own = CURVE.index(1.0)
    fitting = [place for place in range(own + 1) if reached[place]]
    if not fitting:
        return None
    last = fitting[-1]
    return 1.0 if last == own else _border(CURVE[last], CURVE[last + 1], reaches)


def _relaxed(reached: Sequence[bool], reaches: Callable[[float], bool]) -> float | None:
    """The factor from 1 on up to which the aim is reached throughout; 2 where it is still."""
    own = CURVE.index(1.0)
    if not reached[own]:
        return None
    for place in range(own + 1, len(CURVE)):
        if not reached[place]:
            return _border(CURVE[place - 1], CURVE[place], reaches)
    return CURVE[-1]


def _border(good: float, bad: float, reaches: Callable[[float], bool]) -> float:
    for _ in range(BISECTIONS):
        middle = 0.5 * (good + bad)
        good, bad = (middle, bad) if reaches(middle) else (good, middle)
    return good
