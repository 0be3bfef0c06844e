"""From the stackup and a draw of the process to the as-built cross-section.

Expected lengths follow by arithmetic from the scenario format's definitions (cross-section conventions).
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
import pytest

from tests.scenario_texts import HEAD, SIX_LAYERS
from tolerance.arrays import FloatArray
from tolerance.errors import ScenarioError
from tolerance.process.values import NominalValues, nominals_of
from tolerance.scenario import Scenario, parse
from tolerance.sections.as_built import as_built
from tolerance.sections.drawing import drawing_of
from tolerance.sections.layered import LayeredSection
from tolerance.sections.section import Section
from tolerance.sections.surroundings import broadside_surroundings_of, properties_that_reach, surroundings_of

UM = 1e-6
FEED = '[[lines]]\nname = "feed"\nlayer = "L1"\nwidth = "180 um"\ntarget = "50 ohm"\n'
PAIR = '[[lines]]\nname = "pair"\nlayer = "L3"\nwidth = "100 um"\ngap = "150 um"\ntarget = "100 ohm"\n'

TEN_LAYERS = """
[[layers]]
name = "L1"
kind = "copper"
use = "signal"
foil = "12 um"
plating = "25 um"

[[layers]]
name = "P1"
kind = "prepreg"
thickness = "80 um"
dk = 3.8

[[layers]]
name = "L2"
kind = "copper"
use = "signal"
foil = "15 um"

[[layers]]
name = "C1"
kind = "core"
thickness = "100 um"
dk = 4.2

[[layers]]
name = "L3"
kind = "copper"
use = "signal"
foil = "17 um"

[[layers]]
name = "P2"
kind = "prepreg"
thickness = "90 um"
dk = 3.9

[[layers]]
name = "L4"
kind = "copper"
use = "plane"
foil = "30 um"
"""


@dataclass(frozen=True)
class Draws:
    """Process values of two coupons: the nominals, and what a test sets for the second."""

    scenario: Scenario
    second: dict[str, float]
    etched: dict[str, float] = field(default_factory=dict)

    def value(self, name: str) -> FloatArray:
        nominal = nominals_of(self.scenario)[name]
        return np.array([nominal, self.second.get(name, nominal)])

    def etch(self, layer: str, *, width: float) -> FloatArray:  # noqa: ARG002
        return np.array([0.0, self.etched.get(layer, 0.0)])


def section_of(scenario: Scenario, second: dict[str, float] | None = None, **etched: float) -> Section:
    line = scenario.lines[0]
    section = as_built(line, surroundings_of(scenario, line), Draws(scenario, second or {}, etched))
    assert isinstance(section, Section)
    return section


def test_foot_and_crest_follow_etch_copper_and_etch_factor() -> None:
    section = section_of(parse(HEAD + SIX_LAYERS + FEED), {"L1.plating": 31 * UM, "L1.etch_factor": 2.5}, L1=6 * UM)
    assert section.thickness == pytest.approx([43 * UM, 49 * UM], rel=1e-12)
    assert section.foot_width == pytest.approx([180 * UM, 186 * UM], rel=1e-12)
    assert section.crest_width == pytest.approx([(180 - 2 * 43 / 3) * UM, (186 - 2 * 49 / 2.5) * UM], rel=1e-12)


def test_the_artwork_holds_the_pitch_of_a_pair() -> None:
    section = section_of(parse(HEAD + SIX_LAYERS + PAIR), L3=-7 * UM)
    assert section.gap is not None
    assert section.foot_width + section.gap == pytest.approx(250 * UM, rel=1e-12)
    assert section.gap[1] == pytest.approx(157 * UM, rel=1e-12)


def test_the_foot_stands_on_the_core_and_planes_end_both_sides() -> None:
    scenario = parse(HEAD + SIX_LAYERS + PAIR)
    around = surroundings_of(scenario, scenario.lines[0])
    assert around.foot_up
    assert around.references == ("L2", "L4")
    section = section_of(scenario, {"C1.thickness": 110 * UM, "P2.dk": 3.7})
    assert [ply.name for ply in section.foot_side] == ["C1"]
    assert [ply.name for ply in section.crest_side] == ["P2"]
    assert section.foot_side[0].thickness == pytest.approx([120 * UM, 110 * UM])
    assert section.crest_side[0].dk == pytest.approx([3.9, 3.7])
    assert section.foot_plane
    assert section.crest_plane


def test_the_mask_follows_an_outer_trace() -> None:
    section = section_of(parse(HEAD + SIX_LAYERS + FEED), {"top mask.over_copper": 9 * UM})
    assert section.mask is not None
    assert section.mask.on_laminate == pytest.approx([25 * UM, 25 * UM])
    assert section.mask.over_copper == pytest.approx([15 * UM, 9 * UM])
    assert section.crest_side == ()
    assert not section.crest_plane


def test_absent_copper_is_filled_by_the_prepreg_that_presses_into_it() -> None:
    line = '[[lines]]\nname = "deep"\nlayer = "L3"\nwidth = "100 um"\ntarget = "50 ohm"\n'
    scenario = parse(HEAD + TEN_LAYERS + line)
    around = surroundings_of(scenario, scenario.lines[0])
    assert around.references == ("L4",)
    section = section_of(scenario, {"L2.foil": 18 * UM})
    assert [ply.name for ply in section.foot_side] == ["C1", "P1"]
    assert section.foot_side[0].thickness == pytest.approx([100 * UM, 100 * UM])
    assert section.foot_side[1].thickness == pytest.approx([95 * UM, 98 * UM]), "the height of L2; outer L1 is absent"
    assert "L2.foil" in properties_that_reach(around, scenario.lines[0])
    assert "L1.foil" not in properties_that_reach(around, scenario.lines[0])


def test_a_line_without_mask_or_cover_is_bare() -> None:
    line = '[[lines]]\nname = "top"\nlayer = "L1"\nwidth = "100 um"\ntarget = "50 ohm"\n'
    section = section_of(parse(HEAD + TEN_LAYERS + line))
    assert section.mask is None
    assert section.crest_side == ()
    assert [ply.thickness[0] for ply in section.foot_side] == pytest.approx([95 * UM, 100 * UM, 107 * UM])


@pytest.mark.parametrize(("second", "etched"), [
    ({"L1.plating": -20 * UM}, 0.0),
    ({}, -181 * UM),
    ({"L1.etch_factor": 0.4}, 0.0),
    ({"L1.etch_factor": -1.0}, 0.0),
    ({"P1.thickness": 0.0}, 0.0),
    ({"top mask.over_copper": -1 * UM}, 0.0),
])
def test_a_section_that_cannot_exist_is_told(second: dict[str, float], etched: float) -> None:
    section = section_of(parse(HEAD + SIX_LAYERS + FEED), second, L1=etched)
    assert section.possible.tolist() == [True, False]


def test_a_closed_gap_cannot_exist() -> None:
    section = section_of(parse(HEAD + SIX_LAYERS + PAIR), L3=150 * UM)
    assert section.possible.tolist() == [True, False]


def test_rows_pick_sections() -> None:
    section = section_of(parse(HEAD + SIX_LAYERS + FEED), {"P1.dk": 4.4}, L1=6 * UM).rows(np.array([1]))
    assert section.count == 1
    assert section.foot_width == pytest.approx([186 * UM])
    assert section.foot_side[0].dk == pytest.approx([4.4])


@pytest.mark.parametrize("line", [FEED, PAIR])
def test_the_drawing_shows_the_section_to_scale(line: str) -> None:
    scenario = parse(HEAD + SIX_LAYERS + line)
    around = surroundings_of(scenario, scenario.lines[0])
    section = as_built(scenario.lines[0], around, NominalValues(nominals_of(scenario)))
    assert isinstance(section, Section)
    drawing = drawing_of(section, around, scenario.lines[0].layer)
    traces = [part.outline for part in drawing.conductors if part.role == "trace"]
    assert len(traces) == (2 if "gap" in line else 1)
    for outline in traces:
        assert np.ptp(outline[:, 0]) == pytest.approx(section.foot_width[0])
        assert np.ptp(outline[:, 1]) == pytest.approx(section.thickness[0])
        foot_at = outline[:, 1].max() if around.foot_up else outline[:, 1].min()
        widths = [np.ptp(outline[outline[:, 1] == height, 0]) for height in np.unique(outline[:, 1])]
        assert max(widths) == pytest.approx(np.ptp(outline[outline[:, 1] == foot_at, 0])), "the foot is the wider face"
    assert {part.name for part in drawing.conductors if part.role == "plane"} == set(around.references)


def test_grounded_copper_keeps_its_distance_from_the_middle_of_the_line() -> None:
    section = section_of(parse(HEAD + SIX_LAYERS + FEED + 'ground_gap = "200 um"\n'), L1=6 * UM)
    assert section.ground_gap is not None
    middle_to_ground = 0.5 * section.foot_width + section.ground_gap
    assert section.ground_gap[1] == pytest.approx((200 - 6) * UM), "held by the artwork, as the pitch of a pair is"
    assert np.diff(middle_to_ground)[0] == pytest.approx((3 - 6) * UM)


BROADSIDE = """
[[layers]]
name = "L1"
kind = "copper"
use = "plane"
foil = "30 um"

[[layers]]
name = "P1"
kind = "prepreg"
thickness = "150 um"
dk = 3.8

[[layers]]
name = "L2"
kind = "copper"
use = "signal"
foil = "15 um"
etch_factor = 3.0

[[layers]]
name = "C1"
kind = "core"
thickness = "100 um"
dk = 4.2

[[layers]]
name = "L3"
kind = "copper"
use = "signal"
foil = "17 um"

[[layers]]
name = "P2"
kind = "prepreg"
thickness = "180 um"
dk = 3.6

[[layers]]
name = "L4"
kind = "copper"
use = "plane"
foil = "30 um"

[[lines]]
name = "broadside"
layer = "L2"
partner = "L3"
offset = "20 um"
width = "100 um"
target = "75 ohm"
"""


def test_a_broadside_pair_lies_in_the_prepregs_that_press_into_it() -> None:
    scenario = parse(HEAD + BROADSIDE)
    line = scenario.lines[0]
    around = broadside_surroundings_of(scenario, line)
    assert around.references == ("L1", "L4")
    section = as_built(line, around, Draws(scenario, {"L3.registration": 12 * UM, "L2.registration": -5 * UM,
                                                      "L2.foil": 18 * UM}))
    assert isinstance(section, LayeredSection)
    assert section.names == ("P2", "C1", "P1")
    assert section.thicknesses[0] == pytest.approx([197 * UM, 197 * UM])
    assert section.thicknesses[1] == pytest.approx([100 * UM, 100 * UM])
    assert section.thicknesses[2] == pytest.approx([165 * UM, 168 * UM])
    upper, lower = section.traces
    assert (upper.layer, upper.foot_up, lower.layer, lower.foot_up) == (2, False, 0, True)
    assert lower.centre - upper.centre == pytest.approx([20 * UM, 37 * UM])
    assert upper.crest_width == pytest.approx([(100 - 2 * 15 / 3) * UM, (100 - 2 * 18 / 3) * UM])
    assert {"L2.registration", "L3.etch", "P2.dk", "C1.thickness"} <= properties_that_reach(around, line)


def test_a_broadside_pair_under_mask_is_refused() -> None:
    mask = '[[layers]]\nname = "top mask"\nkind = "mask"\nthickness = "25 um"\nover_copper = "15 um"\ndk = 3.5\n'
    bare = BROADSIDE[BROADSIDE.index('[[layers]]\nname = "L2"'):]
    scenario = parse(HEAD + bare)
    line = scenario.lines[0]
    section = as_built(line, broadside_surroundings_of(scenario, line), NominalValues(nominals_of(scenario)))
    assert isinstance(section, LayeredSection)
    assert section.kinds[-1] == "air", "a bare outer trace stands in air"
    with pytest.raises(ScenarioError, match="under solder mask"):
        parse(HEAD + mask + bare)
