"""The field solver against exact results: conformal maps and what symmetry gives.

Two independent ways to exact numbers: printed closed forms (Cohn 1954 and 1955, Love 1923) through scipy.special,
and Schwarz-Christoffel integrals of thick traces evaluated by scipy (see conformal_maps). Cohn: IRE Transactions on
Microwave Theory and Techniques 2 (July 1954), pages 52-57, and 3 (October 1955), pages 29-38.
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import ellipk, ellipkm1, gamma

from tests.conformal_maps import (
    centred_strip_capacitance,
    coupled_strip_capacitances,
    strip_capacitance,
    strip_over_plane_capacitance,
    trapezoid_capacitance,
)
from tests.section_examples import EVEN, ODD, impedance, microstrip, solve, stripline
from tolerance.solver.plan import plan_for

IMPEDANCE_OF_SPACE = 376.730313668  # [ohm], CODATA 2018
CLOSE = 2e-5  # relative, in impedance: ten times closer than the 0.02 % that the solver promises
COUPLED = [(0.2, 0.1), (0.35, 0.1), (0.5, 0.2), (1.0, 0.05), (1.0, 0.5), (2.0, 0.2), (2.0, 1.0)]
TRAPEZOIDS = [  # foot, crest, thickness, below, above
    (1.0, 1.0, 0.2, 1.0, None), (1.0, 0.8, 0.3, 0.5, None), (2.0, 1.8, 0.1, 1.0, None), (0.3, 0.1, 0.3, 1.0, None),
    (1.0, 1.3, 0.2, 0.5, None), (4.0, 3.9, 0.1, 1.0, None),
    (1.0, 1.0, 0.1, 0.5, 0.5), (1.0, 0.8, 0.2, 0.5, 0.9), (2.0, 1.9, 0.1, 0.4, 1.0), (0.3, 0.3, 0.3, 0.5, 0.5),
    (0.2, 0.05, 0.3, 0.5, 0.7), (1.0, 0.9, 0.1, 0.9, 0.3),
]


def exact_impedance(capacitance: float, dk: float = 1.0) -> float:
    """Of a homogeneous line, from its capacitance in air over vacuum permittivity."""
    return float(IMPEDANCE_OF_SPACE / (capacitance * np.sqrt(dk)))


@pytest.mark.parametrize(("width_over_spacing", "printed"), [
    (0.1, 194.2263), (0.25, 139.9171), (0.5, 100.4325), (1.0, 65.3536), (2.0, 38.5793),
    (0.01, None), (0.03, None), (3.0, None), (4.0, None),
])
def test_centred_strip(width_over_spacing: float, printed: float | None) -> None:
    exact = exact_impedance(centred_strip_capacitance(width=width_over_spacing, plane_spacing=1.0))
    if printed is not None:
        assert exact == pytest.approx(printed, abs=6e-5), "Cohn 1954, evaluated with scipy.special before this project"
    section = stripline(foot=width_over_spacing, crest=width_over_spacing, thickness=0.0, core=(0.5, 1.0),
                        prepreg=(0.5, 1.0))
    assert impedance(section) == pytest.approx(exact, rel=CLOSE), "Cohn 1954, exact"


@pytest.mark.parametrize("width_over_spacing", [6.0, 8.0, 10.0, 20.0, 40.0, 120.0, 200.0])
def test_wide_centred_strip(width_over_spacing: float) -> None:
    """Far wider than any line of 50 ohm (about 0.4 on Dk 4): still within what the solver promises."""
    exact = exact_impedance(centred_strip_capacitance(width=width_over_spacing, plane_spacing=1.0))
    section = stripline(foot=width_over_spacing, crest=width_over_spacing, thickness=0.0, core=(0.5, 1.0),
                        prepreg=(0.5, 1.0))
    assert impedance(section) == pytest.approx(exact, rel=1e-4), "Cohn 1954, exact"


@pytest.mark.parametrize("thickness_over_spacing", [0.02, 0.1, 0.25])
@pytest.mark.parametrize("width_over_spacing", [3.0, 10.0, 60.0, 200.0])
def test_wide_thick_strip(width_over_spacing: float, thickness_over_spacing: float) -> None:
    """S. B. Cohn, "Characteristic impedance of the shielded-strip transmission line", 1954: a wide thick strip whose
    ends do not feel each other; exact to e^(-pi width / (spacing - thickness))."""
    x = 1.0 / (1.0 - thickness_over_spacing)
    fringe = (2.0 * x * np.log(x + 1.0) - (x - 1.0) * np.log(x**2 - 1.0)) / np.pi
    exact = IMPEDANCE_OF_SPACE / 4.0 / (width_over_spacing * x + fringe)
    height = 0.5 * (1.0 - thickness_over_spacing)
    section = stripline(foot=width_over_spacing, crest=width_over_spacing, thickness=thickness_over_spacing,
                        core=(height, 1.0), prepreg=(height, 1.0))
    assert impedance(section) == pytest.approx(exact, rel=1e-4), "Cohn 1954"


def test_a_trace_far_wider_than_its_dielectric_takes_no_more_unknowns() -> None:
    section = microstrip(foot=20_000, crest=19_980, thickness=35, height=100, dk=4.0)
    wider = microstrip(foot=40_000, crest=39_980, thickness=35, height=100, dk=4.0)
    counts = [sum(unknowns for unknowns, _, _ in plan_for(one).counts.values()) for one in (section, wider)]
    assert counts[1] <= counts[0] + 20 <= 120
    rise = IMPEDANCE_OF_SPACE / impedance(wider) - IMPEDANCE_OF_SPACE / impedance(section)
    assert rise == pytest.approx(2.0 * 20_000 / 100, rel=2e-3), "exact for plates without end: sqrt(Dk) width / height"


@pytest.mark.parametrize(("width", "gap"), COUPLED)
@pytest.mark.parametrize("dk", [1.0, 4.2])
def test_coupled_strips(width: float, gap: float, dk: float) -> None:
    solved = solve(stripline(foot=width, crest=width, thickness=0.0, gap=gap, core=(0.5, dk), prepreg=(0.5, dk)))
    even, odd = coupled_strip_capacitances(width=width, gap=gap, plane_spacing=1.0)
    assert solved[EVEN].impedance[0] == pytest.approx(exact_impedance(even, dk), rel=CLOSE), "Cohn 1955, exact"
    assert solved[ODD].impedance[0] == pytest.approx(exact_impedance(odd, dk), rel=CLOSE), "Cohn 1955, exact"


@pytest.mark.parametrize(("width", "gap"), [(0.5, None), (2.0, None), (0.35, 0.1), (1.0, 0.5)])
@pytest.mark.parametrize(("core_dk", "prepreg_dk"), [(3.0, 5.0), (4.4, 3.7), (10.2, 2.2)])
def test_strips_between_two_dielectrics_of_equal_height(
    width: float, gap: float | None, core_dk: float, prepreg_dk: float,
) -> None:
    solved = solve(stripline(foot=width, crest=width, thickness=0.0, gap=gap, core=(0.5, core_dk),
                             prepreg=(0.5, prepreg_dk)))
    mean = 0.5 * (core_dk + prepreg_dk)
    source = "exact: no field line crosses the symmetry plane of the strips, so the Dk act in parallel"
    for mode in solved.values():
        assert mode.effective_dk[0] == pytest.approx(mean, rel=CLOSE), source
    if gap is None:
        exact = exact_impedance(centred_strip_capacitance(width=width, plane_spacing=1.0), mean)
        assert solved[EVEN].impedance[0] == pytest.approx(exact, rel=CLOSE), source


@pytest.mark.parametrize("width_over_height", [0.01, 0.1, 0.5, 1.0, 2.0, 5.0, 10.0])
def test_strip_over_a_plane_in_air(width_over_height: float) -> None:
    exact = exact_impedance(strip_over_plane_capacitance(width_over_height=width_over_height))
    section = microstrip(foot=width_over_height, crest=width_over_height, thickness=0.0, height=1.0, dk=1.0)
    assert impedance(section) == pytest.approx(exact, rel=CLOSE), "Love 1923, exact"


@pytest.mark.parametrize(("width", "below", "above"), [(1.0, 0.3, 0.7), (0.2, 0.2, 1.0), (2.0, 0.5, 0.8)])
def test_offset_strip(width: float, below: float, above: float) -> None:
    exact = exact_impedance(strip_capacitance(width=width, below=below, above=above), 3.7)
    section = stripline(foot=width, crest=width, thickness=0.0, core=(below, 3.7), prepreg=(above, 3.7))
    assert impedance(section) == pytest.approx(exact, rel=CLOSE), "Schwarz-Christoffel map, exact"


@pytest.mark.parametrize(("foot", "crest", "thickness", "below", "above"), TRAPEZOIDS)
def test_trapezoid(foot: float, crest: float, thickness: float, below: float, above: float | None) -> None:
    exact = trapezoid_capacitance(foot=foot, crest=crest, thickness=thickness, below=below, above=above)
    if above is None:
        section = microstrip(foot=foot, crest=crest, thickness=thickness, height=below, dk=1.0)
    else:
        section = stripline(foot=foot, crest=crest, thickness=thickness, core=(below, 1.0), prepreg=(above, 1.0))
    assert impedance(section) == pytest.approx(exact_impedance(exact), rel=1e-4), "Schwarz-Christoffel map, exact"


def test_the_exact_maps_agree_with_each_other() -> None:
    between = strip_capacitance(width=0.5, below=0.5, above=0.5)
    assert between == pytest.approx(centred_strip_capacitance(width=0.5, plane_spacing=1.0), rel=1e-9)
    over = strip_capacitance(width=2.0, below=1.0)
    assert over == pytest.approx(strip_over_plane_capacitance(width_over_height=2.0), rel=1e-9)
    thin = trapezoid_capacitance(foot=2.0, crest=2.0, thickness=1e-5, below=1.0)
    assert thin == pytest.approx(over, rel=2e-5)


def test_square_bar_high_above_a_plane() -> None:
    height, side = 200.0, 1.0
    radius = side * gamma(0.25) / (2.0**1.5 * np.sqrt(np.pi) * gamma(0.75))
    exact = IMPEDANCE_OF_SPACE / (2.0 * np.pi) * np.log(2.0 * height / radius)
    section = microstrip(foot=side, crest=side, thickness=side, height=height - 0.5 * side, dk=1.0)
    assert impedance(section) == pytest.approx(exact, rel=1e-5), "logarithmic capacity of a square, exact"


@pytest.mark.parametrize("gap", [None, 0.4])
@pytest.mark.parametrize("dk", [1.0, 2.2, 4.2, 10.2])
def test_effective_dk_of_a_homogeneous_stripline_is_its_dk(gap: float | None, dk: float) -> None:
    solved = solve(stripline(foot=1.0, crest=0.8, thickness=0.15, gap=gap, core=(0.7, dk), prepreg=(1.1, dk)))
    for mode in solved.values():
        assert mode.effective_dk[0] == pytest.approx(dk, rel=1e-9), "exact: one dielectric everywhere"


@pytest.mark.parametrize("gap", [None, 0.4])
def test_effective_dk_in_air_is_one(gap: float | None) -> None:
    solved = solve(microstrip(foot=1.0, crest=0.8, thickness=0.15, gap=gap, height=0.7, dk=1.0,
                              mask=(0.2, 0.1, 1.0)))
    for mode in solved.values():
        assert mode.effective_dk[0] == pytest.approx(1.0, rel=1e-9), "exact: air everywhere"


@pytest.mark.parametrize("dk", [2.2, 4.0, 10.2])
def test_strips_on_a_half_space_have_the_mean_dk(dk: float) -> None:
    """A pair of strips in the face of a half space, odd mode: with the plane far off the mean of Dk and air."""
    solved = solve(microstrip(foot=1.0, crest=1.0, thickness=0.0, gap=0.5, height=2000.0, dk=dk))
    assert solved[ODD].effective_dk[0] == pytest.approx(0.5 * (1.0 + dk), rel=CLOSE), "exact at infinite height"


@pytest.mark.parametrize(("width", "gap"), [(1.0, 0.5), (1.0, 0.1), (0.5, 2.0)])
def test_coplanar_strips_far_from_any_plane(width: float, gap: float) -> None:
    """Two strips in the face of a half space, odd mode.

    Textbook conformal map of coplanar strips, exact: C = K(k') / K(k) between them in air, k = gap / (gap + 2 width);
    each strip has twice that against the plane of symmetry.
    """
    k = gap / (gap + 2.0 * width)
    capacitance = 2.0 * float(ellipkm1(k**2) / ellipk(k**2))
    solved = solve(microstrip(foot=width, crest=width, thickness=0.0, gap=gap, height=3000.0, dk=4.0))
    assert solved[ODD].impedance[0] == pytest.approx(exact_impedance(capacitance, 2.5), rel=CLOSE)
