"""Pictures of a line's field: equipotentials, field lines, and the current round the traces, to scale.

Lines only, over the materials of the section: thin for equipotentials, broken with an arrow for field lines; a hatched
border for the current. Nothing rests on colour, and a legend in words stands beside.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch, Polygon
from matplotlib.ticker import MaxNLocator

from tolerance.report.figures import save_pages
from tolerance.report.files import file_names
from tolerance.report.letters import fitted
from tolerance.report.looks import (
    AIR,
    BODY,
    BODY_EDGE,
    COPPER,
    FAINT_INK,
    INK,
    LARGE,
    MATERIAL,
    MEDIUM,
    MOST_STEPS,
    PAGE,
    RESOLUTION,
    SMALL,
    TITLE,
    our_looks,
)
from tolerance.report.section_plot import MATERIAL_NAME
from tolerance.report.wording import METRES_IN, LengthUnit, fixed, place_words, shorten, two_rows

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence
    from pathlib import Path

    from matplotlib.artist import Artist
    from matplotlib.axes import Axes

    from tolerance.arrays import FloatArray
    from tolerance.pictures import CurrentProfile, FieldPicture
    from tolerance.report.figures import FigureFormat

LEVELS = np.linspace(0.1, 0.9, 9)  # of the voltage on the trace
MEAN_HEIGHT = 0.025  # how high the mean current density is drawn, of the picture's height
CUT = 3.0  # times the mean: the border ends there, for the density grows without limit towards a corner
MARGIN = 0.025
DRAWN = 8.4  # inches wide
LOWEST_PAGE = 6.2  # inches: room for the legend
FIELD_DASHES = (0, (6, 2.5))
WORDS_WIDTH = 38
IMPEDANCE = {"single": "impedance", "differential": "differential impedance", "common": "common-mode impedance"}


def write_pictures(pictures: Sequence[FieldPicture], folder: Path, lengths: LengthUnit, *,
                   figure_format: FigureFormat = "png",
                   on_progress: Callable[[str, int, int], None] | None = None) -> list[Path]:
    """Write one file for each line into `folder` (made if missing) and return their paths.

    Raises UnfinishedError where a file cannot be written.
    """
    def page_of(picture: FieldPicture) -> Callable[[], Figure]:
        return lambda: picture_page(picture, lengths=lengths)

    names = file_names([f"{picture.name} field" for picture in pictures])
    pages = [(name, page_of(picture)) for name, picture in zip(names, pictures, strict=True)]
    return save_pages(pages, folder, figure_format=figure_format, on_progress=on_progress)


def picture_page(picture: FieldPicture, *, lengths: LengthUnit) -> Figure:
    """The field of one line on a page of its own, with its legend beside."""
    with our_looks():
        height = _page_height(picture)
        page = Figure(figsize=(PAGE[0], height), dpi=RESOLUTION)
        answer = f"{IMPEDANCE[picture.mode]} {fixed(picture.impedance, 2)} ohm"
        room = 72.0 * PAGE[0] * 0.6
        words, size = fitted(picture.name, room, (TITLE, 18.0, LARGE), bold=True)
        page.text(MARGIN, 1.0 - 0.42 / height, words, fontsize=size, weight="bold", va="center")
        layers = dict.fromkeys(part.name for part in picture.drawing.conductors if part.role == "trace")
        where = place_words(" and ".join(layers), picture.references)
        subtitle = f"{picture.kind}; {where}; nominal section"
        words, size = fitted(subtitle, room, (MEDIUM, SMALL))
        page.text(MARGIN, 1.0 - 0.78 / height, words, fontsize=size, color=FAINT_INK, va="center")
        page.text(1.0 - MARGIN, 1.0 - 0.42 / height, answer, fontsize=LARGE, weight="bold", va="center", ha="right")
        axes = page.add_axes((0.065, 0.7 / height, DRAWN / PAGE[0], 1.0 - 1.85 / height))
        draw_field(axes, picture, lengths=lengths)
        page.legend(handles=_legend(picture), loc="upper left", bbox_to_anchor=(0.712, 1.0 - 1.1 / height),
                    frameon=False, fontsize=SMALL, handlelength=2.6, labelspacing=1.0, borderaxespad=0.0)
    return page


def _page_height(picture: FieldPicture) -> float:
    """As high as the picture, or its legend, needs [inches]."""
    low, high, width = *_heights(picture), float(np.ptp(picture.across))
    return max(LOWEST_PAGE, 1.85 + DRAWN * (high - low) / width)


def _heights(picture: FieldPicture) -> tuple[float, float]:
    """Lowest and highest that is drawn [m]: the grid and all copper."""
    copper = np.concatenate([part.outline[:, 1] for part in picture.drawing.conductors])
    return (min(float(picture.height.min()), float(copper.min())),
            max(float(picture.height.max()), float(copper.max())))


def draw_field(axes: Axes, picture: FieldPicture, *, lengths: LengthUnit) -> Axes:
    """Section, equipotentials, field lines and current borders of one line; equal scales."""
    unit = METRES_IN[lengths]
    across, height = picture.across / unit, picture.height / unit
    left, right = float(across[0]), float(across[-1])
    bottom, top = (level / unit for level in _heights(picture))
    _section(axes, picture, unit, left, right)
    odd = float(picture.potential.min()) < -0.5
    levels = np.concatenate([-LEVELS[::-1], [0.0], LEVELS]) if odd else LEVELS
    axes.contour(across, height, picture.potential, levels=levels, colors=[INK], linewidths=0.7, linestyles="solid",
                 zorder=3)
    for line in picture.field_lines:
        _field_line(axes, line / unit, arrow_length=0.02 * (top - bottom))
    for profile in picture.currents:
        _current(axes, profile, unit, MEAN_HEIGHT * (top - bottom))
    if picture.symmetry_plane:
        axes.plot([0.0, 0.0], [bottom, top], color=INK, linewidth=1.2, linestyle=(0, (8, 2, 1, 2)), zorder=6)
    axes.set_xlim(left, right)
    axes.set_ylim(bottom, top)
    axes.set_aspect("equal", adjustable="box", anchor="NW")
    axes.set(xlabel=f"sideways [{lengths}]", ylabel=f"height [{lengths}]")
    axes.xaxis.set_major_locator(MaxNLocator(MOST_STEPS, steps=[1, 2, 5, 10]))
    axes.yaxis.set_major_locator(MaxNLocator(MOST_STEPS, steps=[1, 2, 5, 10]))
    return axes


def _section(axes: Axes, picture: FieldPicture, unit: float, left: float, right: float) -> None:
    """Materials and copper, what reaches the sides drawn to the edge."""
    drawing = picture.drawing
    outlines = [*(part.outline for part in drawing.regions), *(part.outline for part in drawing.conductors)]
    corners = np.concatenate([outline[:, 0] for outline in outlines]) / unit
    ends = float(corners.min()), float(corners.max())

    def reaching(outline: FloatArray) -> FloatArray:
        reached = outline / unit
        reached[reached[:, 0] <= ends[0], 0] = min(ends[0], left)
        reached[reached[:, 0] >= ends[1], 0] = max(ends[1], right)
        return reached

    axes.set_facecolor(AIR)
    for region in drawing.regions:
        axes.add_patch(Polygon(reaching(region.outline), closed=True, facecolor=MATERIAL[region.kind],
                               edgecolor=FAINT_INK, linewidth=0.8, zorder=1))
    for part in drawing.conductors:
        axes.add_patch(Polygon(reaching(part.outline), closed=True, facecolor=COPPER[part.role], edgecolor=INK,
                               linewidth=0.8, zorder=5))


def _field_line(axes: Axes, line: FloatArray, *, arrow_length: float) -> None:
    axes.plot(line[:, 0], line[:, 1], color=FAINT_INK, linewidth=1.0, linestyle=FIELD_DASHES, zorder=2)
    lengths = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(line, axis=0).T))])
    if lengths[-1] < 4.0 * arrow_length:
        return
    middle = int(np.searchsorted(lengths, 0.5 * lengths[-1]))
    here, before = line[middle], line[middle - 1]
    axes.annotate("", xy=tuple(here), xytext=tuple(before), zorder=2,
                  arrowprops={"arrowstyle": "-|>", "color": FAINT_INK, "linewidth": 0.0, "mutation_scale": 9.0})


def _current(axes: Axes, profile: CurrentProfile, unit: float, mean_height: float) -> None:
    """A border round the trace as thick as the current density is high."""
    ends = profile.outline / unit
    thickness = mean_height * np.clip(profile.density / profile.mean, 0.0, CUT)
    turns = np.flatnonzero(np.any(np.abs(np.diff(profile.normals, axis=0)) > 1e-6, axis=1)) + 1
    for face in np.split(np.arange(thickness.size), turns):
        normal, base = profile.normals[face[0]], ends[face[0] : face[-1] + 2]
        middles = 0.5 * (base[:-1] + base[1:]) + thickness[face, None] * normal
        first, last = (end + thickness[number] * normal for end, number in ((base[0], face[0]), (base[-1], face[-1])))
        shape = np.vstack([base[0], first, middles, last, base[-1]])
        axes.add_patch(Polygon(shape, closed=True, facecolor=BODY, edgecolor=BODY_EDGE, linewidth=0.9, zorder=4))


def _legend(picture: FieldPicture) -> list[Artist]:
    profile = picture.currents[0]
    mean = 1e-3 * profile.mean
    apart = picture.mode == "differential" and not picture.symmetry_plane
    voltage = "half the voltage between the traces" if apart else "the voltage on the trace"
    entries: list[Artist] = [
        Line2D([], [], color=INK, linewidth=0.7, label=two_rows(f"equipotentials, every 10 % of {voltage}",
                                                                WORDS_WIDTH)),
        Line2D([], [], color=FAINT_INK, linewidth=1.0, linestyle=FIELD_DASHES,
               label="field lines, from + to -; between\n"
                     f"neighbours 1/{picture.lines_of_charge} of the charge of a trace"),
        Patch(facecolor=BODY, edgecolor=BODY_EDGE,
              label="current density round the trace, as\nthe height of this border. With 1 A in\n"
                    f"the trace its mean is {fixed(mean, 2)} A/mm; cut at\n{fixed(CUT * mean, 1)} A/mm, for it "
                    "rises without limit\nat a corner. Of the line without loss:\nthe density of charge of the "
                    "same copper\nin air"),
    ]
    if picture.symmetry_plane:
        entries.append(Line2D([], [], color=INK, linewidth=1.2, linestyle=(0, (8, 2, 1, 2)),
                              label=picture.symmetry_plane))
    return entries + _materials(picture)


def _materials(picture: FieldPicture) -> list[Artist]:
    """From the top down, each once, and what carries current."""
    found: dict[str, tuple[float, Artist]] = {}
    for region in picture.drawing.regions:
        kind = MATERIAL_NAME[region.kind]
        name = region.name if kind in region.name.split() else f"{region.name}, {kind}"
        label = f"{shorten(name, WORDS_WIDTH - 10)}, Dk {fixed(region.dk, 2)}"
        found[label] = (float(region.outline[:, 1].max()),
                        Patch(facecolor=MATERIAL[region.kind], edgecolor=FAINT_INK, label=label))
    for part in picture.drawing.conductors:
        label = f"{shorten(part.name, WORDS_WIDTH - 12)}, {part.role}"
        found[label] = (float(part.outline[:, 1].max()), Patch(facecolor=COPPER[part.role], edgecolor=INK, label=label))
    return [entry for _, entry in sorted(found.values(), key=lambda each: -each[0])]
