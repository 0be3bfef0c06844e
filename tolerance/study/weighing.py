"""What weighs on one line: its drivers, groups of them, and what would raise its yield."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.process.changes import Change, moments_of
from tolerance.process.draws import Variable
from tolerance.results import Driver, Group, Levers, Tail
from tolerance.scenario.tables import Scenario
from tolerance.statistics.dependent import group_totals
from tolerance.statistics.drivers import Model
from tolerance.statistics.estimates import interval_of
from tolerance.statistics.levers import levers_of
from tolerance.statistics.ranking import model_of, rank_drivers
from tolerance.statistics.yields import Limits
from tolerance.study.predicting import PredictedLine
from tolerance.study.rare import is_rare, tail_of

GROUP_POINTS = 1024  # of each replicate


@dataclass(frozen=True, slots=True)
class Weights:
    """All that weighs on a line. from_cache : of all its solver runs so far, those that were solved before."""

    drivers: tuple[Driver, ...]
    groups: tuple[Group, ...]
    levers: Levers | None
    tail: Tail | None
    from_cache: int = 0


def weigh(
    scenario: Scenario, line: PredictedLine, *, chance: np.random.Generator, with_shapley: bool, brief: bool = False,
) -> Weights:
    """Drivers, groups and levers of a line, and the integral over its failures where those are rare.

    brief : no groups and no levers.
    """
    driver_chance, group_chance, lever_chance, tail_chance = chance.spawn(4)
    model = model_of(line.predictor)
    drivers = rank_drivers(model, chance=driver_chance, with_shapley=with_shapley)
    if not model.names:
        return Weights(drivers, (), None, None, line.prepared.from_cache)
    seen = line.predictor.seen
    variables = [seen.process.variables[column] for column in seen.columns]
    groups = () if brief else _groups(scenario, model, variables, drivers, group_chance)
    levers = None if brief else _levers(line, lever_chance)
    tail = tail_of(line, chance=tail_chance) if is_rare(line) else None
    return Weights(drivers, groups, levers, tail, line.prepared.from_cache)


def _levers(line: PredictedLine, chance: np.random.Generator) -> Levers | None:
    """What would raise the yield; None where coupons fail because they cannot exist, which this does not see."""
    if not np.all(line.possible):
        return None
    predictor, prepared = line.predictor, line.prepared
    root = np.linalg.cholesky(predictor.correlation)

    def response(points: FloatArray, change: Change | None) -> FloatArray:
        return predictor.impedance_at(points @ root.T, change=change)

    moments = [moments_of(predictor.seen.process, column, width=prepared.line.width)
               for column in predictor.seen.columns]
    return levers_of(response, predictor.names, moments, Limits(prepared.low_limit, prepared.high_limit),
                     chance=chance)


def _groups(
    scenario: Scenario, model: Model, variables: Sequence[Variable], drivers: Sequence[Driver],
    chance: np.random.Generator,
) -> tuple[Group, ...]:
    """Variables by the layers and by the kinds of material that they move; drawn together, one counts with each."""
    found: dict[tuple[str, str], set[int]] = {}
    for layer in scenario.layers:
        moving = {place for place, variable in enumerate(variables)
                  if any(member.layer == layer.name for member, _ in variable.members)}
        if moving:
            found[layer.name, "layer"] = moving
            found.setdefault((layer.kind, "material"), set()).update(moving)
    several = sorted({tuple(sorted(places)) for places in found.values() if len(places) > 1})
    totals = group_totals(model, [list(places) for places in several], chance=chance, points=GROUP_POINTS)
    alone = {driver.variable: driver.total for driver in drivers}
    shares = {places: interval_of(totals[:, number]) for number, places in enumerate(several)}
    groups = []
    for (name, of), moving in sorted(found.items(), key=lambda entry: entry[0][1]):
        places = tuple(sorted(moving))
        names = tuple(model.names[place] for place in places)
        groups.append(Group(name, of, names, shares[places] if len(places) > 1 else alone[names[0]]))
    return tuple(groups)
