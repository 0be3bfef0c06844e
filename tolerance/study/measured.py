"""Measured data in a run: what was taken from each table, and the doubt that few readings leave in the intervals."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence

import numpy as np

from tolerance.arrays import BoolArray, FloatArray
from tolerance.process.draws import Process, ProcessDraws
from tolerance.process.laws import Law
from tolerance.process.measured import MeasuredLaw
from tolerance.results import MeasuredInput
from tolerance.scenario.properties import MEASURE, Property
from tolerance.scenario.tables import Scenario
from tolerance.statistics.sampling import Figures, figures
from tolerance.statistics.yields import Limits

RESAMPLES = 400  # laws that other readings would have given
COUPONS = 4096  # of the sample that are judged again under each


#: of one line: draws -> which sections can exist, and the impedance [ohm] predicted, both (coupons,)
Predict = Callable[[ProcessDraws], tuple[BoolArray, FloatArray]]


def measured_inputs(scenario: Scenario, process: Process) -> tuple[MeasuredInput, ...]:
    """What was taken from measured data, in the order of the variables."""
    return tuple(_input(scenario, member, law.measured) for member, law in _members(process)
                 if law.measured is not None)


def has_measured(process: Process) -> bool:
    """Whether any law is taken from readings."""
    return any(law.measured is not None for _, law in _members(process))


def judged_again(
    lines: Sequence[Predict], limits: Sequence[Limits], draws: ProcessDraws, chance: np.random.Generator | None,
) -> Figures:
    """Figures of the first coupons under laws that other readings would have given; without chance, under their own."""
    germ = np.array(draws.germ[:COUPONS], order="F")
    if chance is not None:
        _resample(draws.process, germ, chance)
    again = [predict(ProcessDraws(draws.process, germ)) for predict in lines]
    return figures([impedance for _, impedance in again], [possible for possible, _ in again], limits)


def _resample(process: Process, germ: FloatArray, chance: np.random.Generator) -> None:
    """Turn germs (coupons, variables), in place, into those of other laws; the same readings give the same law."""
    seeds: dict[bytes, int] = {}
    for column, variable in enumerate(process.variables):
        measured = variable.members[0][1].measured
        if measured is not None:
            seed = seeds.setdefault(measured.knots.tobytes(), int(chance.integers(2**62)))
            germ[:, column] = measured.resampled(germ[:, column], np.random.default_rng(seed))


def _members(process: Process) -> Iterator[tuple[Property, Law]]:
    return (pair for variable in process.variables for pair in variable.members)


def _input(scenario: Scenario, member: Property, law: MeasuredLaw) -> MeasuredInput:
    readings = scenario.readings_of(member.name)
    return MeasuredInput(
        of=member.name, file=readings.file, sheet=readings.sheet, column=readings.column, readings=law.count,
        method=law.method, mean=law.mean, deviation=law.deviation, lowest=min(readings.values),
        highest=max(readings.values), measure=MEASURE[member.property], p_normal=law.p_normal,
        p_lognormal=law.p_lognormal,
    )
