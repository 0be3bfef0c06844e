"""The figures: written whole, one family of looks, true to scale, and without touching anybody's plotting state."""

from __future__ import annotations

import re
import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.image import imread
from matplotlib.patches import PathPatch

from tests.report_examples import (
    made_up_line,
    made_up_result,
    many_lines,
    microstrip_drawing,
    share,
    some_drivers,
    stripline_drawing,
    trace,
)
from tolerance.arrays import read_only
from tolerance.errors import UnfinishedError
from tolerance.report.figures import FigureFormat, limits_page, line_page, overview_page, write_figures
from tolerance.report.looks import BODY, FAIL, FAIL_FILL, FAINT_INK, MATERIAL
from tolerance.report.plots import draw_drivers, draw_overview, draw_spread
from tolerance.report.section_plot import draw_section, stand_apart
from tolerance.results import Drawing, Driver, LineResult, Spread
from tolerance.sections.bands import bands_of

NOTHING_VARIES = replace(made_up_line("constant", drivers=()), spread=Spread(
    edges=read_only([50.2 - 1e-9, 50.2 + 1e-9]), counts=np.array([65536])))
EXTREMES = [
    made_up_line("none passes", mean=80.0), made_up_line("all pass", deviation=0.05), NOTHING_VARIES,
    made_up_line("many drivers", drivers=some_drivers(11, shapley=True)),
    made_up_line("$x_1^{ dollars $ \u7dda", limit=0.01),
    made_up_line("wide", drawing=microstrip_drawing(width=3e-3, height=1.5e-3)),
    made_up_line("flat", drawing=microstrip_drawing(width=900e-6, gap=800e-6, height=60e-6)),
    made_up_line("narrow pair between planes", drawing=stripline_drawing(width=60e-6, gap=50e-6)),
]


def words_on(axes: Axes) -> str:
    return " | ".join([*(text.get_text() for text in axes.texts), axes.get_title(loc="left"), axes.get_xlabel(),
                       axes.get_ylabel()])


def test_one_picture_for_each_line_and_one_of_all(tmp_path: Path) -> None:
    seen = []
    paths = write_figures(made_up_result(many_lines(3)), tmp_path / "figures", "um",
                          lambda step, done, total: seen.append((step, done, total)))
    assert [path.stem for path in paths] == [
        "all-lines", "yield-against-limit", "radio-feed-1", "display-pair-2", "memory-clock-3"]
    assert sorted(path.name for path in (tmp_path / "figures").iterdir()) == sorted(path.name for path in paths)
    for path in paths:
        picture = imread(path)
        assert picture.shape[1] >= 1590
        assert picture.shape[0] >= 890
        assert np.ptp(picture[:, :, :3]) > 0.8  # ink on paper
    assert seen[-1] == ("figures", 5, 5)


@pytest.mark.parametrize("line", EXTREMES, ids=lambda line: str(line.name))
def test_extremes_are_drawn_without_a_warning(line: LineResult, tmp_path: Path) -> None:
    paths = write_figures(made_up_result((line,)), tmp_path, "mil")
    assert all(path.stat().st_size > 10_000 for path in paths)


def test_the_same_result_gives_the_same_files(tmp_path: Path) -> None:
    one, other = (write_figures(made_up_result(), tmp_path / name, "um") for name in ("one", "other"))
    assert [path.read_bytes() for path in one] == [path.read_bytes() for path in other]


def test_nobodys_plotting_state_is_touched(tmp_path: Path) -> None:
    code = f"""
import sys
from pathlib import Path
import matplotlib
def settings():  # but for the backend: asking for it would choose one
    return {{key: matplotlib.rcParams[key] for key in matplotlib.rcParams if key != "backend"}}
before = settings()
from tests.report_examples import made_up_result
from tolerance.report.figures import write_figures
write_figures(made_up_result(), Path({str(tmp_path)!r}), "um")
print(settings() == before, "matplotlib.pyplot" in sys.modules)
"""
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.split() == ["True", "False"]


def test_every_plot_returns_the_axes_it_was_given_and_has_units() -> None:
    line, result = made_up_line(), made_up_result()
    plots: list[tuple[Callable[[Axes], Axes], tuple[str, ...]]] = [
        (lambda axes: draw_spread(axes, line, target_yield=0.99), ("impedance [ohm]", "coupons in each bin")),
        (lambda axes: draw_drivers(axes, line), ("share of the variance [%]",)),
        (lambda axes: draw_section(axes, line, lengths="um"), ("sideways [um]", "height [um]")),
        (lambda axes: draw_overview(axes, result, result.lines), ("[%]",)),
    ]
    for draw, units in plots:
        axes = Figure().add_subplot()
        assert draw(axes) is axes
        for unit in units:
            assert unit in words_on(axes)


def test_the_spread_counts_what_fails_on_either_side() -> None:
    axes = draw_spread(Figure().add_subplot(), made_up_line(), target_yield=0.99)
    words = words_on(axes)
    for part in ("1.01 %\nbelow", "1.90 %\nabove", "limit 46.5", "limit 53.5", "target 50", "mean 50.20"):
        assert part in words


def test_the_drivers_are_named_in_rank_and_the_rest_is_counted() -> None:
    axes = draw_drivers(Figure().add_subplot(), made_up_line(drivers=some_drivers(9)))
    words = words_on(axes)
    assert words.index("P1.thickness") < words.index("L1.etch") < words.index("P1.dk")
    assert "and 3 more, each at most" in words
    note = next(text for text in axes.texts if text.get_text().startswith("and 3 more"))
    assert note.get_verticalalignment() == "top"  # below the axis, where no name can run into it
    assert note.xyann[1] < 0.0  # type: ignore[attr-defined]
    few = (*some_drivers(6), Driver("C9.dk", share(0.0), share(0.00001)))
    assert "and 1 more, below 0.1 %" in words_on(draw_drivers(Figure().add_subplot(), made_up_line(drivers=few)))


def test_what_never_fails_is_not_told_in_the_colour_of_failing() -> None:
    for deviation, colour in ((0.05, FAINT_INK), (1.6, FAIL)):
        axes = draw_spread(Figure().add_subplot(), made_up_line(deviation=deviation), target_yield=0.99)
        tails = [text for text in axes.texts if text.get_text().endswith(("below", "above"))]
        assert len(tails) == 2
        assert {text.get_color() for text in tails} == {colour}


@pytest.mark.parametrize(("title", "cut"), [
    ("Weir", False), ("A board whose title has fifty-one letters, and no more", False), ("very " * 40 + "long", True)])
def test_a_title_is_made_smaller_before_it_is_cut_and_never_runs_into_the_yield(title: str, cut: bool) -> None:
    page = overview_page(made_up_result(title=title))
    canvas: Any = FigureCanvasAgg(page)  # its drawing is not typed
    words, answer = page.texts[2], page.texts[0]
    assert answer.get_text().startswith("yield")
    assert ("..." in words.get_text()) is cut
    renderer = canvas.get_renderer()
    assert words.get_window_extent(renderer).x1 < answer.get_window_extent(renderer).x0


@pytest.mark.parametrize("lines", [1, 20])
def test_the_yield_against_the_limit_is_drawn_for_every_line(lines: int) -> None:
    page = limits_page(made_up_result(many_lines(lines, long_names=True)))
    assert len(page.axes) == (1 if lines == 1 else lines + 1)  # and one of all together
    canvas: Any = FigureCanvasAgg(page)
    canvas.draw()
    for axes in page.axes:  # a name never runs into the next panel
        extent = axes.title.get_window_extent() if axes.get_title() else axes._left_title.get_window_extent()  # type: ignore[attr-defined]
        assert extent.x1 <= axes.get_window_extent().x1 + 1.0
    first = page.axes[-lines]
    needed = first.texts[0].get_text()
    assert re.fullmatch(r"99 % would pass at \d+\.\d+ %", needed)
    dots = [line for line in first.lines if line.get_marker() == "o"]
    assert [float(np.asarray(dot.get_xdata())[0]) for dot in dots] == pytest.approx([7.0])  # the limit of 7 %


@pytest.mark.parametrize(("figure_format", "start", "mark"), [("svg", b"<?xml", b"<svg"), ("pdf", b"%PDF-", b"%%EOF")])
def test_figures_as_curves_hold_no_date_and_are_the_same_each_time(
    figure_format: FigureFormat, start: bytes, mark: bytes, tmp_path: Path,
) -> None:
    folders = [tmp_path / "one", tmp_path / "other"]
    written = [write_figures(made_up_result(), folder, "um", figure_format=figure_format) for folder in folders]
    assert [path.name for path in written[0]] == [
        f"{name}.{figure_format}" for name in ("all-lines", "yield-against-limit", "radio-feed")]
    contents = [[path.read_bytes() for path in paths] for paths in written]
    assert contents[0] == contents[1]
    for content in contents[0]:
        assert content.startswith(start)
        assert mark in content
        assert b"date>" not in content
        assert b"CreationDate" not in content


@pytest.mark.parametrize("line", EXTREMES[5:], ids=lambda line: str(line.name))
def test_the_section_is_to_scale_and_shows_all_of_its_height(line: LineResult) -> None:
    page = line_page(line, target_yield=0.99, lengths="um")
    axes = page.axes[2]
    box = axes.get_window_extent()
    (left, right), (bottom, top) = axes.get_xlim(), axes.get_ylim()
    assert box.width / (right - left) == pytest.approx(box.height / (top - bottom), rel=1e-3)
    corners = np.vstack([region.outline for region in line.drawing.regions]) * 1e6
    assert bottom <= corners[:, 1].min()
    assert corners[:, 1].max() <= top
    for conductor in line.drawing.conductors:
        if conductor.role == "trace":
            assert left < 1e6 * conductor.outline[:, 0].min()
            assert 1e6 * conductor.outline[:, 0].max() < right


def test_the_section_names_its_materials_and_main_dimensions() -> None:
    pair = made_up_line(drawing=microstrip_drawing(width=120e-6, gap=150e-6))
    words = words_on(line_page(pair, target_yield=0.99, lengths="um").axes[2])
    for part in ("top mask, Dk 3.50", "P1, prepreg, Dk 4.00", "L2, plane", "width 120 um", "gap 150 um", "100 um",
                 "43 um", "15 um"):
        assert part in words
    in_mil = words_on(line_page(pair, target_yield=0.99, lengths="mil").axes[2])
    assert "width 4.72 mil" in in_mil  # 120 / 25.4
    assert "gap 5.91 mil" in in_mil  # 150 / 25.4


def test_a_ply_that_fills_absent_copper_shows_both_heights() -> None:
    plain = microstrip_drawing(height=115e-6)
    filling = replace(plain, regions=(plain.regions[0], replace(plain.regions[1], filled=15e-6)))
    words = words_on(line_page(made_up_line(drawing=filling), target_yield=0.99, lengths="um").axes[2])
    assert "| 100 + 15 um" in words
    assert "after a +: height of absent copper, filled" in words
    assert "filled" not in words_on(line_page(made_up_line(drawing=plain), target_yield=0.99, lengths="um").axes[2])


def test_bands_are_told_and_drawn_where_there_are_any() -> None:
    bands = bands_of(microstrip_drawing(), [microstrip_drawing(height=90e-6), microstrip_drawing(width=190e-6)])
    line = made_up_line(drawing=replace(microstrip_drawing(), bands=bands))
    for one, told in ((line, 1), (made_up_line(), 0)):
        axes = line_page(one, target_yield=0.99, lengths="um").axes[2]
        assert words_on(axes).count("each tolerance alone") == told
        assert sum(isinstance(patch, PathPatch) for patch in axes.patches) == told


def test_a_broadside_pair_is_named_by_both_its_layers() -> None:
    drawing = microstrip_drawing()
    both = replace(drawing, conductors=(*drawing.conductors, trace(0.0, 180e-6, 150e-6, 0.2e-3, 0.243e-3, "L4")))
    words = [text.get_text() for text in line_page(made_up_line(drawing=both), target_yield=0.99, lengths="um").texts]
    assert any("L1 and L4, reference L2" in text for text in words)


def test_a_section_on_the_bottom_shows_the_same_heights_as_on_the_top() -> None:
    top = microstrip_drawing()
    bottom = Drawing(
        tuple(replace(region, outline=read_only(region.outline * [1.0, -1.0])) for region in top.regions),
        tuple(replace(part, outline=read_only(part.outline * [1.0, -1.0])) for part in top.conductors))
    for drawing in (top, bottom):
        words = words_on(line_page(made_up_line(drawing=drawing), target_yield=0.99, lengths="um").axes[2])
        for part in ("| 15 um", "| 43 um", "| 100 um", "width 180 um"):
            assert part in words


def test_the_heading_says_yield_interval_and_verdict() -> None:
    words = " ".join(text.get_text() for text in line_page(made_up_line(), target_yield=0.99, lengths="um").texts)
    for part in ("radio feed", "yield 97.08 %", "[97.00, 97.16] %", "MISSES the target of 99 %"):
        assert part in words
    assert "seed 1" in " ".join(text.get_text() for text in overview_page(made_up_result()).texts)


def test_a_spread_outside_the_picture_is_told_of() -> None:
    lines = (made_up_line(), made_up_line("none passes", mean=90.0))
    axes = draw_overview(Figure().add_subplot(), made_up_result(lines), lines)
    assert "all beyond: mean +80 %" in words_on(axes)  # 90 against a target of 50


def test_what_must_be_told_apart_differs_in_grey() -> None:
    """Luma by ITU-R BT.601 (0.299, 0.587, 0.114), the weights that grey printing of sRGB commonly uses."""
    def luma(colour: str) -> float:
        red, green, blue = (int(colour[start:start + 2], 16) / 255.0 for start in (1, 3, 5))
        return 0.299 * red + 0.587 * green + 0.114 * blue

    assert abs(luma(BODY) - luma(FAIL_FILL)) > 0.1
    assert abs(luma(MATERIAL["mask"]) - luma(MATERIAL["prepreg"])) > 0.1


def test_labels_stand_apart_and_keep_their_order() -> None:
    places = stand_apart([0.0, 0.1, 0.2, 5.0], 1.0)
    assert np.all(np.diff(places) >= 1.0 - 1e-12)
    assert places[3] == 5.0
    assert np.mean(places[:3]) == pytest.approx(0.1)  # moved about their own middle: least squares


def test_figures_that_cannot_be_written_say_why(tmp_path: Path) -> None:
    (tmp_path / "figures").touch()  # a file stands where the folder should go
    with pytest.raises(UnfinishedError, match="figures"):
        write_figures(made_up_result(), tmp_path / "figures", "um")
