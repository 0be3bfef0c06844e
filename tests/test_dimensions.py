"""The dimensions that predictions are fitted in: what is merged, what is left out, and that nothing is forgotten."""

from __future__ import annotations

from dataclasses import fields, replace
from typing import Any

import numpy as np
import pytest

from tolerance.arrays import FloatArray
from tolerance.sections.dimensions import dimensions_like
from tolerance.sections.layered import LayeredSection, PlacedTrace
from tolerance.sections.section import Mask, Ply, Section

COUNT = 5


def around(value: float, seed: int) -> FloatArray:
    return value * np.random.default_rng(seed).uniform(0.9, 1.1, COUNT)


DK = around(4.0, 9)
PAIR = Section(
    foot_width=around(120e-6, 1), crest_width=around(100e-6, 2), thickness=around(40e-6, 3), gap=around(150e-6, 4),
    foot_side=(Ply(around(60e-6, 5), DK), Ply(around(50e-6, 6), DK), Ply(around(200e-6, 7), around(4.2, 8))),
    foot_plane=True, crest_side=(), crest_plane=False,
    mask=Mask(around(25e-6, 10), around(15e-6, 11), around(3.5, 12)), ground_gap=around(300e-6, 13),
    band_dk=around(3.2, 14),
)
NOT_A_DIMENSION = {"foot_plane", "crest_plane", "crest_side", "metals"}  # metals do not vary


def stretched(section: Section, factor: float) -> Section:
    mask = section.mask
    assert mask is not None
    assert section.gap is not None
    assert section.ground_gap is not None
    return replace(
        section, foot_width=factor * section.foot_width, crest_width=factor * section.crest_width,
        thickness=factor * section.thickness, gap=factor * section.gap, ground_gap=factor * section.ground_gap,
        foot_side=tuple(Ply(factor * ply.thickness, ply.dk) for ply in section.foot_side),
        mask=Mask(factor * mask.on_laminate, factor * mask.over_copper, mask.dk),
    )


def test_neighbouring_plies_that_always_have_one_dk_are_one() -> None:
    seen = dimensions_like(PAIR)
    assert seen.sides == (((0, 1), (2,)), ())
    one, two, three = PAIR.foot_side
    same = replace(PAIR, foot_side=(Ply(one.thickness + 7e-6, DK), Ply(two.thickness - 7e-6, DK), three))
    assert seen.logarithms(same) == pytest.approx(seen.logarithms(PAIR), abs=1e-13)


def test_the_scale_of_all_lengths_does_not_show_without_loss_and_does_with_it() -> None:
    free, bound = (dimensions_like(PAIR, scale_free=scale_free) for scale_free in (True, False))
    assert free.logarithms(stretched(PAIR, 3.0)) == pytest.approx(free.logarithms(PAIR), abs=1e-12)
    assert np.max(np.abs(bound.logarithms(stretched(PAIR, 3.0)) - bound.logarithms(PAIR))) == pytest.approx(np.log(3))


@pytest.mark.parametrize("name", [each.name for each in fields(Section) if each.name not in NOT_A_DIMENSION])
def test_every_part_of_a_section_shows(name: str) -> None:
    """A field that is added to sections and forgotten here fails this test."""
    value = getattr(PAIR, name)
    changes: list[Any]
    if isinstance(value, Mask):
        changes = [replace(value, **{part: 1.1 * getattr(value, part)})
                   for part in ("on_laminate", "over_copper", "dk")]
    elif isinstance(value, tuple):
        changes = [(*value[:2], replace(value[2], **{part: 1.1 * getattr(value[2], part)}))
                   for part in ("thickness", "dk")]
    else:
        changes = [1.1 * value]
    seen = dimensions_like(PAIR)
    for changed in changes:
        moved = seen.logarithms(replace(PAIR, **{name: changed})) - seen.logarithms(PAIR)
        assert np.max(np.abs(moved)) > 0.02  # a tenth of the mask is less of the outline that it makes


def test_loss_tangents_show_where_there_is_a_frequency_and_part_plies_of_one_dk() -> None:
    dfs = [around(0.02, seed) for seed in (30, 31, 32)]
    plies = tuple(replace(ply, df=df) for ply, df in zip(PAIR.foot_side, dfs, strict=True))
    assert PAIR.mask is not None
    lossy = replace(PAIR, foot_side=plies, mask=replace(PAIR.mask, df=around(0.03, 33)))
    seen = dimensions_like(lossy, scale_free=False)
    assert seen.sides == (((0,), (1,), (2,)), ())
    alike = replace(lossy, foot_side=(plies[0], replace(plies[1], df=dfs[0]), plies[2]))
    assert dimensions_like(alike).sides == (((0, 1), (2,)), ())
    elsewhere = replace(alike, foot_side=(plies[0], replace(plies[1], df=dfs[0], dk_frequency=1e9), plies[2]))
    assert dimensions_like(elsewhere).sides == (((0,), (1,), (2,)), ())
    for number in range(3):
        changed = replace(lossy, foot_side=tuple(
            replace(ply, df=1.2 * dfs[at]) if at == number else ply for at, ply in enumerate(plies)))
        moved = seen.logarithms(changed) - seen.logarithms(lossy)
        assert np.count_nonzero(np.max(np.abs(moved), axis=1) > 0.01) == 1


def test_a_broadside_pair_is_seen_with_how_far_its_traces_lie_apart() -> None:
    trace = PlacedTrace(1, False, around(100e-6, 1), around(90e-6, 2), around(18e-6, 3), np.zeros(COUNT))
    plies = tuple(around(100e-6, seed) for seed in range(4))
    pair = LayeredSection(plies, tuple(around(4.0, 20 + seed) for seed in range(4)), True, True,
                          (trace, replace(trace, layer=3, centre=np.linspace(-10e-6, 10e-6, COUNT))))
    seen = dimensions_like(pair)
    assert len(seen.logarithms(pair)) == 6 + 4 + 4 + 1
    apart = np.linspace(-10e-6, 10e-6, COUNT)
    straight = trace.foot_width + plies[2]
    assert seen.logarithms(pair)[-1] == pytest.approx(np.log(np.hypot(straight, apart) / straight))


def test_a_broadside_pair_is_the_same_whichever_trace_lies_to_the_left() -> None:
    trace = PlacedTrace(1, False, around(100e-6, 1), around(90e-6, 2), around(18e-6, 3), np.zeros(COUNT))
    plies = tuple(around(100e-6, seed) for seed in range(4))
    right, left = (LayeredSection(plies, tuple(around(4.0, 20 + seed) for seed in range(4)), True, True,
                                  (trace, replace(trace, layer=3, centre=np.full(COUNT, way * 40e-6))))
                   for way in (1.0, -1.0))
    assert dimensions_like(right).logarithms(right) == pytest.approx(dimensions_like(left).logarithms(left), abs=1e-15)
