"""`check`: the nominal impedance of every line. Imports nothing heavy, so that it answers at once."""

from __future__ import annotations

from tolerance.cores import plain_algebra
from tolerance.formulas.second_opinion import second_opinions, why_none
from tolerance.nominal import (
    CheckResult,
    CouplingFigures,
    FormulaOpinion,
    FormulaOpinions,
    LossFigures,
    NominalLine,
    ShareFigures,
)
from tolerance.scenario.tables import Scenario
from tolerance.sections.section import Section
from tolerance.solver.plan import SolverSettings
from tolerance.solver.shares import coupling, face_shares
from tolerance.solver.transmission import LineParameters
from tolerance.study.lines import EVEN, ODD, PreparedLine, prepare


@plain_algebra
def check(scenario: Scenario, *, formulas: bool = False) -> CheckResult:
    """Solve every line of a checked scenario at its nominals; `formulas` sets published formulas beside them."""
    settings = SolverSettings()
    prepared = [prepare(scenario, line, settings) for line in scenario.lines]
    return CheckResult(scenario.title, tuple(_check_line(one, formulas=formulas) for one in prepared))


def _check_line(prepared: PreparedLine, *, formulas: bool) -> NominalLine:
    line, pair = prepared.line, prepared.line.is_pair
    modes = prepared.solve(prepared.nominal, modes=(EVEN, ODD) if pair else (EVEN,))
    shown = modes[prepared.shown_mode]
    drawn = (("width", line.width), ("gap", line.gap), ("ground gap", line.ground_gap), ("offset", line.offset or None))
    return NominalLine(
        name=line.name, kind=prepared.kind, layer=line.layer, references=prepared.surroundings.references,
        target=line.target, impedance=float(prepared.impedance_of(modes)[0]),
        effective_dk=float(shown.effective_dk[0]), delay=float(shown.delay[0]),
        common_mode=0.5 * float(modes[EVEN].impedance[0]) if pair else None,
        even_effective_dk=float(modes[EVEN].effective_dk[0]) if pair else None,
        dimensions=tuple((name, length) for name, length in drawn if length is not None),
        formulas=_opinions(prepared) if formulas else None, mode=prepared.mode,
        partner=line.partner,
        losses=_losses(shown.scaled(prepared.mode_factor)) if isinstance(shown, LineParameters) else None,
        coupling=_coupling(prepared) if pair else None, shares=_shares(prepared), rise=prepared.rise,
    )


def _losses(line: LineParameters) -> LossFigures:
    return LossFigures(
        frequency=line.frequency, resistance=float(line.resistance[0]), inductance=float(line.inductance[0]),
        conductance=float(line.conductance[0]), capacitance=float(line.capacitance[0]),
        complex_impedance=complex(line.complex_impedance[0]), conductor_loss=float(line.conductor_loss[0]),
        dielectric_loss=float(line.dielectric_loss[0]),
    )


def _coupling(prepared: PreparedLine) -> CouplingFigures:
    found = coupling(prepared.nominal, prepared.plan)
    return CouplingFigures(float(found.inductive[0]), float(found.capacitive[0]), float(found.backward[0]))


def _shares(prepared: PreparedLine) -> ShareFigures:
    found = face_shares(prepared.nominal, prepared.plan, mode=prepared.shown_mode)
    faces = tuple((face, float(charge[0]), float(found.current[face][0])) for face, charge in found.charge.items())
    return ShareFigures(faces, None if found.fringe is None else float(found.fringe[0]))


def _opinions(prepared: PreparedLine) -> FormulaOpinions:
    """What formulas say of the impedance that is shown: twice the odd mode's or half the even mode's for pairs."""
    if not isinstance(prepared.nominal, Section):
        return FormulaOpinions((), "traces on two layers")
    opinions = tuple(
        FormulaOpinion(one.formula.name, one.formula.source,
                       None if one.impedance is None else prepared.mode_factor * one.impedance,
                       one.accuracy_claimed, one.remark)
        for one in second_opinions(prepared.nominal, prepared.shown_mode)
    )
    return FormulaOpinions(opinions, why_none(prepared.nominal))
