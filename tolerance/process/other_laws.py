"""A process with other laws: tolerances scaled, narrowed to what is offered, centres moved. Germs stay what they were.

One sample of germs then serves every such process (common random numbers): what differs is the change alone.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import replace

import numpy as np

from tolerance.arrays import read_only
from tolerance.process.draws import ETCH, Process, Variable
from tolerance.process.laws import DEFAULT_SIGMAS, Law
from tolerance.scenario.amounts import Amount as Amount
from tolerance.scenario.properties import Property


def laws_of(process: Process) -> dict[str, Law]:
    """The law of every property that varies, by property name."""
    return {member.name: law for variable in process.variables for member, law in variable.members}


def with_laws(process: Process, laws: Mapping[str, Law]) -> Process:
    """The process with these laws, by property name, in place of its own; what is named must vary already."""
    if not laws:
        return process
    variables = tuple(
        replace(variable, members=tuple((member, laws.get(member.name, law)) for member, law in variable.members))
        for variable in process.variables)
    nominals = {**process.nominals, **{name: law.nominal for name, law in laws.items() if name in process.nominals}}
    return replace(process, variables=variables, nominals=nominals)


def with_variable(process: Process, each: Property) -> Process:
    """The process with one more variable in the last column: a property that stands still, so that it can be moved."""
    still = Law("normal", each.nominal, tolerance=Amount(0.0, relative=False))
    correlation = np.eye(len(process.variables) + 1)
    correlation[:-1, :-1] = process.correlation
    return replace(process, variables=(*process.variables, Variable(each.name, ((each, still),))),
                   correlation=read_only(correlation))


def seen_by_line(process: Process, names: Collection[str], *, width: float) -> Process:
    """The process as one line sees it: only the properties in `names`, and etch percentages of its own width [m].

    Variables keep their columns; one that does not reach the line has no members left.
    """
    variables = tuple(
        replace(variable, members=tuple(
            (member, in_absolute_terms(law, reference=width) if member.property == ETCH else law)
            for member, law in variable.members if member.name in names))
        for variable in process.variables)
    return replace(process, variables=variables)


def in_absolute_terms(law: Law, *, reference: float) -> Law:
    """The law with its percentages of `reference` [SI] turned into absolute amounts."""
    tolerance, shift = (None if amount is None else Amount(amount.of(reference), relative=False)
                        for amount in (law.tolerance, law.shift))
    return replace(law, tolerance=tolerance, shift=shift)


def half_width_of(law: Law) -> float:
    """Half-width [SI] of a law whose percentages are of its nominal; of a measured one three deviations."""
    if law.measured is not None:
        return DEFAULT_SIGMAS * law.measured.deviation
    return law.half_width(reference=law.nominal)


def scaled(law: Law, factor: float) -> Law:
    """The law with its half-width times `factor`, 0 or more; its spread goes with it, also where it is held with cpk.

    The peak stays where it is; of a uniform law the middle does.
    """
    if law.measured is not None:
        return replace(law, measured=law.measured.spread_by(factor))
    if law.low is not None and law.high is not None:
        anchor = _anchor(law)
        return replace(law, low=anchor - factor * (anchor - law.low), high=anchor + factor * (law.high - anchor))
    if law.tolerance is None:
        return law
    tolerance = Amount(law.tolerance.value * factor, law.tolerance.relative)
    if law.cpk is None:
        return replace(law, tolerance=tolerance)
    sigmas = half_width_of(law) / law.deviation(reference=law.nominal)
    return replace(law, tolerance=tolerance, cpk=None, sigmas=sigmas)


def narrowed(law: Law, half_width: float) -> Law:
    """The law with the half-width [SI] that is offered, where that is less than its own; else the law.

    Sigmas and cpk stay in force: a half-width that is held with cpk covers the shift as well.
    Raises InputError, when values are asked for, where cpk then leaves no room for the shift.
    """
    own = half_width_of(law)
    if half_width >= own:
        return law
    if law.measured is not None or (law.low is not None and law.high is not None):
        return scaled(law, half_width / own)
    return replace(law, tolerance=Amount(half_width, relative=False))


def moved(law: Law, by: float, *, nominal: bool) -> Law:
    """The law with its centre and ends moved `by` [SI], and its `nominal` with them where that is said.

    Where the nominal moves, a relative tolerance is of the new one; else (an etch that stands for the drawn width)
    amounts are to be absolute.
    """
    if law.low is not None and law.high is not None:
        law = replace(law, low=law.low + by, high=law.high + by)
    if nominal and law.measured is None:
        return replace(law, nominal=law.nominal + by)
    shift = by + (0.0 if law.shift is None else law.shift.of(law.nominal))
    if law.cpk is not None:  # what the move adds is no shift of the process
        law = replace(law, cpk=None, sigmas=half_width_of(law) / law.deviation(reference=law.nominal))
    return replace(law, shift=Amount(shift, relative=False))


def _anchor(law: Law) -> float:
    """The point that stays when a law between two ends is scaled [SI]."""
    low, high = law.low or 0.0, law.high or 0.0
    middle, peak = 0.5 * (low + high), law.centre(reference=law.nominal)
    return peak if law.shape != "uniform" and low <= peak <= high else middle
