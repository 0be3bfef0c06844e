"""Bands on the edges of a section, and plies that fill absent copper: by arithmetic from what the scenario says."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from tests.report_examples import microstrip_drawing, stripline_drawing
from tests.scenario_texts import HEAD, LINES, SIX_LAYERS, VARIATIONS, changed
from tolerance.arrays import FloatArray, read_only
from tolerance.results import Drawing
from tolerance.scenario import parse
from tolerance.sections.bands import bands_of
from tolerance.study.run import run

UM = 1e-6


def extents(bands: tuple[FloatArray, ...]) -> set[tuple[float, ...]]:
    """Left, right, bottom and top of each band [um]."""
    return {tuple(np.round([band[:, 0].min(), band[:, 0].max(), band[:, 1].min(), band[:, 1].max()], 12) / UM)
            for band in bands}


def has(bands: tuple[FloatArray, ...], *, left: float, right: float, bottom: float, top: float) -> bool:
    return any(extent == pytest.approx((left, right, bottom, top), abs=1e-3) for extent in extents(bands))


def test_a_width_that_moves_moves_the_sides_of_the_trace_and_a_height_the_face_of_the_plane() -> None:
    nominal = microstrip_drawing(width=180 * UM, height=100 * UM)
    bands = bands_of(nominal, [microstrip_drawing(width=width * UM, height=height * UM)
                               for width, height in ((170, 100), (190, 100), (180, 92), (180, 110))])
    assert has(bands, left=-4000.0, right=4000.0, bottom=-110.0, top=-92.0)
    # the foot edge at 90 goes from 85 to 95, the crest edge, 14.5 further in, from 70.5 to 80.5
    assert has(bands, left=70.5, right=95.0, bottom=0.0, top=43.0)
    assert has(bands, left=-95.0, right=-70.5, bottom=0.0, top=43.0)
    assert not any(right - left > 5000.0 and bottom <= 0.0 <= top  # the foot of the trace stays where it is
                   for left, right, bottom, top in extents(bands))


def test_bands_run_one_way_round_so_that_they_join_and_none_stands_where_nothing_moves() -> None:
    nominal = stripline_drawing()
    bands = bands_of(nominal, [stripline_drawing(width=130 * UM), stripline_drawing(width=90 * UM)])
    assert len(bands) == 2
    for band in bands:
        following = np.roll(band, -1, axis=0)
        assert np.sum(band[:, 0] * following[:, 1] - following[:, 0] * band[:, 1]) > 0.0  # shoelace formula
    assert bands_of(nominal, [nominal]) == ()


def test_heights_are_counted_from_the_foot_of_the_first_trace_and_other_outlines_are_left_out() -> None:
    nominal = stripline_drawing()
    lifted = Drawing(
        tuple(replace(part, outline=read_only(part.outline + np.array([0.0, 7 * UM]))) for part in nominal.regions),
        tuple(replace(part, outline=read_only(part.outline + np.array([0.0, 7 * UM]))) for part in nominal.conductors))
    assert bands_of(nominal, [lifted, microstrip_drawing()]) == ()


@pytest.fixture(scope="module")
def drawings() -> list[Drawing]:
    """A feed over L4, with L2 and L3 absent under it, and a pair between L2 and L4."""
    lines = changed(LINES, ('target = "50 ohm"', 'target = "50 ohm"\nreferences = ["L4"]'))
    return [line.drawing for line in run(parse(HEAD + SIX_LAYERS + lines + VARIATIONS), coupons=256).lines]


def test_a_run_draws_three_deviations_of_each_tolerance(drawings: list[Drawing]) -> None:
    feed, pair = drawings
    # L1.etch: 10 % of 180 um between both edges; crest 2 * 43 / 3 narrower than the foot
    assert has(feed.bands, left=90.0 - 43.0 / 3.0 - 9.0, right=99.0, bottom=0.0, top=43.0)
    # L3.etch: 10 % of 100 um; the pair's outer foot edge at 75 + 100, its foot up or down
    outer = [extent for extent in extents(pair.bands) if extent[1] == pytest.approx(175.0 + 5.0)]
    assert len(outer) == 1
    heights = sorted({round(bottom) for _, _, bottom, _ in extents(feed.bands)})
    # P1.thickness: 100 +- 10 um; what lies under it goes with it: 16 um of L2 and of L3 are filled
    assert heights[0] == pytest.approx(-(100 + 16 + 120 + 16 + 300) - 10, abs=1)


def test_plies_that_fill_absent_copper_say_so(drawings: list[Drawing]) -> None:
    feed, pair = drawings
    assert sum(region.filled for region in feed.regions) == pytest.approx(32 * UM)  # foils of L2 and L3
    assert all(region.filled == 0.0 for region in pair.regions)
