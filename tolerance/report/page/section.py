"""A line's cross-section as shapes of an SVG, to scale, with what is named beside it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.report.wording import METRES_IN, LengthUnit, fixed, length_text, trimmed
from tolerance.results import Drawing

ROOM_SIDEWAYS = 1.6  # view over the width of what the line consists of
ROOM_UPRIGHT = 1.12  # view over the height of the section
WIDEST, NARROWEST = 3.6, 1.7  # of the picture, width over height
SCALE_STEPS = (1, 2, 5)
LONGEST_SCALE = 0.3  # of the picture's width
UNIT = 1e-7  # metres of one unit of the SVG


@dataclass(frozen=True, slots=True)
class Shape:
    """A polygon, `points` as SVG takes them."""

    look: str  # mask | prepreg | core | resin | trace | plane | ground
    points: str


@dataclass(frozen=True, slots=True)
class SectionPicture:
    """The picture: what is seen (SVG units), shapes from the back to the front, bands, a bar of scale, and words."""

    width: int
    height: int
    shapes: tuple[Shape, ...]
    bands: str
    bar: int
    bar_words: str
    words: tuple[tuple[str, str], ...]  # look, and what it is
    spoken: str


def section_picture(drawing: Drawing, lengths: LengthUnit) -> SectionPicture:
    """The nominal section of a line."""
    corners = np.vstack([each.outline for each in drawing.regions] + [each.outline for each in drawing.conductors])
    bottom, top = float(corners[:, 1].min()), float(corners[:, 1].max())
    left, right = _view(drawing, ROOM_UPRIGHT * (top - bottom))
    middle, high = 0.5 * (bottom + top), max(ROOM_UPRIGHT * (top - bottom), (right - left) / WIDEST)
    ends = float(corners[:, 0].min()), float(corners[:, 0].max())

    def placed(outline: FloatArray) -> str:
        points = outline.copy()
        points[outline[:, 0] <= ends[0], 0] = min(left, ends[0])
        points[outline[:, 0] >= ends[1], 0] = max(right, ends[1])
        xs, ys = (points[:, 0] - left) / UNIT, (middle + 0.5 * high - points[:, 1]) / UNIT
        return " ".join(f"{x:.0f},{y:.0f}" for x, y in zip(xs, ys, strict=True))

    shapes = [Shape(region.kind, placed(region.outline)) for region in drawing.regions]
    shapes += [Shape(each.role, placed(each.outline)) for each in drawing.conductors]
    bands = " ".join(f"M{placed(band).replace(' ', 'L')}Z" for band in drawing.bands)
    bar = _scale((right - left) * LONGEST_SCALE / METRES_IN[lengths])
    words = _words(drawing, lengths)
    return SectionPicture(
        round((right - left) / UNIT), round(high / UNIT), tuple(shapes), bands, round(bar * METRES_IN[lengths] / UNIT),
        f"{trimmed(bar, 2)} {lengths}", words, "; ".join(text for _, text in words))


def _view(drawing: Drawing, height: float) -> tuple[float, float]:
    """Left and right end of what is seen [m]."""
    traces = [each.outline[:, 0] for each in drawing.conductors if each.role == "trace"]
    inner = np.concatenate(traces)
    middle = 0.5 * float(inner.min() + inner.max())
    for each in drawing.conductors:
        if each.role == "ground":
            xs = each.outline[:, 0]
            inner = np.append(inner, xs.max() if xs.mean() < middle else xs.min())
    half = 0.5 * max(ROOM_SIDEWAYS * float(np.ptp(inner)), NARROWEST * height)
    return middle - half, middle + half


def _scale(longest: float) -> float:
    """The longest round length, in units, that is no longer than this."""
    power = 10.0 ** np.floor(np.log10(longest))
    return float(max(step * power for step in SCALE_STEPS if step * power <= longest))


def _words(drawing: Drawing, lengths: LengthUnit) -> tuple[tuple[str, str], ...]:
    """What is seen from top to bottom, then the dimensions of the traces."""
    rows = []
    for region in drawing.regions:
        ys = region.outline[:, 1]
        height = float(np.ptp(ys)) - region.filled
        tall = "" if region.kind == "mask" else f"{length_text(height, lengths)}, "
        name = region.name if region.kind in region.name.split() else f"{region.name}, {region.kind}"
        rows.append((float(ys.mean()), region.kind, f"{name}: {tall}Dk {fixed(region.dk, 2)}"))
    for each in drawing.conductors:
        ys = each.outline[:, 1]
        if each.role == "plane":
            rows.append((float(ys.mean()), "plane", f"{each.name}: plane"))
        elif each.role == "trace":
            widths = [float(np.ptp(each.outline[np.isclose(ys, end, rtol=0.0, atol=1e-12), 0]))
                      for end in (ys.min(), ys.max())]
            foot, crest = max(widths), min(widths)
            text = f"{each.name}: trace, foot {length_text(foot, lengths)}, crest {length_text(crest, lengths)}, " \
                   f"{length_text(float(np.ptp(ys)), lengths)} thick"
            rows.append((float(ys.mean()), "trace", text))
    rows.sort(key=lambda row: -row[0])
    return tuple(dict.fromkeys((look, text) for _, look, text in rows))
