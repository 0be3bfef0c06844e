"""Where the faces of a cross-section go when its tolerances move, one at a time: bands to be drawn on its edges."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from tolerance.arrays import FloatArray, read_only
from tolerance.sections.drawing import Drawing

LEAST = 1e-8  # metres: a band that is narrower would not be seen


def bands_of(nominal: Drawing, moved: Sequence[Drawing]) -> tuple[FloatArray, ...]:
    """A quadrilateral (4, 2) [m] for each edge of a dielectric, trace or ground of `nominal` that any of `moved` moves.

    Level edges go up and down, others sideways, as far as the drawing that moves them most to either side; heights are
    counted from the foot of the first trace. Left out are edges at the sides of the drawing, and drawings whose
    outlines have other corners (mesas that have merged). Corners run counter-clockwise.
    """
    outlines = _outlines(nominal)
    sizes = [len(outline) for outline in outlines]
    alike = [[outline - _foot(drawing) + _foot(nominal) for outline in _outlines(drawing)] for drawing in moved
             if [len(outline) for outline in _outlines(drawing)] == sizes]
    side = max(float(np.abs(outline[:, 0]).max()) for outline in outlines)
    bands = []
    for number, outline in enumerate(outlines):
        away = np.stack([np.zeros_like(outline), *(each[number] - outline for each in alike)])
        bands += [read_only(band) for band in _bands_along(outline, away, side)]
    return tuple(bands)


def _outlines(drawing: Drawing) -> list[FloatArray]:
    """What a tolerance may move; of a plane only the face matters, which is also that of its neighbour."""
    return [region.outline for region in drawing.regions] + [
        conductor.outline for conductor in drawing.conductors if conductor.role != "plane"]


def _foot(drawing: Drawing) -> FloatArray:
    """(0, height of the foot of the first trace)."""
    trace = next(part for part in drawing.conductors if part.role == "trace")
    return np.array([0.0, float(trace.outline[0, 1])])


def _bands_along(outline: FloatArray, away: FloatArray, side: float) -> Iterator[FloatArray]:
    """The bands of one outline (corners, 2) whose corners move by `away` (drawings, corners, 2)."""
    for start in range(len(outline)):
        ends = [start, (start + 1) % len(outline)]
        edge = outline[ends]
        wide, high = np.abs(edge[1] - edge[0])
        if max(wide, high) <= LEAST or (wide <= LEAST and abs(edge[0, 0]) >= side):
            continue
        direction = np.array([1.0, 0.0]) if high > wide else np.array([0.0, 1.0])
        across = away[:, ends] @ direction  # (drawings, 2)
        least, most = across.min(axis=0), across.max(axis=0)
        if (most - least).max() > LEAST:
            band = np.vstack([edge + least[:, None] * direction, (edge + most[:, None] * direction)[::-1]])
            yield band if _turns_left(band) else band[::-1]


def _turns_left(corners: FloatArray) -> bool:
    """Whether corners (corners, 2) run counter-clockwise."""
    following = np.roll(corners, -1, axis=0)
    return bool(np.sum(corners[:, 0] * following[:, 1] - following[:, 0] * corners[:, 1]) > 0.0)
