"""What physics promises of the field solver, and how its error and its noise behave.

Expected relations are exact unless a check says otherwise: invariances of Laplace's equation, monotony of
capacitance in Dk (Thomson's theorem), limits of geometry. The last tests measure the solver against itself, refined.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.conformal_maps import centred_strip_capacitance, trapezoid_capacitance
from tests.section_examples import EVEN, ODD, Number, impedance, microstrip, solve, stripline
from tolerance.sections.section import Mask, Ply, Section
from tolerance.solver.plan import SolverSettings, plan_for

REFINED = SolverSettings(copper_nodes=16, dielectric_nodes=20, tail_nodes=30)


def bare(
    *, foot: Number = 180.0, crest: Number = 160.0, thickness: Number = 40.0, height: Number = 100.0, dk: Number = 4.0,
    gap: Number | None = None,
) -> Section:
    return microstrip(foot=foot, crest=crest, thickness=thickness, height=height, dk=dk, gap=gap)


def two_plies(
    *, foot: Number = 180.0, crest: Number = 160.0, thickness: Number = 40.0, height: Number = 100.0, dk: Number = 4.0,
    gap: Number | None = None, lower_thickness: Number = 80.0, lower_dk: Number = 3.3,
) -> Section:
    return microstrip(foot=foot, crest=crest, thickness=thickness, height=height, dk=dk, gap=gap,
                      lower_ply=(lower_thickness, lower_dk))


def coated(
    *, foot: Number = 180.0, crest: Number = 160.0, thickness: Number = 40.0, height: Number = 100.0, dk: Number = 4.0,
    gap: Number | None = None, mask_thickness: Number = 25.0, over_copper: Number = 15.0, mask_dk: Number = 3.5,
) -> Section:
    return microstrip(foot=foot, crest=crest, thickness=thickness, height=height, dk=dk, gap=gap,
                      mask=(mask_thickness, over_copper, mask_dk))


def embedded(
    *, foot: Number = 180.0, crest: Number = 160.0, thickness: Number = 40.0, height: Number = 100.0, dk: Number = 4.0,
    gap: Number | None = None, cover_thickness: Number = 50.0, cover_dk: Number = 3.5,
) -> Section:
    return microstrip(foot=foot, crest=crest, thickness=thickness, height=height, dk=dk, gap=gap,
                      cover=(cover_thickness, cover_dk))


def between_planes(
    *, core_thickness: Number = 200.0, core_dk: Number = 4.0, prepreg_thickness: Number = 150.0,
    prepreg_dk: Number = 3.6, foot: Number = 180.0, crest: Number = 160.0, thickness: Number = 40.0,
    gap: Number | None = None,
) -> Section:
    return stripline(foot=foot, crest=crest, thickness=thickness, gap=gap, core=(core_thickness, core_dk),
                     prepreg=(prepreg_thickness, prepreg_dk))


Builder = Callable[..., Section]
KINDS: Mapping[str, tuple[Builder, dict[str, float]]] = {
    "bare": (bare, {}), "bare pair": (bare, {"gap": 150.0}), "two plies": (two_plies, {}),
    "coated": (coated, {}), "coated pair": (coated, {"gap": 150.0}), "merged mesas": (coated, {"gap": 40.0}),
    "flat mask": (coated, {"mask_thickness": 70.0}), "embedded": (embedded, {}),
    "embedded pair": (embedded, {"gap": 150.0}), "stripline": (between_planes, {}),
    "stripline pair": (between_planes, {"gap": 150.0}),
}
EVERY_KIND = pytest.mark.parametrize("kind", KINDS)
PAIRS = pytest.mark.parametrize("kind", [kind for kind, (_, size) in KINDS.items() if "gap" in size])


def nominal(build: Builder) -> dict[str, float]:
    """The sizes that a builder takes when it is told none, the gap left out."""
    return {name: float(size) for name, size in (build.__kwdefaults__ or {}).items() if name != "gap"}


def example(kind: str, **size: Number) -> Section:
    build, extra = KINDS[kind]
    return build(**{**extra, **size})


def scaled(section: Section, factor: float) -> Section:
    """Every length multiplied by `factor`."""
    mask = section.mask
    return replace(
        section, foot_width=factor * section.foot_width, crest_width=factor * section.crest_width,
        thickness=factor * section.thickness, gap=None if section.gap is None else factor * section.gap,
        foot_side=tuple(replace(ply, thickness=factor * ply.thickness) for ply in section.foot_side),
        crest_side=tuple(replace(ply, thickness=factor * ply.thickness) for ply in section.crest_side),
        mask=mask and Mask(factor * mask.on_laminate, factor * mask.over_copper, mask.dk),
    )


@EVERY_KIND
@settings(max_examples=5, deadline=None)
@given(factor=st.floats(1e-7, 1e3))
def test_scaling_every_length_keeps_the_impedance(kind: str, factor: float) -> None:
    section = example(kind)
    for mode, there in solve(scaled(section, factor)).items():
        assert there.impedance[0] == pytest.approx(solve(section)[mode].impedance[0], rel=1e-9)


@settings(max_examples=10, deadline=None)
@given(dk=st.floats(1.0, 12.0), gap=st.none() | st.floats(20.0, 500.0))
def test_impedance_goes_with_one_over_the_root_of_a_homogeneous_dk(dk: float, gap: float | None) -> None:
    filled, air = (solve(between_planes(core_dk=value, prepreg_dk=value, gap=gap)) for value in (dk, 1.0))
    for mode, there in filled.items():
        assert there.impedance[0] * np.sqrt(dk) == pytest.approx(air[mode].impedance[0], rel=1e-9)


@PAIRS
def test_odd_lies_below_single_below_even(kind: str) -> None:
    build, size = KINDS[kind]
    pair = solve(build(**size))
    single = solve(build(**{key: value for key, value in size.items() if key != "gap"}))[EVEN]
    assert pair[ODD].impedance[0] < single.impedance[0] < pair[EVEN].impedance[0]


@pytest.mark.parametrize("gap", [None, 150.0])
def test_mask_lowers_the_impedance_and_more_of_it_lowers_it_further(gap: float | None) -> None:
    sections = [bare(gap=gap), *(coated(gap=gap, mask_thickness=flat, over_copper=over) for flat, over in (
        (10.0, 8.0), (20.0, 8.0), (20.0, 15.0), (30.0, 15.0), (30.0, 25.0), (60.0, 25.0), (90.0, 25.0)))]
    solved = [solve(section) for section in sections]
    for mode in solved[0]:
        assert np.all(np.diff([modes[mode].impedance[0] for modes in solved]) < 0.0)


@EVERY_KIND
def test_each_dk_lowers_the_impedance(kind: str) -> None:
    build, size = KINDS[kind]
    for name in (name for name in nominal(build) if name.endswith("dk")):
        low, high = (solve(build(**{**size, name: value})) for value in (3.4, 3.8))
        for mode, there in low.items():
            assert high[mode].impedance[0] < there.impedance[0]
            assert high[mode].effective_dk[0] > there.effective_dk[0]


@PAIRS
def test_a_wide_gap_leaves_two_single_lines(kind: str) -> None:
    """Over a plane coupling falls with the square of the gap, between planes exponentially."""
    build, size = KINDS[kind]
    alone = {key: value for key, value in size.items() if key != "gap"}
    single = solve(build(**alone))[EVEN].impedance[0]
    far, further = (solve(build(**{**alone, "gap": gap})) for gap in (5_000.0, 10_000.0))
    for mode in (EVEN, ODD):
        assert far[mode].impedance[0] == pytest.approx(single, rel=1e-3)
        assert further[mode].impedance[0] == pytest.approx(single, rel=3e-4)


@pytest.mark.parametrize("gap", [None, 150.0])
def test_splitting_a_ply_of_one_dk_changes_nothing(gap: float | None) -> None:
    """Between flat plies to 1e-6; where images stand for plies (met to 5e-6 by design) to 1e-5."""
    split = two_plies(gap=gap, height=60.0, lower_thickness=40.0, lower_dk=4.0)
    for mode, there in solve(bare(gap=gap)).items():
        assert solve(split)[mode].impedance[0] == pytest.approx(there.impedance[0], rel=1e-5)
    whole = between_planes(gap=gap)
    core, prepreg = whole.foot_side[0], whole.crest_side[0]
    parts = [tuple(Ply(share * ply.thickness, ply.dk) for share in (0.3, 0.7)) for ply in (core, prepreg)]
    pairs = [(whole, replace(whole, foot_side=parts[0])), (whole, replace(whole, crest_side=parts[1]))]
    cover = embedded(gap=gap)
    halves = tuple(Ply(0.5 * cover.crest_side[0].thickness, cover.crest_side[0].dk) for _ in range(2))
    pairs.append((cover, replace(cover, crest_side=halves)))
    for one, other in pairs:
        for mode, there in solve(one).items():
            assert solve(other)[mode].impedance[0] == pytest.approx(there.impedance[0], rel=1e-6)


@pytest.mark.parametrize("gap", [None, 100.0])
@pytest.mark.parametrize("width", [20.0, 100.0, 500.0, 1000.0])
@pytest.mark.parametrize("dk", [2.2, 4.0, 10.2])
def test_images_and_spectrum_tell_the_same_slab(dk: float, width: float, gap: float | None) -> None:
    """A ply of air over the line takes the kernel by quadrature over wavenumbers instead of the fitted images."""
    size = {"foot": width, "crest": width, "thickness": 20.0}
    slabs = [(bare(dk=dk, gap=gap, **size), embedded(dk=dk, cover_dk=1.0, gap=gap, **size))]
    plies = two_plies(dk=dk, lower_dk=3.3, gap=gap, **size)
    slabs.append((plies, replace(plies, crest_side=(Ply(np.full(1, 50.0), np.ones(1)),))))
    for images, spectrum in slabs:
        expected = solve(spectrum)
        for mode, there in solve(images).items():
            assert there.impedance[0] == pytest.approx(expected[mode].impedance[0], rel=1e-4)
            assert there.effective_dk[0] == pytest.approx(expected[mode].effective_dk[0], rel=2e-4)


@pytest.mark.parametrize("gap", [None, 150.0])
def test_turning_a_stripline_upside_down_changes_nothing(gap: float | None) -> None:
    """Foot and crest of equal width, told from either side; the band at copper height has the same Dk both ways."""
    size = {"foot": 170.0, "crest": 170.0, "core_dk": 3.8, "prepreg_dk": 3.8}
    down = solve(between_planes(core_thickness=120.0, prepreg_thickness=200.0, gap=gap, **size))
    up = solve(between_planes(core_thickness=200.0, prepreg_thickness=120.0, gap=gap, **size))
    for mode, there in down.items():
        assert up[mode].impedance[0] == pytest.approx(there.impedance[0], rel=1e-6)


@pytest.mark.parametrize("gap", [None, 150.0])
def test_foot_up_is_the_mirror_image_of_foot_down(gap: float | None) -> None:
    """A homogeneous trapezoid with foot and crest exchanged stands on its head between the same planes."""
    size = {"core_dk": 3.8, "prepreg_dk": 3.8}
    wider = None if gap is None else gap + 20.0  # told at the foot, the narrower face of the second
    down = solve(between_planes(foot=180.0, crest=160.0, core_thickness=120.0, prepreg_thickness=200.0, gap=gap,
                                **size))
    up = solve(between_planes(foot=160.0, crest=180.0, core_thickness=200.0, prepreg_thickness=120.0, gap=wider,
                              **size))
    for mode, there in down.items():
        assert up[mode].impedance[0] == pytest.approx(there.impedance[0], rel=1e-5)


def test_a_mask_or_a_cover_of_air_is_none() -> None:
    plain = impedance(bare())
    assert impedance(coated(mask_dk=1.0)) == pytest.approx(plain, rel=1e-5)
    assert impedance(embedded(cover_dk=1.0)) == pytest.approx(plain, rel=1e-5)
    assert impedance(coated(mask_thickness=70.0, mask_dk=1.0)) == pytest.approx(plain, rel=1e-5)


def test_a_cover_far_thicker_than_the_line_fills_all_space() -> None:
    """Towards one dielectric everywhere: effective Dk rises to it, the rest falling with the square of the cover."""
    short = [4.0 - solve(embedded(dk=4.0, cover_dk=4.0, cover_thickness=cover))[EVEN].effective_dk[0]
             for cover in (1_000.0, 2_000.0, 4_000.0)]
    assert 0.0 < short[2] < short[1] < short[0] < 0.05
    assert np.log2(short[1] / short[2]) == pytest.approx(2.0, abs=0.3)


def test_a_cover_of_vanishing_thickness_tends_to_the_bare_line() -> None:
    plain = impedance(bare())
    short = [plain - impedance(embedded(cover_thickness=cover, thickness=0.0, crest=180.0)) for cover in (10.0, 3.0)]
    none = plain - impedance(bare(thickness=0.0, crest=180.0))
    assert none < short[1] < short[0]
    assert short[1] - none < 0.5 * (short[0] - none)


def test_a_far_upper_plane_leaves_an_embedded_line_in_a_half_space() -> None:
    """Two planes, the upper 100 times further: the same as a thick cover of the same Dk, to the order of (1/100)."""
    planes = impedance(between_planes(core_thickness=100.0, prepreg_thickness=10_000.0, core_dk=4.0, prepreg_dk=4.0))
    cover = impedance(embedded(dk=4.0, cover_dk=4.0, cover_thickness=10_000.0))
    assert planes == pytest.approx(cover, rel=1e-3)


@pytest.mark.parametrize("gap", [None, 150.0])
def test_flat_mask_above_the_mesa_is_a_cover(gap: float | None) -> None:
    flat, cover = (solve(section)[EVEN].impedance[0] for section in (
        coated(gap=gap, mask_thickness=70.0), embedded(gap=gap, cover_thickness=30.0)))
    assert flat == pytest.approx(cover, rel=1e-12)


@pytest.mark.parametrize(("below", "above", "nominal"), [
    ({"mask_thickness": 54.999}, {"mask_thickness": 55.001}, {}),
    ({"mask_thickness": 54.999}, {"mask_thickness": 55.001}, {"mask_thickness": 70.0}),
    ({"gap": 49.999}, {"gap": 50.001}, {"gap": 60.0}),
    ({"gap": 49.999}, {"gap": 50.001}, {"gap": 40.0}),
])
def test_draws_on_both_sides_of_a_change_of_shape_are_solved_alike(
    below: dict[str, float], above: dict[str, float], nominal: dict[str, float],
) -> None:
    """The flat mask rises over the mesa; the mesas of a pair meet: one plan serves both sides of either."""
    plan = plan_for(coated(**nominal))
    for mode, there in solve(coated(**below), plan=plan).items():
        assert solve(coated(**above), plan=plan)[mode].impedance[0] == pytest.approx(there.impedance[0], rel=5e-5)


@EVERY_KIND
def test_the_result_does_not_depend_on_the_batch(kind: str) -> None:
    """Apart from the last digits: the linear algebra sums in another order for another batch."""
    spread = 1.0 + 0.05 * np.random.default_rng(0).uniform(-1.0, 1.0, 20)
    section = example(kind, foot=180.0 * spread, thickness=40.0 / spread)
    plan = plan_for(section)
    together = solve(section, plan=plan)
    for mode, there in together.items():
        alone = [solve(section.rows(slice(row, row + 1)), plan=plan)[mode].impedance[0] for row in range(20)]
        np.testing.assert_allclose(alone, there.impedance, rtol=1e-11)


def sweeps() -> list[tuple[str, str]]:
    """Every kind with each of its dimensions and Dks."""
    return [(kind, name) for kind, (build, size) in KINDS.items() for name in {**nominal(build), **size}]


@pytest.mark.parametrize(("kind", "name"), sweeps())
def test_impedance_is_smooth_in_every_dimension(kind: str, name: str) -> None:
    """A stretch of a sweep of +-15 % in 1000 steps: second differences less their smooth course, below 1e-6 ohm."""
    build, size = KINDS[kind]
    middle = {**nominal(build), **size}[name]
    factors = np.linspace(0.85, 1.15, 1001)[430:490]
    solved = solve(build(**{**size, name: middle * factors}), plan=plan_for(build(**size)))
    places = np.linspace(-1.0, 1.0, factors.size - 2)
    for mode in solved.values():
        second = np.diff(mode.impedance, 2)
        noise = second - np.polynomial.Chebyshev.fit(places, second, 4)(places)
        assert np.abs(noise).max() < 1e-7


def test_error_falls_exponentially_for_strips() -> None:
    """The grading takes the square-root edges out: what is left is smooth, and each node counts."""
    exact = centred_strip_capacitance(width=1.0, plane_spacing=1.0)
    section = stripline(foot=1.0, crest=1.0, thickness=0.0, core=(0.5, 1.0), prepreg=(0.5, 1.0))
    errors = [abs(solve(section, settings=SolverSettings(copper_nodes=count))[EVEN].capacitance[0] / exact - 1.0)
              for count in (4, 6, 8, 10)]
    assert all(fine < 0.1 * coarse for coarse, fine in pairwise(errors))


@pytest.mark.parametrize("crest", [1.0, 0.7])
@pytest.mark.parametrize("above", [None, 0.7])
def test_error_falls_fast_for_thick_traces(crest: float, above: float | None) -> None:
    """At least with the sixth power of the node count from 8 to 16.

    Graded with power 3, the charge near a corner varies like s^q, q at least 0.75 for the slopes here. Gauss rules
    meet such a function with n^(-2 q - 2), and capacitance, stationary in the charge, with twice that power: 7.
    """
    exact = trapezoid_capacitance(foot=1.0, crest=crest, thickness=0.4, below=0.5, above=above)
    section = (microstrip(foot=1.0, crest=crest, thickness=0.4, height=0.5, dk=1.0) if above is None else
               stripline(foot=1.0, crest=crest, thickness=0.4, core=(0.5, 1.0), prepreg=(above, 1.0)))
    coarse, fine = (abs(solve(section, settings=SolverSettings(copper_nodes=count))[EVEN].capacitance[0] / exact - 1.0)
                    for count in (8, 16))
    assert np.log2(coarse / fine) > 6.0


def test_error_falls_with_the_nodes_on_the_mask() -> None:
    def solved(count: int) -> float:
        return impedance(coated(), settings=SolverSettings(24, count, count))

    reference = solved(48)
    coarse, fine = (abs(solved(count) / reference - 1.0) for count in (4, 16))
    assert np.log2(coarse / fine) / 2.0 > 3.0


def test_default_settings_agree_with_refined_ones_over_wide_geometry() -> None:
    chance = np.random.default_rng(1)
    errors = []
    for number in range(120):
        section = random_section(number, chance)
        default, refined = solve(section), solve(section, settings=REFINED)
        errors += [abs(default[mode].impedance[0] / refined[mode].impedance[0] - 1.0) for mode in default]
    assert np.median(errors) < 5e-5
    assert np.quantile(errors, 0.99) < 5e-4


def random_section(number: int, chance: np.random.Generator) -> Section:
    """One of the kinds with sizes in micrometres drawn wide: impedances from about 3 to 200 ohm."""
    def any_of(low: float, high: float) -> float:
        return float(np.exp(chance.uniform(np.log(low), np.log(high))))

    foot, thickness = any_of(60.0, 1000.0), any_of(10.0, 80.0)
    crest = max(foot - 2.0 * thickness / chance.uniform(1.5, 8.0), 0.2 * foot)
    gap = any_of(50.0, 600.0) if number % 2 else None
    size = {"foot": foot, "crest": crest, "thickness": thickness}
    height, dk = any_of(40.0, 500.0), any_of(2.0, 10.5)
    kind = number // 2 % 4
    if kind == 0:
        return bare(**size, gap=gap, height=height, dk=dk)
    if kind == 1:
        return coated(**size, gap=gap, height=height, dk=dk, mask_thickness=any_of(8.0, 80.0),
                      over_copper=any_of(5.0, 40.0), mask_dk=chance.uniform(3.0, 4.5))
    if kind == 2:
        return embedded(**size, gap=gap, height=height, dk=dk, cover_thickness=any_of(10.0, 300.0),
                        cover_dk=any_of(2.0, 6.0))
    return between_planes(**size, gap=gap, core_thickness=height, core_dk=dk,
                          prepreg_thickness=any_of(40.0, 500.0), prepreg_dk=any_of(2.0, 6.0))
