"""The cross-section of a line to scale, with what it is made of and its main dimensions.

Outlines that reach the sides of a drawing go on in truth, so they are drawn to the edge of the view, which is cut to
the surroundings of the traces.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.patches import PathPatch, Polygon
from matplotlib.path import Path
from matplotlib.ticker import MaxNLocator

from tolerance.report.looks import (
    AIR,
    BAND,
    BAND_OPACITY,
    COPPER,
    CORE_GRAIN,
    FAINT_INK,
    INK,
    MATERIAL,
    MOST_STEPS,
    PAPER,
    SMALL,
)
from tolerance.report.wording import METRES_IN, LengthUnit, fixed, length_text, shorten

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.axes import Axes

    from tolerance.arrays import FloatArray
    from tolerance.results import Conductor, Drawing, LineResult

ROOM_SIDEWAYS = 1.6  # view over the width of what the line consists of
ROOM_UPRIGHT = 1.16  # view over the height of the section
LETTER_WIDTH = 0.56  # of the letter size, on average
ROW_HEIGHT = 1.35  # of the letter size
LABEL_WIDTH = 32
MATERIAL_NAME = {"mask": "mask", "prepreg": "prepreg", "core": "core", "resin": "resin"}


@dataclass(frozen=True, slots=True)
class View:
    """What part of a section is seen [m], and how large it is drawn."""

    left: float
    right: float
    bottom: float
    top: float
    points_per_metre: float

    def metres(self, points: float) -> float:
        """How long so many printer's points are in the section."""
        return points / self.points_per_metre


def draw_section(axes: Axes, line: LineResult, *, lengths: LengthUnit) -> Axes:
    """The nominal cross-section of one line: dielectrics with their Dk, copper, dimensions; equal scales."""
    drawing, unit = line.drawing, METRES_IN[lengths]
    view = view_of(drawing, axes)
    axes.set_facecolor(AIR)
    for region in drawing.regions:
        outline = _reaching(region.outline, drawing, view) / unit
        axes.add_patch(Polygon(outline, closed=True, facecolor=MATERIAL[region.kind], edgecolor=FAINT_INK,
                               linewidth=0.8))
        if region.kind == "core":
            axes.add_patch(Polygon(outline, closed=True, fill=False, edgecolor=CORE_GRAIN, linewidth=0.0, hatch="."))
    for conductor in drawing.conductors:
        axes.add_patch(Polygon(_reaching(conductor.outline, drawing, view) / unit, closed=True,
                               facecolor=COPPER[conductor.role], edgecolor=INK, linewidth=0.8))
    if drawing.bands:  # as one path, so that they are no darker where they overlap
        corners = [_reaching(band, drawing, view) / unit for band in drawing.bands]
        bands = Path.make_compound_path(*(Path(np.vstack([band, band[:1]]), closed=True) for band in corners))
        axes.add_patch(PathPatch(bands, facecolor=BAND, edgecolor="none", alpha=BAND_OPACITY, zorder=3))
    axes.set_xlim(view.left / unit, view.right / unit)
    axes.set_ylim(view.bottom / unit, view.top / unit)
    axes.set_aspect("equal", adjustable="box")
    axes.set(xlabel=f"sideways [{lengths}]", ylabel=f"height [{lengths}]")
    axes.xaxis.set_major_locator(MaxNLocator(MOST_STEPS, steps=[1, 2, 5, 10]))
    axes.yaxis.set_major_locator(MaxNLocator(4, steps=[1, 2, 5, 10]))
    axes.set_title("cross-section at the nominals, to scale")
    _remark(axes, drawing)
    _name_materials(axes, drawing, view, lengths)
    words_begin = _mark_widths(axes, drawing, view, lengths)
    _mark_heights(axes, drawing, view, lengths, right=words_begin - view.metres(14.0))
    return axes


def _remark(axes: Axes, drawing: Drawing) -> None:
    """A few faint words at the ends of the title's row and of the axis' row, on what needs to be told."""
    told = []
    if drawing.bands:
        told.append(("bands: each tolerance alone, 99.7 % of coupons", 1.0, 11, "bottom"))
    if any(region.filled > 0.0 for region in drawing.regions):
        told.append(("after a +: height of absent copper, filled", 0.0, -24, "top"))
    for words, height, offset, side in told:
        axes.annotate(words, (1.0, height), xycoords="axes fraction", xytext=(0, offset), textcoords="offset points",
                      ha="right", va=side, fontsize=SMALL, color=FAINT_INK)


def view_of(drawing: Drawing, axes: Axes) -> View:
    """The part of the section that the axes show: all of its height, sideways the traces and their surroundings."""
    box = axes.get_position()
    figure = axes.get_figure(root=True)
    assert figure is not None
    wide, high = (72.0 * box.width * figure.get_figwidth(), 72.0 * box.height * figure.get_figheight())
    corners = _corners(drawing)
    bottom, top = float(corners[:, 1].min()), float(corners[:, 1].max())
    inner = np.concatenate([_sides(conductor) for conductor in _traces(drawing)] + [_inner_edges(drawing)])
    middle, extent = 0.5 * float(inner.min() + inner.max()), float(inner.max() - inner.min())
    height = max(ROOM_UPRIGHT * (top - bottom), ROOM_SIDEWAYS * extent * high / wide)
    width, centre = height * wide / high, 0.5 * (bottom + top)
    return View(middle - width / 2, middle + width / 2, centre - height / 2, centre + height / 2, high / height)


def _corners(drawing: Drawing) -> FloatArray:
    """All corners of all outlines, shape (corners, 2)."""
    return np.vstack([region.outline for region in drawing.regions]
                     + [conductor.outline for conductor in drawing.conductors])


def _traces(drawing: Drawing) -> list[Conductor]:
    return [conductor for conductor in drawing.conductors if conductor.role == "trace"]


def _sides(conductor: Conductor) -> FloatArray:
    xs = conductor.outline[:, 0]
    return np.array([xs.min(), xs.max()])


def _inner_edges(drawing: Drawing) -> FloatArray:
    """Where coplanar grounds begin, each on its side of the traces."""
    middle = np.mean([_sides(conductor).mean() for conductor in _traces(drawing)])
    edges = [_sides(conductor) for conductor in drawing.conductors if conductor.role == "ground"]
    return np.array([side[1] if side.mean() < middle else side[0] for side in edges])


def _reaching(outline: FloatArray, drawing: Drawing, view: View) -> FloatArray:
    """The outline, its outermost corners drawn out to the edge of the view."""
    xs = _corners(drawing)[:, 0]
    reached = outline.copy()
    reached[outline[:, 0] <= xs.min(), 0] = min(float(xs.min()), view.left)
    reached[outline[:, 0] >= xs.max(), 0] = max(float(xs.max()), view.right)
    return reached


def _range_at(outline: FloatArray, x: float) -> tuple[float, float] | None:
    """Lowest and highest point of an outline on the upright line through x; None where they do not meet."""
    start, end = outline, np.roll(outline, -1, axis=0)
    crosses = (np.minimum(start[:, 0], end[:, 0]) <= x) & (x <= np.maximum(start[:, 0], end[:, 0])) \
        & (start[:, 0] != end[:, 0])
    if not crosses.any():
        return None
    start, end = start[crosses], end[crosses]
    ys = start[:, 1] + (x - start[:, 0]) / (end[:, 0] - start[:, 0]) * (end[:, 1] - start[:, 1])
    return float(ys.min()), float(ys.max())


def stand_apart(positions: Sequence[float], spacing: float) -> list[float]:
    """Rising positions moved as little as needed to stand at least `spacing` apart."""
    groups: list[tuple[float, int]] = []  # sum and count of neighbours that stand as close as they may
    for place, position in enumerate(positions):
        groups.append((position - spacing * place, 1))
        while len(groups) > 1 and groups[-2][0] / groups[-2][1] > groups[-1][0] / groups[-1][1]:
            total, count = groups.pop()
            groups[-1] = (groups[-1][0] + total, groups[-1][1] + count)
    level = [total / count for total, count in groups for _ in range(count)]
    return [value + spacing * place for place, value in enumerate(level)]


def _name_materials(axes: Axes, drawing: Drawing, view: View, lengths: LengthUnit) -> None:
    """Beside the section: name, kind and Dk of each dielectric and each plane."""
    unit, labels = METRES_IN[lengths], []
    for region in drawing.regions:
        seen = _range_at(_reaching(region.outline, drawing, view), view.right)
        if seen is not None:
            kind = MATERIAL_NAME[region.kind]
            name = region.name if kind in region.name.split() else f"{region.name}, {kind}"
            labels.append((0.5 * sum(seen), f"{shorten(name, LABEL_WIDTH - 9)}, Dk {fixed(region.dk, 2)}"))
    for conductor in drawing.conductors:
        seen = _range_at(_reaching(conductor.outline, drawing, view), view.right)
        if seen is not None:
            labels.append((0.5 * sum(seen), f"{shorten(conductor.name, LABEL_WIDTH - 9)}, {conductor.role}"))
    labels.sort()
    places = stand_apart([height for height, _ in labels], view.metres(ROW_HEIGHT * SMALL))
    for (height, label), place in zip(labels, places, strict=True):
        beside = (view.right + view.metres(20.0)) / unit
        axes.plot([view.right / unit, beside], [height / unit, place / unit], color=FAINT_INK, linewidth=0.8,
                  clip_on=False)
        axes.text(beside + view.metres(3.0) / unit, place / unit, label, fontsize=SMALL, va="center", ha="left")


def _mark_widths(axes: Axes, drawing: Drawing, view: View, lengths: LengthUnit) -> float:
    """Width of a trace, gaps to its neighbours at the same height: marked at the foot, inside the laminate.

    Returns where the marks and their words begin [m].
    """
    feet = _feet(drawing)
    traces = [foot for foot in feet if foot.role == "trace"]
    level = [foot for foot in feet if abs(foot.height - traces[0].height) <= 1e-9]
    spans = [(traces[0].left, traces[0].right, f"width {length_text(traces[0].right - traces[0].left, lengths)}")]
    for one, other in pairwise(level):
        word = "gap" if one.role == other.role else "ground gap"
        if not any(f"{word} {length_text(other.left - one.right, lengths)}" == text for _, _, text in spans):
            spans.append((one.right, other.left, f"{word} {length_text(other.left - one.right, lengths)}"))
    spans.sort()
    away = traces[0].away
    height = traces[0].height + away * view.metres(7.0)
    for left, right, _ in spans:
        _dimension(axes, (left, height), (right, height), lengths)
    fits = all((right - left) >= view.metres(LETTER_WIDTH * SMALL * (len(text) - 1)) for left, right, text in spans)
    if len(spans) > 1 and not fits:
        middle = 0.5 * (min(left for left, _, _ in spans) + max(right for _, right, _ in spans))
        spans = [(middle, middle, ", ".join(text for _, _, text in spans))]
    for left, right, text in spans:
        _words(axes, (0.5 * (left + right), height + away * view.metres(14.0)), text, lengths, ha="center")
    return min(*(foot.left for foot in traces),
               *(0.5 * (left + right - view.metres(LETTER_WIDTH * SMALL * len(text))) for left, right, text in spans))


def _mark_heights(axes: Axes, drawing: Drawing, view: View, lengths: LengthUnit, *,
                  right: float) -> None:
    """Heights along the upright line through the outermost trace: to the planes, of the copper, of what covers it."""
    trace = min(_traces(drawing), key=lambda item: float(item.outline[:, 0].min()))
    middle = float(_sides(trace).mean())
    copper = [seen for item in drawing.conductors
              if (seen := _range_at(_reaching(item.outline, drawing, view), middle)) is not None]
    layers = [seen for item in drawing.regions
              if (seen := _range_at(_reaching(item.outline, drawing, view), middle)) is not None]
    levels = sorted({round(end, 10) for seen in (*copper, *layers) for end in seen})
    planes = [seen for item in drawing.conductors if item.role == "plane"
              and (seen := _range_at(_reaching(item.outline, drawing, view), middle)) is not None]
    steps = [(low, high) for low, high in pairwise(levels)
             if not any(seen[0] <= 0.5 * (low + high) <= seen[1] for seen in planes)]
    left = float(_sides(trace)[0])
    place = min(left - view.metres(34.0), right)
    texts = stand_apart([0.5 * (low + high) for low, high in steps], view.metres(ROW_HEIGHT * SMALL))
    for level in {end for step in steps for end in step}:
        axes.plot([place / METRES_IN[lengths], left / METRES_IN[lengths]], [level / METRES_IN[lengths]] * 2,
                  color=FAINT_INK, linewidth=0.7, linestyle=(0, (1, 2)))
    for (low, high), height in zip(steps, texts, strict=True):
        _dimension(axes, (place, low), (place, high), lengths)
        _words(axes, (place - view.metres(9.0), height), _height_text(drawing, low, high, lengths), lengths, ha="right")


def _height_text(drawing: Drawing, low: float, high: float, lengths: LengthUnit) -> str:
    """A height of one dielectric; what of it fills absent copper stands after a plus: "200 + 15 um"."""
    middle = 0.5 * (low + high)
    filled = sum(region.filled for region in drawing.regions
                 if region.outline[:, 1].min() < middle < region.outline[:, 1].max())
    if not 0.0 < filled < high - low:
        return length_text(high - low, lengths)
    return f"{length_text(high - low - filled, lengths).removesuffix(f' {lengths}')} + {length_text(filled, lengths)}"


@dataclass(frozen=True, slots=True)
class Foot:
    """The wider of the two level faces of a trace or ground [m]; `away` points from it out of the copper."""

    role: str
    left: float
    right: float
    height: float
    away: float


def _feet(drawing: Drawing) -> list[Foot]:
    """The feet of all traces and grounds, from left to right."""
    feet = []
    for conductor in drawing.conductors:
        if conductor.role == "plane":
            continue
        ys = conductor.outline[:, 1]
        faces = []
        for height, away in ((float(ys.min()), -1.0), (float(ys.max()), 1.0)):
            xs = conductor.outline[np.isclose(ys, height, rtol=0.0, atol=1e-12), 0]
            faces.append(Foot(conductor.role, float(xs.min()), float(xs.max()), height, away))
        feet.append(max(faces, key=lambda face: (face.right - face.left, -face.away)))
    return sorted(feet, key=lambda foot: foot.left)


def _dimension(axes: Axes, start: tuple[float, float], end: tuple[float, float], lengths: LengthUnit) -> None:
    unit = METRES_IN[lengths]
    marker = "|" if start[1] == end[1] else "_"
    axes.plot([start[0] / unit, end[0] / unit], [start[1] / unit, end[1] / unit], color=INK, linewidth=1.0,
              marker=marker, markersize=8, markeredgewidth=1.0, zorder=5)


def _words(axes: Axes, place: tuple[float, float], text: str, lengths: LengthUnit, *, ha: str) -> None:
    unit = METRES_IN[lengths]
    axes.text(place[0] / unit, place[1] / unit, text, ha="center" if ha == "center" else "right", va="center",
              fontsize=SMALL, zorder=6, clip_on=False,
              bbox={"facecolor": PAPER, "edgecolor": "none", "alpha": 0.85, "pad": 1.2})
