"""`check`: the nominal impedance of every line. Imports nothing heavy, so that it answers at once."""

from __future__ import annotations

from tolerance.formulas.second_opinion import second_opinions, why_none
from tolerance.nominal import CheckResult, FormulaOpinion, FormulaOpinions, NominalLine
from tolerance.scenario.tables import Scenario
from tolerance.sections.section import Section
from tolerance.solver.line import solve_modes
from tolerance.solver.plan import SolverSettings
from tolerance.study.lines import EVEN, ODD, PreparedLine, prepare


def check(scenario: Scenario, *, formulas: bool = False) -> CheckResult:
    """Solve every line of a checked scenario at its nominals; `formulas` sets published formulas beside them."""
    settings = SolverSettings()
    prepared = [prepare(scenario, line, settings) for line in scenario.lines]
    return CheckResult(scenario.title, tuple(_check_line(one, formulas=formulas) for one in prepared))


def _check_line(prepared: PreparedLine, *, formulas: bool) -> NominalLine:
    line, pair = prepared.line, prepared.line.is_pair
    modes = solve_modes(prepared.nominal, prepared.plan, modes=(EVEN, ODD) if pair else (EVEN,))
    shown = modes[ODD if prepared.mode == "differential" else EVEN]
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
    )


def _opinions(prepared: PreparedLine) -> FormulaOpinions:
    """What formulas say of the impedance that is shown: twice the odd mode's or half the even mode's for pairs."""
    if not isinstance(prepared.nominal, Section):
        return FormulaOpinions((), "traces on two layers")
    mode = ODD if prepared.mode == "differential" else EVEN
    factor = {"single": 1.0, "differential": 2.0, "common": 0.5}[prepared.mode]
    opinions = tuple(
        FormulaOpinion(one.formula.name, one.formula.source, None if one.impedance is None else factor * one.impedance,
                       one.accuracy_claimed, one.remark)
        for one in second_opinions(prepared.nominal, mode)
    )
    return FormulaOpinions(opinions, why_none(prepared.nominal))
