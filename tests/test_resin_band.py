"""Resin of its own Dk at the height of the copper: what it does to the impedance, and the way there from a scenario."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import brentq

from tests.scenario_texts import BOARD, HEAD, changed, messages
from tests.section_examples import EVEN, ODD, impedance, stripline
from tolerance.process.values import NominalValues, nominals_of
from tolerance.scenario import load, parse
from tolerance.sections.as_built import as_built
from tolerance.sections.drawing import drawing_of
from tolerance.sections.layered import LayeredSection, PlacedTrace
from tolerance.sections.section import Section
from tolerance.sections.surroundings import broadside_surroundings_of, surroundings_of
from tolerance.solver.derivatives import parameters, solve_with_derivatives
from tolerance.solver.line import plan_line, solve_modes
from tolerance.solver.plan import SolverSettings, plan_for
from tolerance.study.check import check

SOURCE = "independent boundary-element calculation, not a publication"


def line(*, width: float, core_dk: float = 4.2, prepreg_dk: float = 3.8, gap: float | None = None,
         band_dk: float | None = None) -> Section:
    """Copper 16 between core 100 and prepreg 100 (any one unit of length)."""
    section = stripline(foot=width, crest=width, thickness=16, core=(100, core_dk), prepreg=(100, prepreg_dk), gap=gap)
    return section if band_dk is None else replace(section, band_dk=np.array([band_dk]))


def fifty_ohm_width(core_dk: float, prepreg_dk: float) -> float:
    def off(width: float) -> float:
        return impedance(line(width=width, core_dk=core_dk, prepreg_dk=prepreg_dk)) - 50.0

    return float(brentq(off, 30.0, 200.0))


@pytest.mark.parametrize(("core_dk", "prepreg_dk", "single", "pair"), [
    (4.2, 3.8, 0.008, 0.010),
    (4.0, 4.0, 0.010, 0.013),
])
def test_resin_between_conductors_raises_the_impedance(
    core_dk: float, prepreg_dk: float, single: float, pair: float,
) -> None:
    """Band of Dk 3.2, single 50 ohm line and pair of about 100 ohm: rises as far as the source prints them."""
    width = fifty_ohm_width(core_dk, prepreg_dk)
    found = impedance(line(width=width, core_dk=core_dk, prepreg_dk=prepreg_dk, band_dk=3.2)) / 50.0 - 1.0
    assert found == pytest.approx(single, abs=0.0006), SOURCE
    plain, banded = (impedance(line(width=70, gap=130, core_dk=core_dk, prepreg_dk=prepreg_dk, band_dk=dk), mode=ODD)
                     for dk in (None, 3.2))
    assert banded / plain - 1.0 == pytest.approx(pair, abs=0.0006), SOURCE


@pytest.mark.parametrize(("width", "gap", "mode"), [
    (80, None, EVEN), (70, 130, ODD), (70, 130, EVEN), (300, None, EVEN),
])
def test_a_band_of_the_ply_s_own_dk_changes_nothing(width: float, gap: float | None, mode: int) -> None:
    """Exact: it is the same section, solved by another kernel."""
    plain, banded = (impedance(line(width=width, gap=gap, band_dk=dk), mode=mode) for dk in (None, 3.8))
    assert banded == pytest.approx(plain, rel=1e-6)


def test_a_trapezoid_and_a_coplanar_line_in_a_band_of_the_ply_s_own_dk() -> None:
    section = stripline(foot=100, crest=80, thickness=18, core=(100, 4.4), prepreg=(132, 3.7), gap=75)
    coplanar = replace(section, gap=None, ground_gap=np.array([90.0]))
    for one, mode in ((section, ODD), (section, EVEN), (coplanar, EVEN)):
        banded = replace(one, band_dk=np.array([3.7]))
        assert impedance(banded, mode=mode) == pytest.approx(impedance(one, mode=mode), rel=1e-6)


def broadside(*, split: bool, band_dk: float = 3.7) -> LayeredSection:
    """Two unequal traces that press into one ply of Dk 3.7 from both sides; `split` tells their bands apart."""
    def array(*values: float) -> tuple[np.ndarray[tuple[int, ...], np.dtype[np.float64]], ...]:
        return tuple(np.array([value]) for value in values)

    low, high = array(16.0, 20.0)
    foot, crest, centre, other_foot, other_crest, other_centre = array(90.0, 75.0, 15.0, 120.0, 110.0, -15.0)
    traces = (PlacedTrace(3 if split else 1, True, foot, crest, high, centre),
              PlacedTrace(1, False, other_foot, other_crest, low, other_centre))
    if split:
        return LayeredSection((*array(100.0), low, *array(80.0), high, *array(120.0)),
                              array(4.2, band_dk, 3.7, band_dk, 4.4), True,
                              True, traces)
    return LayeredSection(array(100.0, 116.0, 120.0), array(4.2, 3.7, 4.4), True, True, traces)


def test_broadside_pair_with_bands() -> None:
    whole, split, resin = (
        solve_modes(one, plan_line(one, SolverSettings()), modes=(EVEN, ODD))
        for one in (broadside(split=False), broadside(split=True), broadside(split=True, band_dk=3.0)))
    for mode in (EVEN, ODD):
        assert split[mode].impedance == pytest.approx(whole[mode].impedance, rel=1e-5)
        assert resin[mode].impedance > 1.001 * whole[mode].impedance, "a lower Dk raises any impedance"


def test_the_middle_between_equal_and_opposite_traces_is_a_plane() -> None:
    """Exact: a broadside pair that is its own mirror image, and one trace of it under a plane in the middle."""
    def array(value: float) -> np.ndarray[tuple[int, ...], np.dtype[np.float64]]:
        return np.array([value])

    copper = array(16.0)
    traces = (PlacedTrace(3, True, array(90.0), array(80.0), copper, array(0.0)),
              PlacedTrace(1, False, array(90.0), array(80.0), copper, array(0.0)))
    pair = LayeredSection((array(100.0), copper, array(160.0), copper, array(100.0)),
                          tuple(array(dk) for dk in (4.2, 3.0, 3.7, 3.0, 4.2)), True, True, traces)
    alone = replace(stripline(foot=90, crest=80, thickness=16, core=(100, 4.2), prepreg=(80, 3.7)), band_dk=array(3.0))
    odd = solve_modes(pair, plan_line(pair, SolverSettings()), modes=(ODD,))[ODD]
    assert odd.impedance == pytest.approx(impedance(alone), rel=1e-4)


@pytest.mark.parametrize(("gap", "mode"), [(None, EVEN), (130.0, ODD)])
def test_derivatives_with_a_band_equal_central_differences(gap: float | None, mode: int) -> None:
    section = line(width=70, gap=gap, band_dk=3.2)
    plan = plan_for(section)
    solved = solve_with_derivatives(section, plan, mode=mode)
    assert "band_dk" in solved.by
    for name, value, put in parameters(section):
        up, down = (solve_modes(put(section, value * factor), plan, modes=(mode,))[mode].impedance
                    for factor in (1.001, 0.999))
        assert solved.by[name] == pytest.approx((up - down) / (0.002 * value), rel=2e-4), name


RESIN = ('thickness = "300 um"\ndk = 3.9', 'thickness = "300 um"\ndk = 3.9\nresin_dk = 3.1')
BAND = changed(BOARD, RESIN)


def test_the_ply_that_presses_into_the_copper_brings_its_resin() -> None:
    scenario = parse(BAND)
    pair = scenario.lines[1]
    around = surroundings_of(scenario, pair)
    section = as_built(pair, around, NominalValues(nominals_of(scenario)))
    assert isinstance(section, Section)
    assert section.band_dk == pytest.approx([3.1])
    drawing = drawing_of(section, around, "L3")
    band = next(region for region in drawing.regions if region.kind == "resin")
    assert (band.dk, np.ptp(band.outline[:, 1])) == pytest.approx((3.1, section.thickness[0]))
    heights = sum(np.ptp(region.outline[:, 1]) for region in drawing.regions)
    assert heights == pytest.approx(120e-6 + 16e-6 + 300e-6), "core, copper, prepreg: each ply whole"
    plain, banded = (check(parse(text)).lines for text in (BOARD, BAND))
    assert banded[0].impedance == plain[0].impedance, "an outer line has no resin beside it"
    assert 1.002 * plain[1].impedance < banded[1].impedance < 1.03 * plain[1].impedance


def test_an_outer_layer_has_no_resin_between_its_lines() -> None:
    """Its foil is bonded before it is etched."""
    outer = 'thickness = "100 um"\ndk = 4.0'
    scenario = parse(changed(BOARD, (outer, f"{outer}\nresin_dk = 3.1")))
    assert surroundings_of(scenario, scenario.lines[0]).band_dk is None


BROADSIDE = HEAD + """
[[layers]]
name = "L2"
kind = "copper"
use = "plane"
foil = "16 um"

[[layers]]
name = "C1"
kind = "core"
thickness = "120 um"
dk = 4.2

[[layers]]
name = "L3"
kind = "copper"
use = "signal"
foil = "18 um"

[[layers]]
name = "P2"
kind = "prepreg"
thickness = "150 um"
dk = 3.9
resin_dk = 3.1

[[layers]]
name = "L4"
kind = "copper"
use = "signal"
foil = "30 um"

[[layers]]
name = "C2"
kind = "core"
thickness = "100 um"
dk = 4.2

[[layers]]
name = "L5"
kind = "copper"
use = "plane"
foil = "16 um"

[[lines]]
name = "stacked pair"
layer = "L3"
partner = "L4"
width = "100 um"
target = "100 ohm"
"""


def test_both_traces_of_a_broadside_pair_press_into_one_ply() -> None:
    scenario = parse(BROADSIDE)
    around = broadside_surroundings_of(scenario, scenario.lines[0])
    section = as_built(scenario.lines[0], around, NominalValues(nominals_of(scenario)))
    assert isinstance(section, LayeredSection)
    assert [float(part[0]) for part in section.thicknesses] == pytest.approx([100e-6, 30e-6, 150e-6, 18e-6, 120e-6])
    assert [float(dk[0]) for dk in section.dks] == pytest.approx([4.2, 3.1, 3.9, 3.1, 4.2])
    assert [(trace.layer, trace.foot_up) for trace in section.traces] == [(3, True), (1, False)]
    kinds = [region.kind for region in drawing_of(section, around, "L3").regions]
    assert kinds == ["core", "resin", "prepreg", "resin", "core"]


@pytest.mark.parametrize(("part", "text"), [
    ("dk = 4.2: not together with resin_dk", changed(BOARD, ("dk = 4.2", "dk = 4.2\nresin_dk = 3.1"))),
    ("resin_dk = 3.1: not a key of mask", changed(BOARD, ("dk = 3.5", "dk = 3.5\nresin_dk = 3.1"))),
    ("glass_dk: missing", changed(BAND, ("dk = 3.9\n", ""))),
    ("outflow = \"6 %\": only with resin_dk", changed(BAND, ("resin_dk", 'outflow = "6 %"\nresin_dk'))),
])
def test_what_cannot_be_is_told(part: str, text: str) -> None:
    told = messages(text)
    assert any(part in one for one in told), told


def test_an_extension_changes_either_dk_and_keeps_the_other(tmp_path: Path) -> None:
    (tmp_path / "base.toml").write_text(BAND)
    for given, expected in (("dk = 3.7", (3.7, 3.1)), ("resin_dk = 3.0", (3.9, 3.0))):
        path = tmp_path / "more.toml"
        path.write_text(f'format = 1\nextends = "base.toml"\n[[layers]]\nname = "P2"\n{given}\n')
        layer = load(path).layer("P2")
        assert (layer.dk, layer.resin_dk) == expected


def test_dk_instead_of_a_mixture_leaves_no_band(tmp_path: Path) -> None:
    mixture = 'resin_dk = 3.2\nglass_dk = 6.1\nresin_content = "64 %"\nglass_areal_weight = "203.4 g/m^2"'
    (tmp_path / "base.toml").write_text(changed(BOARD, ("dk = 3.9", mixture)))
    path = tmp_path / "more.toml"
    path.write_text('format = 1\nextends = "base.toml"\n[[layers]]\nname = "P2"\ndk = 3.8\n')
    layer = load(path).layer("P2")
    assert (layer.dk, layer.resin_dk) == (3.8, None)
