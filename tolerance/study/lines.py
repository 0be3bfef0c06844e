"""One line made ready to be solved: surroundings, nominal section, solver plan, and what its impedance is."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.process.values import NominalValues, ProcessValues, nominals_of
from tolerance.scenario.tables import Line, Scenario
from tolerance.sections.as_built import as_built
from tolerance.sections.section import Section
from tolerance.sections.surroundings import Surroundings, surroundings_of
from tolerance.solver.line import ModeSolution, solve_modes
from tolerance.solver.plan import Plan, SolverSettings, plan_for

EVEN, ODD = 1, -1


@dataclass(frozen=True, slots=True)
class PreparedLine:
    """A line with all that its solutions share."""

    line: Line
    surroundings: Surroundings
    nominal: Section
    plan: Plan
    low_limit: float
    high_limit: float

    @property
    def mode(self) -> str:
        """single, or for pairs what target and impedance mean."""
        return self.line.mode if self.line.is_pair else "single"

    @property
    def kind(self) -> str:
        """The line in words."""
        around = self.surroundings
        if around.foot_plane and around.crest_plane:
            word = "stripline"
        elif around.mask is not None:
            word = "mask-coated microstrip"
        elif around.crest_side:
            word = "embedded microstrip"
        else:
            word = "bare microstrip"
        return f"{word} pair" if self.line.is_pair else word

    def section(self, values: ProcessValues) -> Section:
        """As-built sections of the line for process values."""
        return as_built(self.line, self.surroundings, values)

    def impedance(self, section: Section) -> FloatArray:
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
    surroundings = surroundings_of(scenario, line)
    nominal = as_built(line, surroundings, NominalValues(nominals_of(scenario)))
    half = line.target * scenario.limit_of(line)
    return PreparedLine(line, surroundings, nominal, plan_for(nominal, settings),
                        low_limit=line.target - half, high_limit=line.target + half)


def nominal_impedance(prepared: PreparedLine) -> float:
    """Solved impedance [ohm] of the nominal section."""
    return float(np.asarray(prepared.impedance(prepared.nominal))[0])
