"""Coplanar lines, broadside pairs and any traces between flat plies.

Sections: independent finite-element calculation with scikit-fem (energy bounded from both sides), not a publication.
"""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.special import ellipk, ellipkm1

from tests.section_examples import microstrip, stripline
from tolerance.arrays import FloatArray
from tolerance.sections.layered import LayeredSection, PlacedTrace
from tolerance.sections.section import Section
from tolerance.solver.layered import capacitance_matrix, plan_layered
from tolerance.solver.line import ModeSolution, plan_line, solve_modes
from tolerance.solver.plan import SolverSettings

EVEN, ODD = 1, -1
VACUUM_PERMITTIVITY = 8.8541878128e-12  # [F/m], CODATA 2018
SPEED_OF_LIGHT = 299792458.0  # [m/s]
FREE_SPACE_IMPEDANCE = 376.730313668  # [ohm], CODATA 2018

CASES: dict[str, dict[str, Any]] = {
    case["name"]: case for case in json.loads(
        (Path(__file__).parent / "reference_sections.json").read_text(encoding="utf-8"))["coplanar_and_broadside"]}


def array(value: float) -> FloatArray:
    return np.array([float(value)])


def coplanar(case: dict[str, Any]) -> Section:
    size, dk = case["dimensions"], case["dk"]
    mask = (size["mask_on_laminate"], size["mask_on_trace"], dk["dk_mask"]) if "dk_mask" in dk else None
    line = microstrip(foot=size["foot_width"], crest=size["crest_width"], thickness=size["thickness"],
                      height=size["height"], dk=dk["dk_laminate"], gap=size.get("gap"), mask=mask)
    return replace(line, ground_gap=array(size["ground_gap"]))


def broadside(
    *, foot: float, crest: float, thickness: float, lower: tuple[float, float], core: tuple[float, float],
    upper: tuple[float, float], offset: float = 0.0,
) -> LayeredSection:
    """Both feet on the core; `lower` and `upper` prepreg from the level of the feet to the planes, (thickness, Dk)."""
    layers = (lower, core, upper)
    traces = tuple(
        PlacedTrace(layer, foot_up, array(foot), array(crest), array(thickness), array(side * offset / 2))
        for layer, foot_up, side in ((0, True, -1.0), (2, False, 1.0)))
    return LayeredSection(tuple(array(layer[0]) for layer in layers), tuple(array(layer[1]) for layer in layers),
                          True, True, traces)


def solved(section: Section | LayeredSection) -> dict[int, ModeSolution]:
    single = isinstance(section, Section) and section.gap is None
    modes = (EVEN,) if single else (EVEN, ODD)
    return solve_modes(section, plan_line(section, SolverSettings()), modes=modes)


@pytest.mark.parametrize("name", [name for name in CASES if "coplanar" in name])
def test_coplanar_lines(name: str) -> None:
    expected, modes = CASES[name]["results"], solved(coplanar(CASES[name]))
    if "z_single" in expected:
        assert modes[EVEN].impedance[0] == pytest.approx(expected["z_single"], rel=1e-4)
        assert modes[EVEN].effective_dk[0] == pytest.approx(expected["dk_effective"], rel=2e-4)
        return
    for mode, word in ((ODD, "odd"), (EVEN, "even")):
        assert modes[mode].impedance[0] == pytest.approx(expected[f"z_{word}"], rel=1e-4)
        assert modes[mode].effective_dk[0] == pytest.approx(expected[f"dk_effective_{word}"], rel=2e-4)


@pytest.mark.parametrize("name", [name for name in CASES if "broadside" in name])
def test_broadside_pairs(name: str) -> None:
    size, dk, expected = CASES[name]["dimensions"], CASES[name]["dk"], CASES[name]["results"]
    section = broadside(
        foot=size["foot_width"], crest=size["crest_width"], thickness=size["thickness"],
        lower=(size["prepreg_height_lower"], dk["dk_prepreg_lower"]), core=(size["core_height"], dk["dk_core"]),
        upper=(size["prepreg_height_upper"], dk["dk_prepreg_upper"]))
    modes = solved(section)
    assert 2.0 * modes[ODD].impedance[0] == pytest.approx(expected["z_diff"], rel=2e-5)
    assert 0.5 * modes[EVEN].impedance[0] == pytest.approx(expected["z_common"], rel=2e-5)
    assert modes[ODD].effective_dk[0] == pytest.approx(expected["dk_effective_odd"], rel=2e-5)
    assert modes[EVEN].effective_dk[0] == pytest.approx(expected["dk_effective_even"], rel=2e-5)
    plan = plan_layered(section, SolverSettings())
    assert capacitance_matrix(section, plan)[0] == pytest.approx(np.array(expected["c_matrix_filled"]), rel=2e-5)


def test_offset_of_a_broadside_pair_acts_evenly_and_upwards() -> None:
    """Rises by 0.14, 0.9, 3.5, 7.6 % at 10, 25, 50, 75 um: independent boundary-element calculation, no publication."""
    def impedance(offset: float) -> float:
        section = broadside(foot=100, crest=100, thickness=15, lower=(165, 4.0), core=(100, 4.0), upper=(165, 4.0),
                            offset=offset)
        return 2.0 * float(solved(section)[ODD].impedance[0])

    straight = impedance(0.0)
    assert straight == pytest.approx(74.84, rel=2e-4)
    for offset, rise in ((10, 0.14), (25, 0.9), (50, 3.5), (75, 7.6)):
        assert 100 * (impedance(offset) / straight - 1) == pytest.approx(rise, abs=0.06)
        assert impedance(-offset) == pytest.approx(impedance(offset), rel=1e-9)


def test_three_conductors_in_two_layers() -> None:
    """C. Wei, R. F. Harrington, J. R. Mautz, T. K. Sarkar, "Multiconductor transmission lines in multilayered
    dielectric media", IEEE Trans. Microwave Theory and Techniques 32 (1984), pages 439-450: values recalled from
    memory, with geometry (its entry 1, 3 of L recalled doubtfully, left out)."""
    um = 1e-6
    traces = tuple(PlacedTrace(layer, False, array(350 * um), array(350 * um), array(70 * um), array(centre * um))
                   for layer, centre in ((1, -500), (2, 0), (2, 500)))
    section = LayeredSection((array(200 * um), array(100 * um), array(1000 * um)),
                             (array(4.3), array(3.2), array(1.0)), True, False, traces)
    plan = plan_layered(section, SolverSettings())
    capacitance = 1e12 * VACUUM_PERMITTIVITY * capacitance_matrix(section, plan)[0]  # [pF/m]
    air = VACUUM_PERMITTIVITY * capacitance_matrix(section.in_air(), plan)[0]
    inductance = 1e9 * np.linalg.inv(air) / SPEED_OF_LIGHT**2  # [nH/m]
    published = np.array([[142.09, -21.765, -0.892], [-21.733, 93.529, -18.098], [-0.892, -18.098, 87.962]])
    assert capacitance == pytest.approx(published, rel=3e-3)
    for (row, column), value in {(0, 0): 277.73, (1, 1): 328.6, (2, 2): 338.0, (0, 1): 87.763, (1, 2): 115.8}.items():
        assert inductance[row, column] == pytest.approx(value, rel=5e-4)


def test_a_capacitance_matrix_is_symmetric_with_negative_couplings_and_positive_rows() -> None:
    section = broadside(foot=120, crest=90, thickness=35, lower=(200, 3.3), core=(120, 4.2), upper=(260, 3.8),
                        offset=40)
    matrix = capacitance_matrix(section, plan_layered(section, SolverSettings()))[0]
    assert matrix == pytest.approx(matrix.T, rel=1e-6)
    assert matrix[0, 1] < 0.0
    assert np.all(matrix.sum(axis=1) > 0.0)


def test_a_homogeneous_broadside_pair_has_the_dk_of_its_dielectric() -> None:
    modes = solved(broadside(foot=100, crest=80, thickness=18, lower=(150, 3.9), core=(90, 3.9), upper=(220, 3.9),
                             offset=30))
    assert modes[ODD].effective_dk[0] == pytest.approx(3.9, rel=1e-9)
    assert modes[EVEN].effective_dk[0] == pytest.approx(3.9, rel=1e-9)


def test_grounded_copper_far_away_leaves_the_line_alone() -> None:
    line = microstrip(foot=150, crest=120, thickness=35, height=100, dk=4.2, mask=(25, 12, 3.5))
    alone = solved(line)[EVEN].impedance[0]
    beside = [solved(replace(line, ground_gap=array(gap)))[EVEN].impedance[0] for gap in (100, 300, 1000, 3000)]
    assert np.all(np.diff(beside) > 0)
    assert beside[-1] == pytest.approx(alone, rel=2e-5)


def test_grounded_copper_far_away_between_planes() -> None:
    line = stripline(foot=100, crest=90, thickness=18, core=(100, 4.2), prepreg=(120, 3.7))
    beside = solved(replace(line, ground_gap=array(700)))[EVEN].impedance[0]
    assert beside == pytest.approx(solved(line)[EVEN].impedance[0], rel=1e-5)


def test_thin_coplanar_line_under_a_lid() -> None:
    """Exact for zero thickness with lid and plane at the same distance (conformal mapping; Ghione and Naldi 1983):
    k = tanh(pi w / 4 h) / tanh(pi (w + 2 s) / 4 h), Z = (eta / 4) K(k') / K(k) / sqrt((Dk + 1) / 2). Copper of
    finite thickness tends to it nearly linearly, which is taken off from two thicknesses."""
    width, gap, height = 1.0, 0.5, 1.0
    k = np.tanh(np.pi * width / (4 * height)) / np.tanh(np.pi * (width + 2 * gap) / (4 * height))
    exact = FREE_SPACE_IMPEDANCE / 4 * ellipkm1(k**2) / ellipk(k**2) / np.sqrt(2.5)

    def thick(thickness: float) -> float:
        line = stripline(foot=width, crest=width, thickness=thickness, core=(height, 4.0),
                         prepreg=(height - thickness, 1.0))
        return float(solved(replace(line, ground_gap=array(gap)))[EVEN].impedance[0])

    thin, thicker = thick(0.01), thick(0.02)
    assert 2 * thin - thicker == pytest.approx(exact, rel=3e-3)
    assert thicker < thin < exact


def test_a_mask_that_buries_gap_and_grounds_is_continuous_in_its_height() -> None:
    """The mesas merge, then the flat mask rises over them: the impedance has no step there."""
    def impedance(flat: float) -> float:
        line = microstrip(foot=150, crest=120, thickness=35, height=100, dk=4.2, mask=(flat, 12, 3.5))
        return float(solved(replace(line, ground_gap=array(80)))[EVEN].impedance[0])

    assert impedance(47.01) == pytest.approx(impedance(46.99), rel=1e-4)
    assert impedance(60.0) < impedance(47.0) < impedance(30.0)


@pytest.mark.parametrize(("foot", "core"), [(1200.0, 100.0), (4000.0, 100.0), (2000.0, 12.0)])
def test_a_broad_pair_is_plates(foot: float, core: float) -> None:
    """Two plates, exact but for their ends, which wider plates do not change: capacitance grows by Dk width / spacing
    towards each face that it sees."""
    def odd(width: float) -> float:
        pair = broadside(foot=width, crest=width, thickness=15, lower=(165, 4.0), core=(core, 4.0), upper=(165, 4.0))
        return float(solved(pair)[ODD].capacitance[0])

    wider = 1.5 * foot
    assert odd(wider) - odd(foot) == pytest.approx(4.0 * (wider - foot) * (2.0 / core + 1.0 / 150.0), rel=2e-4)
