"""Partial derivatives from the adjoint: against central differences and an independent calculation."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from tests.section_examples import EVEN, ODD, microstrip, stripline
from tests.test_solver_reference import REFERENCE, SECTIONS, SOURCE, section_of
from tolerance.arrays import FloatArray
from tolerance.sections.layered import LayeredSection, PlacedTrace
from tolerance.solver.derivatives import impedance_slopes, parameters, solve_with_derivatives
from tolerance.solver.line import AnySection, plan_line, solve_modes
from tolerance.solver.plan import SolverSettings, plan_for

STEP = 1e-3  # of each value, for central differences of the solver
MASK = (25, 12, 3.5)



def two_layers(*, feet: tuple[bool, bool], layers: tuple[int, int]) -> LayeredSection:
    """A broadside pair of unequal traces, shifted, in a stack of four unequal plies under a plane or between two."""
    traces = tuple(
        PlacedTrace(layer, foot_up, *(np.array([size]) for size in (width, width - 20, thickness, centre)))
        for layer, foot_up, width, thickness, centre in zip(
            layers, feet, (110.0, 100.0), (18.0, 30.0), (-15.0, 22.0), strict=True))
    return LayeredSection(tuple(np.array([size]) for size in (150.0, 90.0, 130.0, 110.0)),
                          tuple(np.array([dk]) for dk in (3.4, 4.3, 3.9, 3.1)), True, layers[1] < 3, traces)


KINDS: dict[str, tuple[AnySection, int]] = {
    "bare": (microstrip(foot=150, crest=120, thickness=35, height=100, dk=4.2), EVEN),
    "bare pair over two plies": (
        microstrip(foot=120, crest=90, thickness=35, height=60, dk=4.2, gap=75, lower_ply=(80, 3.5)), ODD),
    "mask": (microstrip(foot=100, crest=80, thickness=35, height=60, dk=4.2, mask=MASK), EVEN),
    "mask pair, even": (microstrip(foot=100, crest=80, thickness=35, height=75, dk=4.2, gap=75, mask=MASK), EVEN),
    "mask pair, odd": (microstrip(foot=100, crest=80, thickness=35, height=75, dk=4.2, gap=75, mask=MASK), ODD),
    "flat mask above the mesa": (
        microstrip(foot=200, crest=180, thickness=15, height=120, dk=4.0, mask=(60, 20, 3.5)), EVEN),
    "cover": (microstrip(foot=150, crest=120, thickness=35, height=120, dk=4.2, cover=(65, 3.5)), EVEN),
    "stripline": (stripline(foot=100, crest=80, thickness=18, core=(100, 4.4), prepreg=(132, 3.7)), EVEN),
    "stripline pair": (stripline(foot=100, crest=80, thickness=18, core=(100, 4.4), prepreg=(132, 3.7), gap=75), ODD),
    "coplanar": (replace(microstrip(foot=150, crest=120, thickness=35, height=100, dk=4.2, mask=MASK),
                         ground_gap=np.array([100.0])), EVEN),
    "broadside, odd": (two_layers(feet=(True, False), layers=(0, 2)), ODD),
    "broadside, even": (two_layers(feet=(True, False), layers=(0, 2)), EVEN),
    "broadside over one plane": (two_layers(feet=(False, False), layers=(1, 3)), ODD),
    "broadside in one ply": (two_layers(feet=(False, True), layers=(2, 2)), ODD),
}


@pytest.mark.parametrize("kind", list(KINDS))
def test_derivatives_equal_central_differences(kind: str) -> None:
    section, mode = KINDS[kind]
    plan = plan_line(section, SolverSettings())
    solved = solve_with_derivatives(section, plan, mode=mode)

    def impedance(one: AnySection) -> FloatArray:
        return solve_modes(one, plan, modes=(mode,))[mode].impedance

    assert solved.impedance == pytest.approx(impedance(section), rel=1e-12)
    names = [name for name, _, _ in parameters(section)]
    assert list(solved.by) == names
    for name, value, put in parameters(section):
        step = STEP * np.abs(value)
        difference = (impedance(put(section, value + step)) - impedance(put(section, value - step))) / (2.0 * step)
        smallest = 1e-5 * float(solved.impedance[0] / abs(value[0]))
        assert solved.by[name] == pytest.approx(difference, rel=1e-4, abs=smallest), name


@pytest.mark.parametrize("kind", list(KINDS))
def test_scaling_every_length_changes_nothing(kind: str) -> None:
    """Exact: impedance depends on ratios of lengths only, so the sum of length * derivative is nought."""
    section, mode = KINDS[kind]
    solved = solve_with_derivatives(section, plan_line(section, SolverSettings()), mode=mode)
    total = sum(value * solved.by[name] for name, value, _ in parameters(section) if not name.endswith("dk"))
    assert np.asarray(total) == pytest.approx(0.0, abs=1e-5 * float(solved.impedance[0]))


def test_slopes_are_the_derivatives_of_the_logarithm() -> None:
    """Exact: d ln Z = dZ / Z, one column for each dimension."""
    section, mode = KINDS["mask pair, odd"]
    plan = plan_line(section, SolverSettings())
    slopes, solved = impedance_slopes(section, plan, mode=mode), solve_with_derivatives(section, plan, mode=mode)
    assert slopes.names == tuple(solved.by)
    assert slopes.slopes.shape == slopes.values.shape == (1, len(slopes.names))
    for column, (name, value, _) in enumerate(parameters(section)):
        assert slopes.values[:, column] == pytest.approx(value, rel=1e-15)
        assert slopes.slopes[:, column] * slopes.impedance == pytest.approx(solved.by[name], rel=1e-12)


def test_dk_of_a_homogeneous_line_acts_with_the_power_minus_a_half() -> None:
    """Exact: Z goes as Dk^(-1/2)."""
    section = stripline(foot=100, crest=80, thickness=18, core=(100, 4.0), prepreg=(132, 4.0))
    solved = solve_with_derivatives(section, plan_for(section, SolverSettings()), mode=EVEN)
    total = 4.0 * (solved.by["foot_side.0.dk"] + solved.by["crest_side.0.dk"]) / solved.impedance
    assert total == pytest.approx(-0.5, abs=1e-7)


NAMES = {"foot_width": "foot_width", "crest_width": "crest_width", "thickness": "thickness", "gap": "gap",
         "height": "foot_side.0.thickness", "core_height": "foot_side.0.thickness", "dk_laminate": "foot_side.0.dk",
         "dk_core": "foot_side.0.dk", "dk_prepreg": "crest_side.0.dk", "prepreg_height": "crest_side.0.thickness",
         "mask_on_laminate": "mask.on_laminate", "mask_on_trace": "mask.over_copper", "dk_mask": "mask.dk"}


@pytest.mark.parametrize(("name", "of", "by", "expected"), [
    (case["section"], row["of"], row["by"], row["value"])
    for case in REFERENCE["derivatives"] for row in case["rows"] if row["by"] in NAMES
])
def test_derivatives_of_the_independent_calculation(name: str, of: str, by: str, expected: float) -> None:
    section = section_of(SECTIONS[name])
    mode, factor = {"differential_impedance": (ODD, 2.0), "common_impedance": (EVEN, 0.5)}.get(of, (EVEN, 1.0))
    solved = solve_with_derivatives(section, plan_for(section), mode=mode)
    found = factor * float(solved.by[NAMES[by]][0])
    if by == "thickness" and section.crest_plane:  # there the height up to the plane is held, here that of the ply
        found -= factor * float(solved.by["crest_side.0.thickness"][0])
    assert found == pytest.approx(expected, rel=5e-3), SOURCE
