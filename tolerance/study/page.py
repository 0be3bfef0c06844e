"""`page`: a run made movable. Every line is fitted once more, over all that the page's sliders reach."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from tolerance.cores import Progress, on_all_cores, plain_algebra, silent
from tolerance.paged import (
    MeasuredTable,
    Page,
    PagedLine,
    PagedOffer,
    PagedProperty,
    PagedResin,
    PagedVariation,
)
from tolerance.process.draws import ETCH, Process, process_of
from tolerance.process.laws import DEFAULT_SIGMAS, Law
from tolerance.process.other_laws import laws_of
from tolerance.process.resin import Resin
from tolerance.results import RunResult
from tolerance.scenario.properties import MEASURE, members
from tolerance.scenario.tables import Line, Scenario, Variation
from tolerance.scenario.writing import kept_keys, scenario_pieces
from tolerance.solver.plan import SolverSettings
from tolerance.study.decide import offer_models, tolerance_words
from tolerance.study.lines import prepare
from tolerance.study.lots import draw
from tolerance.study.page_draws import paged_draws
from tolerance.study.page_fit import fit_wide, paged_line
from tolerance.study.solved import SolvedCache

STREAM = 6_000_006  # of chance, apart from those of the run
ONE_HALF = 0.5  # resin content of which a mixture's resin is told


@plain_algebra
def page(
    scenario: Scenario, result: RunResult, *, on_progress: Progress | None = None, cache: SolvedCache | None = None,
) -> Page:
    """What a page needs beside the run's own result: fits over a wider range, and the run's own draws.

    cache : as for `run`.
    Raises UnfinishedError where a line cannot be predicted.
    """
    process = process_of(scenario)
    draws = draw(scenario, process, coupons=result.coupons, chance=_process_chance(result.seed))
    properties = _properties(scenario, process)
    settings = SolverSettings()

    def fit(task: tuple[Line, np.random.Generator]) -> PagedLine:
        prepared = prepare(scenario, task[0], settings, cache)
        return paged_line(prepared, fit_wide(prepared, process, chance=task[1]), properties, process)

    chance = np.random.default_rng(np.random.SeedSequence(result.seed, spawn_key=(STREAM,)))
    tasks = list(zip(scenario.lines, chance.spawn(len(scenario.lines)), strict=True))
    lines = on_all_cores(fit, tasks, "solving for the page", on_progress or silent)
    return Page(
        result=result, lengths=scenario.report.lengths,
        pieces=scenario_pieces(scenario, seed=result.seed, coupons=result.coupons),
        properties=properties, variations=tuple(_variation(scenario, process, each) for each in scenario.variations),
        resins=tuple(_resin(process, properties, resin) for resin in process.resins.values()),
        lines=tuple(lines), own_limits=tuple(line.limit is not None for line in scenario.lines),
        drawn=tuple((line.width, line.gap, line.ground_gap) for line in scenario.lines),
        draws=paged_draws(draws, _process_chance(result.seed)), offers=_offers(scenario, properties),
    )


def _process_chance(seed: int) -> np.random.Generator:
    """The stream from which `run` draws the process."""
    return np.random.default_rng(seed).spawn(1)[0]


def _properties(scenario: Scenario, process: Process) -> tuple[PagedProperty, ...]:
    entry = {each.name: number for number, variation in enumerate(scenario.variations)
             for each in members(scenario, variation)}
    return tuple(
        PagedProperty(member.name, column, entry[member.name], member.nominal, member.property == ETCH, _table(law))
        for column, variable in enumerate(process.variables) for member, law in variable.members)


def _table(law: Law) -> MeasuredTable | None:
    known = law.measured
    if known is None:
        return None
    return MeasuredTable(known.germs, known.values, known.method == "lognormal", known.mean, known.deviation)


def _variation(scenario: Scenario, process: Process, variation: Variation) -> PagedVariation:
    laws = laws_of(process)
    own = [(each, laws[each.name]) for each in members(scenario, variation)]
    relative, reach = _shift_reach(scenario, variation, own[0][1])
    peaks = {law.centre(reference=law.nominal) for _, law in own}
    anchor = peaks.pop() if len(peaks) == 1 and variation.low is not None and variation.shape != "uniform" else None
    return PagedVariation(
        variation.of, variation.together, variation.shape, variation.tolerance, variation.shift, variation.sigmas,
        variation.cpk, variation.low, variation.high, MEASURE[own[0][0].property], relative, reach, anchor,
        kept_keys(scenario, variation))


def _shift_reach(scenario: Scenario, variation: Variation, law: Law) -> tuple[bool, float]:
    """Whether the mean is moved by shares of the nominal, and how far: as far as the tolerance goes."""
    if variation.low is not None and variation.high is not None:
        return False, 0.5 * (variation.high - variation.low)
    named = members(scenario, variation)
    widths = [line.width for line in scenario.lines]
    nominals = [min(widths) if each.property == ETCH else abs(each.nominal) for each in named]
    if law.measured is not None:
        relative = variation.shift is not None and variation.shift.relative
        return relative, DEFAULT_SIGMAS * law.measured.deviation / (min(nominals) if relative else 1.0)
    assert variation.tolerance is not None
    tolerance = variation.tolerance
    relative = tolerance.relative if variation.shift is None else variation.shift.relative
    if relative == tolerance.relative:
        return relative, tolerance.value
    return relative, tolerance.value / min(nominals) if relative else tolerance.value * min(nominals)


def _resin(process: Process, properties: Sequence[PagedProperty], resin: Resin) -> PagedResin:
    number = {each.name: position for position, each in enumerate(properties)}

    def source(name: str) -> tuple[int | None, float]:
        return number.get(name), process.nominals[name]

    ply, layer = resin.mixture.ply, resin.mixture.layer
    half, none = np.array([ONE_HALF]), np.zeros(1)
    filled = tuple((share, (source(f"{copper}.foil"), source(f"{copper}.plating")))
                   for copper, share in resin.mixture.etched)
    return PagedResin(source(f"{layer}.resin_content"), filled, ply.glass_thickness(),
                      float(ply.resin_thickness(resin_content=half, filled=none)[0]), ply.resin_dk, ply.glass_dk,
                      resin.thickness, resin.dk)


def _offers(scenario: Scenario, properties: Sequence[PagedProperty]) -> tuple[PagedOffer, ...]:
    number: Mapping[str, int] = {each.name: position for position, each in enumerate(properties)}
    return tuple(
        PagedOffer(f"{model.name} {tolerance_words(scenario, offer)}", model.cost,
                   {number[name]: amount for name, amount in model.tolerances.items()})
        for model, offer in zip(offer_models(scenario), scenario.offers, strict=True))
