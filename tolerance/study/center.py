"""The order of the steps of `center`: fit over moves too, find the best places, judge, and weigh the ways."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from scipy.optimize import brentq

from tolerance.arrays import FloatArray
from tolerance.cores import Progress, on_all_cores, plain_algebra, silent
from tolerance.decided import Basis, CenterResult, CentredLine, GapWidth, MovedDimension, Way
from tolerance.decisions.board import Board, LineModel, Side
from tolerance.decisions.centring import (
    centre_of,
    chance_when_centred,
    log_failing_at,
    mean_chance,
    on_grid,
    path_of_moves,
)
from tolerance.decisions.interpolation import SMALLEST_IMPEDANCE, Path
from tolerance.decisions.tightening import Judged, base_sides, judged
from tolerance.errors import InputError, UnfinishedError
from tolerance.process.other_laws import laws_of, moved, with_laws
from tolerance.scenario.tables import Line, Scenario
from tolerance.solver.plan import SolverSettings
from tolerance.study.boards import FittedBoard, chosen_seed, fit_wide_board
from tolerance.study.decide import basis_of, offer_models, weigh_offers
from tolerance.study.lines import nominal_impedance, prepare
from tolerance.study.solved import SolvedCache

REACH = 0.15  # of what is moved, both ways
CENTRING_ERROR = 0.01  # of the target, one deviation of what is left of a lot's offset: common practice, no source
MOST_OF_GAP = 0.5  # that a wider trace may take
WIDTH_RANGE = 0.5, 2.0  # of the drawn width, where the width for another gap is looked for


@dataclass(frozen=True, slots=True)
class Wishes:
    """What is asked of `center`. move : LAYER.thickness instead of the widths.  gaps [m] : for pairs."""

    grid: float | None = None
    move: str | None = None
    reach: float = REACH
    centring_error: float = CENTRING_ERROR
    gaps: tuple[float, ...] = ()
    together: bool = False


@dataclass(frozen=True, slots=True)
class _Placed:
    """A line at its best place: by how much it is moved, its path, and its centre."""

    by: float
    on_target: float | None
    at_end: bool
    path: Path | None


@plain_algebra
def center(
    scenario: Scenario, wishes: Wishes | None = None, *, coupons: int | None = None, seed: int | None = None,
    on_progress: Progress | None = None, cache: SolvedCache | None = None,
) -> CenterResult:
    """Where to centre each line, or one thickness for all, and what that is worth beside tightening.

    Raises InputError where `move` names no thickness of a dielectric layer, and for numbers out of range.
    """
    wishes = wishes or Wishes()
    tell = on_progress or silent
    names, reach = _moves(scenario, wishes)
    own = chosen_seed(scenario, seed)
    fitted = fit_wide_board(scenario, coupons=coupons, seed=own, tell=tell, names=names, reach=reach,
                            cache=cache)
    board, basis = fitted.board, basis_of(scenario, fitted, seed=own, together=wishes.together)

    def follow(task: tuple[LineModel, Line, Sequence[str], float]) -> Path | None:
        model, line, moving, far = task
        if not set(moving) & set(laws_of(model.process)):
            return None
        return path_of_moves(model, board.germ, moving, low=-far, high=_highest(line, far, wishes),
                             nominal=wishes.move is not None)

    paths = on_all_cores(follow, list(zip(board.lines, scenario.lines, names, reach, strict=True)), "moving", tell)
    placed = _place(scenario, paths, wishes)
    base = base_sides(board)
    sides = [side if one.path is None else one.path.sides(one.by) for side, one in zip(base, placed, strict=True)]
    lines, chances = [], np.ones(board.coupons)
    for number, line in enumerate(scenario.lines):
        chance = _to_impedance(board, board.lines[number], wishes)
        chances *= chance
        lines.append(_centred_line(board, line, placed[number], (base[number], sides[number]), chance, wishes))
    asker = _Asker(coupons, own, tell, cache)
    lines = _with_gaps(scenario, lines, wishes, asker)
    basis = replace(basis, solver_runs=basis.solver_runs + asker.solver_runs,
                    from_cache=basis.from_cache + asker.from_cache)
    now, centred = judged(board, base), judged(board, sides)
    return CenterResult(
        basis, now, centred, mean_chance(chances, board.replicates), wishes.centring_error, wishes.reach, wishes.grid,
        tuple(lines), _moved_dimension(scenario, placed, wishes),
        _ways(scenario, fitted, basis, placed, (now, centred), names, wishes),
    )


def _moves(scenario: Scenario, wishes: Wishes) -> tuple[list[tuple[str, ...]], list[float]]:
    """For each line what moves, and how far [m]."""
    if wishes.move is None:
        names = [tuple(f"{layer}.etch" for layer in (line.layer, line.partner) if layer) for line in scenario.lines]
        return names, [wishes.reach * line.width for line in scenario.lines]
    layer, _, item = wishes.move.rpartition(".")
    known = {each.name: each for each in scenario.layers if each.kind in ("prepreg", "core")}
    if item != "thickness" or layer not in known or known[layer].thickness is None:
        allowed = ", ".join(f'"{name}.thickness"' for name, each in known.items() if each.thickness is not None)
        raise InputError(f'--move "{wishes.move}": must be one of {allowed}')
    far = wishes.reach * (known[layer].thickness or 0.0)
    return [(wishes.move,)] * len(scenario.lines), [far] * len(scenario.lines)


def _highest(line: Line, far: float, wishes: Wishes) -> float:
    """How much wider a line may get [m]; in a pair the gap pays for it."""
    spaces = [] if wishes.move else [space for space in (line.gap, line.ground_gap) if space is not None]
    return min([far, *(MOST_OF_GAP * space for space in spaces)])


def _place(scenario: Scenario, paths: Sequence[Path | None], wishes: Wishes) -> list[_Placed]:
    if wishes.move is None:
        return [_placed([path], line.width, wishes.grid) if path else _Placed(0.0, None, False, None)
                for path, line in zip(paths, scenario.lines, strict=True)]
    reached = [path for path in paths if path is not None]
    if not reached:
        raise InputError(f'--move "{wishes.move}": no line depends on it')
    shared = _placed(reached, _nominal(scenario, wishes.move), wishes.grid)
    return [replace(shared, path=path) if path else _Placed(0.0, None, False, None) for path in paths]


def _placed(paths: list[Path], start: float, grid: float | None) -> _Placed:
    centre = centre_of(paths)
    by = on_grid(centre.best, start, grid, log_failing_at(paths))
    low, high = float(paths[0].places[0]), float(paths[0].places[-1])
    return _Placed(min(max(by, low), high), centre.on_target, centre.at_end, paths[0])


def _centred_line(
    board: Board, line: Line, placed: _Placed, sides: tuple[Side, Side], chance: FloatArray, wishes: Wishes,
) -> CentredLine:
    now, then = sides
    widths = placed.path is not None and wishes.move is None
    target = placed.on_target if widths else None
    return CentredLine(
        name=line.name, layer=line.layer, width=line.width, gap=line.gap,
        best=line.width + (placed.by if widths else 0.0),
        on_target=None if target is None else line.width + target, at_end=placed.at_end, now=board.share(now),
        at_best=board.share(then),
        at_on_target=None if target is None or placed.path is None else board.share(placed.path.sides(target)),
        gain=board.difference(then, now), to_impedance=mean_chance(chance, board.replicates),
    )


def _to_impedance(board: Board, line: LineModel, wishes: Wishes) -> FloatArray:
    """Chance (coupons,) of a line when each lot is brought to its target."""
    impedance, possible = line.answers(line.process, board.germ)
    return chance_when_centred(np.maximum(impedance, SMALLEST_IMPEDANCE), possible, line, error=wishes.centring_error,
                             lot_coupons=None if board.cluster == 1 else board.cluster)


@dataclass(slots=True)
class _Asker:
    """Fits pairs that are drawn with other gaps, and counts the solver runs that this takes."""

    coupons: int | None
    seed: int
    tell: Progress
    cache: SolvedCache | None
    solver_runs: int = 0
    from_cache: int = 0

    def widths(self, scenario: Scenario, gap: float) -> dict[str, GapWidth]:
        """By name of the pairs of a scenario: drawn with this gap, the width that goes with it, and the yield."""
        pairs = tuple(self._drawn(scenario, line, gap) for line in scenario.lines if line.gap is not None)
        still: list[tuple[str, ...]] = [()] * len(pairs)
        fitted = fit_wide_board(scenario.model_copy(update={"lines": pairs}), coupons=self.coupons, seed=self.seed,
                                tell=self.tell, names=still, reach=[0.0] * len(pairs), cache=self.cache)
        self.solver_runs += fitted.solver_runs
        self.from_cache += fitted.from_cache
        board = fitted.board
        return {line.name: GapWidth(gap, line.width, board.share(board.sides(model, model.process)))
                for line, model in zip(pairs, board.lines, strict=True)}

    def _drawn(self, scenario: Scenario, line: Line, gap: float) -> Line:
        """The pair with this gap and the width that brings its nominal impedance to the target."""
        def off(width: float) -> float:
            drawn = line.model_copy(update={"width": float(width), "gap": gap})
            prepared = prepare(scenario, drawn, SolverSettings(), self.cache)
            impedance = nominal_impedance(prepared)
            self.solver_runs += 1
            self.from_cache += prepared.from_cache
            return impedance - line.target

        low, high = (factor * line.width for factor in WIDTH_RANGE)
        if off(low) * off(high) > 0.0:
            raise UnfinishedError(f'"{line.name}": no width from {low * 1e6:.0f} to {high * 1e6:.0f} um has the '
                                  f"target impedance with a gap of {gap * 1e6:.0f} um")
        return line.model_copy(update={"width": float(brentq(off, low, high, xtol=1e-8)), "gap": gap})


def _with_gaps(
    scenario: Scenario, lines: list[CentredLine], wishes: Wishes, asker: _Asker,
) -> list[CentredLine]:
    """For pairs, each asked gap with its width and yield."""
    if all(line.gap is None for line in scenario.lines):
        return lines
    for gap in wishes.gaps:
        found = asker.widths(scenario, gap)
        lines = [replace(one, gaps=(*one.gaps, found[one.name])) if one.name in found else one for one in lines]
    return lines


def _moved_dimension(scenario: Scenario, placed: Sequence[_Placed], wishes: Wishes) -> MovedDimension | None:
    if wishes.move is None:
        return None
    one = next(each for each in placed if each.path is not None)
    nominal = _nominal(scenario, wishes.move)
    return MovedDimension(wishes.move, nominal, nominal + one.by, one.at_end)


def _ways(
    scenario: Scenario, fitted: FittedBoard, basis: Basis, placed: Sequence[_Placed],
    yields: tuple[Judged, Judged], names: Sequence[Sequence[str]], wishes: Wishes,
) -> tuple[Way, ...]:
    """What reaches the target: nothing, centring alone, the offers alone, both."""
    now, centred = yields
    ways = [Way("as it is", now, basis.reaches(now), 0.0), Way("center", centred, basis.reaches(centred), 0.0)]
    offers = offer_models(scenario)
    if not offers:
        return tuple(ways)
    lines = []
    for model, one, moving in zip(fitted.board.lines, placed, names, strict=True):
        laws = {name: moved(law, one.by, nominal=wishes.move is not None)
                for name, law in laws_of(model.process).items() if name in moving}
        lines.append(replace(model, process=with_laws(model.process, laws)))
    for name, board in (("tighten", fitted.board), ("both", replace(fitted.board, lines=tuple(lines)))):
        weighed = weigh_offers(board, scenario, offers, basis)
        best = weighed.cheapest
        ways.append(Way(name, None, False, None) if best is None else
                    Way(name, best.yields, True, best.cost, weighed.names(best)))
    return tuple(ways)


def _nominal(scenario: Scenario, name: str) -> float:
    return float(scenario.layer(name.rpartition(".")[0]).thickness or 0.0)


