"""`check`: the nominal impedance of every line. Imports nothing heavy, so that it answers at once."""

from __future__ import annotations

from tolerance.nominal import CheckResult, NominalLine
from tolerance.scenario.tables import Scenario
from tolerance.solver.line import solve_modes
from tolerance.solver.plan import SolverSettings
from tolerance.study.lines import EVEN, ODD, PreparedLine, prepare


def check(scenario: Scenario) -> CheckResult:
    """Solve every line of a checked scenario at its nominals."""
    settings = SolverSettings()
    return CheckResult(scenario.title, tuple(_check_line(prepare(scenario, line, settings)) for line in scenario.lines))


def _check_line(prepared: PreparedLine) -> NominalLine:
    line, pair = prepared.line, prepared.line.is_pair
    modes = solve_modes(prepared.nominal, prepared.plan, modes=(EVEN, ODD) if pair else (EVEN,))
    shown = modes[ODD if prepared.mode == "differential" else EVEN]
    dimensions = [("width", line.width)] + ([] if line.gap is None else [("gap", line.gap)])
    return NominalLine(
        name=line.name, kind=prepared.kind, layer=line.layer, references=prepared.surroundings.references,
        target=line.target, impedance=float(prepared.impedance_of(modes)[0]),
        effective_dk=float(shown.effective_dk[0]), delay=float(shown.delay[0]),
        common_mode=0.5 * float(modes[EVEN].impedance[0]) if pair else None,
        even_effective_dk=float(modes[EVEN].effective_dk[0]) if pair else None,
        dimensions=tuple(dimensions),
    )
