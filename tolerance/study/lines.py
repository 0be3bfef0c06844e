"""One line made ready to be solved: surroundings, nominal section, solver plan, and what its impedance is."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.process.values import NominalValues, ProcessValues, nominals_of
from tolerance.scenario.properties import Property, members
from tolerance.scenario.tables import Line, Scenario, Variation
from tolerance.sections.as_built import as_built
from tolerance.sections.reading import ReadingRise, reading_rise
from tolerance.sections.section import Section
from tolerance.sections.surroundings import (
    BroadsideSurroundings,
    Surroundings,
    broadside_surroundings_of,
    surroundings_of,
)
from tolerance.solver.derivatives import parameters, solve_with_derivatives
from tolerance.solver.line import AnyPlan, AnySection, ModeSolution, plan_line, solve_modes
from tolerance.solver.lossy import cross_section, solve_lossy
from tolerance.solver.plan import Plan, SolverSettings, plan_for
from tolerance.solver.transmission import LineParameters
from tolerance.study.solved import SolvedCache, SolvedLine

EVEN, ODD = 1, -1
SMALLEST_SHARE = 0.1  # of a nominal thickness of mask, for which the solver is planned


@dataclass(frozen=True, slots=True)
class PreparedLine:
    """A line with all that its solutions share."""

    line: Line
    surroundings: Surroundings | BroadsideSurroundings
    nominal: AnySection
    plan: AnyPlan
    low_limit: float
    high_limit: float
    frequency: float | None = None  # [Hz]; None: lossless and static
    rise: ReadingRise | None = None
    solved: SolvedLine | None = None  # what was solved before

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
        """Solved impedance [ohm] of possible sections: of the line, or of the pair in its mode; shape (sections,).

        At a frequency it is the magnitude of the lossy line's.
        """
        mode = self.shown_mode

        def solve() -> tuple[FloatArray]:
            return (self.solve(section, modes=(mode,))[mode].impedance,)

        return np.asarray(self.mode_factor * self._known("impedance", section, solve)[0])

    def _known(
        self, question: str, section: AnySection, solve: Callable[[], tuple[FloatArray, ...]],
    ) -> tuple[FloatArray, ...]:
        """What `solve` gives for the sections in the mode that is meant, from the cache where it is there."""
        if self.solved is None:
            return solve()
        entering = section, self.plan, self.frequency, self.shown_mode
        return self.solved.arrays(question, entering, solve, sections=section.count)

    @property
    def from_cache(self) -> int:
        """How many of its sections were solved before."""
        return 0 if self.solved is None else self.solved.reused

    @property
    def has_gradient(self) -> bool:
        """Whether the solver knows the partial derivatives of this line's impedance."""
        return isinstance(self.nominal, Section) and self.frequency is None

    def impedance_and_gradient(self, section: AnySection) -> tuple[FloatArray, FloatArray]:
        """Solved impedance [ohm] (sections,), and its partial derivatives [ohm/m, or ohm] (parameters, sections).

        The parameters are those of `section_parameters`, in its order. Only where `has_gradient`.
        """
        def solve() -> tuple[FloatArray, FloatArray]:
            assert isinstance(section, Section)
            assert isinstance(self.plan, Plan)
            solved = solve_with_derivatives(section, self.plan, mode=self.shown_mode)
            return solved.impedance, np.stack(list(solved.by.values()))

        impedance, slopes = self._known("impedance and gradient", section, solve)
        return self.mode_factor * impedance, self.mode_factor * slopes

    @property
    def shown_mode(self) -> int:
        """The mode whose impedance is meant."""
        return ODD if self.mode == "differential" else EVEN

    @property
    def mode_factor(self) -> float:
        """Differential impedance is twice the odd mode's, common half the even mode's."""
        return {"single": 1.0, "differential": 2.0, "common": 0.5}[self.mode]

    def solve(
        self, section: AnySection, *, modes: tuple[int, ...],
    ) -> Mapping[int, ModeSolution] | Mapping[int, LineParameters]:
        """Modes of possible sections, lossy where there is a frequency."""
        if self.frequency is None:
            return solve_modes(section, self.plan, modes=modes)
        return solve_lossy(section, self.plan, modes=modes, frequency=self.frequency)

    def impedance_of(self, modes: Mapping[int, ModeSolution] | Mapping[int, LineParameters]) -> FloatArray:
        """The impedance that is meant, from its mode."""
        return np.asarray(self.mode_factor * modes[self.shown_mode].impedance)


def prepare(
    scenario: Scenario, line: Line, settings: SolverSettings, cache: SolvedCache | None = None,
) -> PreparedLine:
    """Make `line` of a checked scenario ready. cache : of sections that were solved before."""
    around = surroundings_of if line.partner is None else broadside_surroundings_of
    surroundings = around(scenario, line)
    nominal = as_built(line, surroundings, NominalValues(nominals_of(scenario)))
    half = line.target * scenario.limit_of(line)
    return PreparedLine(line, surroundings, nominal, _planned(scenario, nominal, settings),
                        low_limit=line.target - half, high_limit=line.target + half,
                        frequency=scenario.evaluation.frequency, rise=_rise(scenario, line, nominal),
                        solved=None if cache is None else cache.for_line())


def _planned(scenario: Scenario, nominal: AnySection, settings: SolverSettings) -> AnyPlan:
    """The plan of a line: with a mask, it serves the nominal one and the thinnest that the tolerances allow.

    Charges on the crest and on the face of the mask answer to each other over its thickness: with nodes that suit the
    nominal mask only, one of a fifth of it gives impedances that are off by up to 0.5 %.
    """
    plan = plan_line(nominal, settings)
    if not isinstance(nominal, Section) or nominal.mask is None or not isinstance(plan, Plan):
        return plan
    mask = nominal.mask
    shares = [_least_share(scenario, f"{mask.name}.{item}") for item in ("thickness", "over_copper")]
    thinnest = replace(mask, on_laminate=shares[0] * mask.on_laminate, over_copper=shares[1] * mask.over_copper)
    return plan.serving(plan_for(replace(nominal, mask=thinnest), settings))


def _least_share(scenario: Scenario, name: str) -> float:
    """The low end of a property's tolerance over its nominal, SMALLEST_SHARE at least; 1 where it does not vary."""
    for variation in scenario.variations:
        for each in members(scenario, variation):
            if each.name == name:
                return min(1.0, max(SMALLEST_SHARE, _low_end(scenario, variation, each) / each.nominal))
    return 1.0


def _low_end(scenario: Scenario, variation: Variation, each: Property) -> float:
    if variation.shape == "measured":
        return min(scenario.readings_of(each.name).values)
    if variation.low is not None:
        return variation.low
    shift, half = (0.0 if amount is None else amount.of(each.nominal)
                   for amount in (variation.shift, variation.tolerance))
    return each.nominal + shift - half


def _rise(scenario: Scenario, line: Line, nominal: AnySection) -> ReadingRise | None:
    """What series resistance adds to a reading on the nominal line: that of both traces of a differential pair in
    series, of a common-mode pair side by side."""
    if scenario.test is None or scenario.test.reading is None:
        return None
    layers = [scenario.layer(line.layer)] * (2 if line.gap is not None else 1)
    if line.partner is not None:
        layers = sorted([*layers, scenario.layer(line.partner)], key=scenario.layers.index)
    areas = [cross_section(nominal, trace if line.partner is not None else 0) for trace in range(len(layers))]
    each = [1.0 / (layer.conductivity * float(area[0])) for layer, area in zip(layers, areas, strict=True)]
    return reading_rise(each, position=scenario.test.reading.position,
                        side_by_side=line.is_pair and line.mode == "common")


def section_parameters(section: AnySection) -> FloatArray:
    """All that a section is made of, (parameters, sections): lengths [m] and Dk [-], as the solver names them."""
    assert isinstance(section, Section)
    return np.stack([value for _, value, _ in parameters(section)])


def nominal_impedance(prepared: PreparedLine) -> float:
    """Solved impedance [ohm] of the nominal section."""
    return float(np.asarray(prepared.impedance(prepared.nominal))[0])
