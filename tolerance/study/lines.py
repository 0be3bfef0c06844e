"""One line made ready to be solved: surroundings, nominal section, solver plan, and what its impedance is."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.process.values import NominalValues, ProcessValues, nominals_of
from tolerance.scenario.tables import Line, Scenario
from tolerance.sections.as_built import as_built
from tolerance.sections.surroundings import (
    BroadsideSurroundings,
    Surroundings,
    broadside_surroundings_of,
    surroundings_of,
)
from tolerance.solver.line import AnyPlan, AnySection, ModeSolution, plan_line, solve_modes
from tolerance.solver.plan import SolverSettings

EVEN, ODD = 1, -1


@dataclass(frozen=True, slots=True)
class PreparedLine:
    """A line with all that its solutions share."""

    line: Line
    surroundings: Surroundings | BroadsideSurroundings
    nominal: AnySection
    plan: AnyPlan
    low_limit: float
    high_limit: float

    @property
    def mode(self) -> str:
        """single, or for pairs what target and impedance mean."""
        return self.line.mode if self.line.is_pair else "single"

    @property
    def kind(self) -> str:
        """The line in words."""
        around, coplanar = self.surroundings, self.line.ground_gap is not None
        words = []
        if isinstance(around, BroadsideSurroundings):
            words.append("broadside")
        elif around.foot_plane and around.crest_plane:
            words += ["coplanar stripline" if coplanar else "stripline"]
        else:
            cover = "mask-coated" if around.mask is not None else "embedded" if around.crest_side else "bare"
            words += [cover, "coplanar" if coplanar else "microstrip"]
        if self.line.is_pair:
            words.append("pair")
        elif words[-1] == "coplanar":
            words.append("line")
        return " ".join(words) + (", common mode" if self.mode == "common" else "")

    def section(self, values: ProcessValues) -> AnySection:
        """As-built sections of the line for process values."""
        return as_built(self.line, self.surroundings, values)

    def impedance(self, section: AnySection) -> FloatArray:
        """Solved impedance [ohm] of possible sections: of the line, or of the pair in its mode; shape (sections,)."""
        mode = ODD if self.mode == "differential" else EVEN
        return self.impedance_of(solve_modes(section, self.plan, modes=(mode,)))

    def impedance_of(self, modes: dict[int, ModeSolution]) -> FloatArray:
        """Differential impedance is twice the odd mode's, common half the even mode's."""
        if self.mode == "single":
            return modes[EVEN].impedance
        return 2.0 * modes[ODD].impedance if self.mode == "differential" else 0.5 * modes[EVEN].impedance


def prepare(scenario: Scenario, line: Line, settings: SolverSettings) -> PreparedLine:
    """Make `line` of a checked scenario ready."""
    around = surroundings_of if line.partner is None else broadside_surroundings_of
    surroundings = around(scenario, line)
    nominal = as_built(line, surroundings, NominalValues(nominals_of(scenario)))
    half = line.target * scenario.limit_of(line)
    return PreparedLine(line, surroundings, nominal, plan_line(nominal, settings),
                        low_limit=line.target - half, high_limit=line.target + half)


def nominal_impedance(prepared: PreparedLine) -> float:
    """Solved impedance [ohm] of the nominal section."""
    return float(np.asarray(prepared.impedance(prepared.nominal))[0])
