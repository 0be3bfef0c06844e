"""The order of the steps of `tighten`, `promise` and `compare`; `center` has a module of its own."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from types import MappingProxyType

import numpy as np

from tolerance.cores import Progress, on_all_cores, plain_algebra, silent
from tolerance.decided import (
    Basis,
    Compared,
    CompareResult,
    JudgedOffer,
    Offers,
    OfferSet,
    Promise,
    PromiseResult,
    TightenResult,
    in_order,
)
from tolerance.decisions.board import Aim, Board, Side, every
from tolerance.decisions.comparing import Difference, on_common_columns
from tolerance.decisions.offers import OfferModel, board_for_offers, front_of_offers, judged_set
from tolerance.decisions.tightening import Tightening, alone, base_of, base_sides, judged, tightening
from tolerance.errors import InputError
from tolerance.process.draws import Process, process_of
from tolerance.scenario.properties import matching, members, properties
from tolerance.scenario.tables import Offer, Scenario
from tolerance.statistics.against_limit import limit_grid, yields_by_limit
from tolerance.statistics.estimates import Driver
from tolerance.statistics.ranking import model_of, rank_drivers
from tolerance.study.boards import FittedBoard, chosen_seed, fit_board
from tolerance.study.solved import SolvedCache
from tolerance.surrogate.prediction import Predictor
from tolerance.units import write_quantity

MOST_OFFERS = 20


@plain_algebra
def tighten(
    scenario: Scenario, *, coupons: int | None = None, seed: int | None = None, together: bool = False,
    on_progress: Progress | None = None, cache: SolvedCache | None = None,
) -> TightenResult:
    """What each variation's tolerance is worth, and what the offers come to.

    together : the yield of all lines together must reach the target; else that of each line.
    coupons, seed, on_progress, cache : as for `run`, whose fits and draws these are.
    """
    tell = on_progress or silent
    offers = offer_models(scenario)
    fitted = fit_board(scenario, coupons=coupons, seed=(own := chosen_seed(scenario, seed)), tell=tell, cache=cache)
    board, basis = fitted.board, basis_of(scenario, fitted, seed=own, together=together)
    base, logarithms = base_of(board)

    def follow(of: tuple[str, frozenset[str]]) -> Tightening:
        return tightening(alone(board, base, of[1], logarithms), of[0], aim=basis.aim, target_yield=basis.target_yield)

    named = [(", ".join(variation.of), frozenset(each.name for each in members(scenario, variation)))
             for variation in scenario.variations]
    variations = on_all_cores(follow, named, "changing tolerances", tell)
    tell("weighing offers", 0, 1)
    weighed = weigh_offers(board, scenario, offers, basis) if offers else None
    return TightenResult(basis, judged(board, base), in_order(variations), weighed)


@plain_algebra
def promise(
    scenario: Scenario, *, coupons: int | None = None, seed: int | None = None, on_progress: Progress | None = None,
    cache: SolvedCache | None = None,
) -> PromiseResult:
    """The tightest limit that meets the target yield, for each line and for all held to one limit."""
    fitted = fit_board(scenario, coupons=coupons, seed=(own := chosen_seed(scenario, seed)),
                       tell=on_progress or silent, cache=cache)
    assert fitted.sample is not None
    widest = max(scenario.limit_of(line) for line in scenario.lines)
    curves, together = yields_by_limit(fitted.sample, limit_grid(widest), target_yield=scenario.evaluation.target_yield)
    lines = tuple(Promise(line.name, line.target, scenario.limit_of(line), curve)
                  for line, curve in zip(scenario.lines, curves, strict=True))
    return PromiseResult(basis_of(scenario, fitted, seed=own), lines, Promise("", None, None, together))


@plain_algebra
def compare(
    scenarios: Sequence[Scenario], *, coupons: int | None = None, seed: int | None = None, together: bool = False,
    on_progress: Progress | None = None, cache: SolvedCache | None = None,
) -> CompareResult:
    """Scenarios side by side on the same draws; differences are against the first.

    Raises InputError where there are fewer than two.
    """
    if len(scenarios) < 2:
        raise InputError("compare takes two scenarios or more")
    tell = on_progress or silent
    first = scenarios[0]
    own = chosen_seed(first, seed)
    coupons = first.evaluation.coupons if coupons is None else coupons
    processes = on_common_columns([process_of(scenario) for scenario in scenarios])
    found: list[tuple[FittedBoard, tuple[Side, ...]]] = []
    for scenario, process in zip(scenarios, processes, strict=True):
        fitted = fit_board(scenario, coupons=coupons, seed=own, tell=tell, process=process, cache=cache)
        found.append((fitted, base_sides(fitted.board)))
    aim: Aim = "together" if together else "each line"
    compared = tuple(
        _compared(scenario, fitted, sides, None if number == 0 else found[0], aim=aim, seed=own, tell=tell)
        for number, (scenario, (fitted, sides)) in enumerate(zip(scenarios, found, strict=True)))
    return CompareResult(own, coupons, aim, compared, sum(fitted.solver_runs for fitted, _ in found),
                         sum(fitted.from_cache for fitted, _ in found))


def basis_of(scenario: Scenario, fitted: FittedBoard, *, seed: int, together: bool = False) -> Basis:
    """What the decision rests on."""
    return Basis(scenario.title, seed, fitted.board.coupons, scenario.evaluation.target_yield,
                 "together" if together else "each line", tuple(line.name for line in scenario.lines),
                 fitted.solver_runs, fitted.from_cache)


def offer_models(scenario: Scenario) -> tuple[OfferModel, ...]:
    """The scenario's offers. Raises InputError where there are more than can be weighed."""
    if len(scenario.offers) > MOST_OFFERS:
        raise InputError(f"[[offers]]: {len(scenario.offers)} are given; at most {MOST_OFFERS} are weighed together")
    known = properties(scenario)
    return tuple(
        OfferModel(", ".join(offer.of), MappingProxyType(dict.fromkeys(
            (each.name for each in matching(offer.of, known)), offer.tolerance)), offer.cost)
        for offer in scenario.offers)


def weigh_offers(board: Board, scenario: Scenario, offers: tuple[OfferModel, ...], basis: Basis) -> Offers:
    """Every offer alone, and the front of all sets."""
    thin = board_for_offers(board, offers)
    base = every(base_sides(thin), thin.coupons)
    front = front_of_offers(thin, offers, aim=basis.aim)
    sets = tuple(OfferSet(one.offers, one.cost, judged_set(thin, offers, one.offers)[0]) for one in front.sets)
    cheapest = front.cheapest(basis.target_yield)
    alone_ones = []
    for number, (model, offer) in enumerate(zip(offers, scenario.offers, strict=True)):
        yields, sides = judged_set(thin, offers, [number])
        gain = thin.difference(every(sides, thin.coupons), base)
        alone_ones.append(JudgedOffer(model.name, tolerance_words(scenario, offer), model.cost, yields, gain))
    found = None if cheapest is None else next(one for one in sets if one.offers == cheapest.offers)
    return Offers(tuple(alone_ones), sets, found, thin.coupons, front.possible, front.evaluated)


def tolerance_words(scenario: Scenario, offer: Offer) -> str:
    """The half-width offered, as one writes it."""
    amount = offer.tolerance
    if amount.relative:
        return write_quantity(amount.value, "share")
    items = {each.property for each in matching(offer.of, properties(scenario))}
    lengths = not items & {"dk", "df", "etch_factor", "resin_content"}
    return write_quantity(amount.value, "length", scenario.report.lengths) if lengths else f"{amount.value:g}"


def _compared(
    scenario: Scenario, fitted: FittedBoard, sides: tuple[Side, ...],
    first: tuple[FittedBoard, tuple[Side, ...]] | None, *, aim: Aim, seed: int, tell: Progress,
) -> Compared:
    board = fitted.board
    basis = replace(basis_of(scenario, fitted, seed=seed), aim=aim)
    offers = offer_models(scenario)
    weighed = weigh_offers(board, scenario, offers, basis) if offers else None
    cheapest = None if weighed is None else weighed.cheapest
    return Compared(
        file=scenario.source, title=scenario.title, target_yield=basis.target_yield, line_names=basis.line_names,
        yields=judged(board, sides), drivers=_drivers(fitted, seed, tell),
        difference=None if first is None else _difference(board, sides, *first),
        has_offers=bool(offers), cost=None if cheapest is None else cheapest.cost,
        cost_offers=() if weighed is None or cheapest is None else weighed.names(cheapest),
    )


def _difference(
    board: Board, sides: tuple[Side, ...], first: FittedBoard, first_sides: tuple[Side, ...],
) -> Difference:
    before = {line.name: side for line, side in zip(first.board.lines, first_sides, strict=True)}
    lines = {line.name: board.difference(side, before[line.name])
             for line, side in zip(board.lines, sides, strict=True) if line.name in before}
    together = board.difference(every(sides, board.coupons), every(first_sides, board.coupons))
    return Difference(together, MappingProxyType(lines))


def _drivers(fitted: FittedBoard, seed: int, tell: Progress) -> tuple[tuple[Driver, ...], ...]:
    process: Process = fitted.draws.process
    driver_chance = np.random.default_rng(seed).spawn(3)[2]

    def rank(task: tuple[Predictor, np.random.Generator]) -> tuple[Driver, ...]:
        return rank_drivers(model_of(task[0]), chance=task[1], with_shapley=process.is_correlated)

    tasks = list(zip(fitted.predictors, driver_chance.spawn(len(fitted.predictors)), strict=True))
    return tuple(on_all_cores(rank, tasks, "ranking drivers", tell))
