"""`check --picture`: the field of each line at its nominals, in its mode, ready to be drawn."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import BoolArray, ComplexArray, FloatArray, read_only
from tolerance.pictures import CurrentProfile, FieldPicture
from tolerance.scenario.tables import Scenario
from tolerance.sections.drawing import Drawing, drawing_of
from tolerance.sections.layered import LayeredSection
from tolerance.solver.field import field_at
from tolerance.solver.layered import LayeredPlan
from tolerance.solver.outlines import Outline, follow, outline_of
from tolerance.solver.plan import SolverSettings, plan_for
from tolerance.solver.sources import Sources, charged, charged_broadside
from tolerance.study.lines import EVEN, ODD, PreparedLine, prepare

ROWS = 90  # of the grid
LINES = 24  # of the field from each trace
#: More nodes on faces of the mask than an impedance needs: the field next to the face is seen here.
SETTINGS = SolverSettings(dielectric_nodes=20)
WIDEST = 2.2  # of the picture over its height


def pictures(scenario: Scenario, *, on_progress: Callable[[str, int, int], None] | None = None) -> list[FieldPicture]:
    """The picture of every line of a checked scenario."""
    settings, found = SolverSettings(), []
    for number, line in enumerate(scenario.lines):
        found.append(picture(prepare(scenario, line, settings)))
        if on_progress is not None:
            on_progress("field pictures", number + 1, len(scenario.lines))
    return found


def picture(prepared: PreparedLine) -> FieldPicture:
    """The picture of one line. Heights are turned at the end where the foot points up."""
    mode = ODD if prepared.mode == "differential" else EVEN
    sources, in_air = (_solved(prepared, mode, air=air) for air in (False, True))
    around = prepared.surroundings
    drawing = drawing_of(prepared.nominal, around, prepared.line.layer)
    broadside = isinstance(prepared.nominal, LayeredSection)
    way = 1.0 if broadside or not getattr(around, "foot_up", False) else -1.0
    grid = _grid(sources, drawing, way, None if broadside else mode)
    lines = _field_lines(sources, grid)
    return FieldPicture(
        name=prepared.line.name, kind=prepared.kind, layer=prepared.line.layer, references=around.references,
        mode=prepared.mode, impedance=float(prepared.impedance(prepared.nominal)[0]), drawing=drawing,
        across=read_only(grid.across), height=read_only(way * grid.height), potential=read_only(grid.potential),
        field_lines=tuple(_points(line, way) for line in lines), lines_of_charge=LINES,
        currents=tuple(_profile(outline, way) for outline in _outlines(in_air)),
        symmetry_plane=_symmetry(prepared, broadside=broadside),
    )


def _solved(prepared: PreparedLine, mode: int, *, air: bool) -> Sources:
    if isinstance(prepared.nominal, LayeredSection):
        assert isinstance(prepared.plan, LayeredPlan)
        return charged_broadside(prepared.nominal, prepared.plan, mode=mode, air=air)
    return charged(prepared.nominal, plan_for(prepared.nominal, SETTINGS), mode=mode, air=air)


def _symmetry(prepared: PreparedLine, *, broadside: bool) -> str:
    if broadside or prepared.mode == "single":
        return ""
    return "symmetry plane, at 0 V" if prepared.mode == "differential" else "symmetry plane, no field across it"


@dataclass(frozen=True, slots=True)
class _Grid:
    """Potential (rows, columns) and field (rows, columns) as x + iy on an even grid, and outlines of the copper."""

    across: FloatArray
    height: FloatArray
    potential: FloatArray
    field: ComplexArray
    copper: tuple[FloatArray, ...]

    @property
    def step(self) -> float:
        return float(self.height[1] - self.height[0])

    def directions(self, points: ComplexArray) -> ComplexArray:
        """Unit vectors along the field between the points of the grid, (points,)."""
        column = np.clip((points.real - self.across[0]) / self.step, 0.0, self.across.size - 1.001)
        row = np.clip((points.imag - self.height[0]) / self.step, 0.0, self.height.size - 1.001)
        left, low = column.astype(np.int64), row.astype(np.int64)
        x, y = column - left, row - low
        field = self.field
        found = ((1 - x) * (1 - y) * field[low, left] + x * (1 - y) * field[low, left + 1]
                 + (1 - x) * y * field[low + 1, left] + x * y * field[low + 1, left + 1])
        size = np.abs(found)
        return np.asarray(found / np.where(size > 0.0, size, 1.0))

    def inside(self, points: ComplexArray) -> BoolArray:
        """Which points are in the picture and not in copper."""
        seen = (points.real > self.across[0]) & (points.real < self.across[-1])
        seen &= (points.imag > self.height[0]) & (points.imag < self.height[-1])
        for outline in self.copper:
            seen &= ~in_polygon(points, outline)
        return np.asarray(seen)


def in_polygon(points: ComplexArray, outline: FloatArray) -> BoolArray:
    """Which points lie inside the outline (corners, 2), by counting crossings."""
    result = np.zeros(points.shape, dtype=np.bool_)
    for (x, y), (other_x, other_y) in zip(outline, np.roll(outline, -1, axis=0), strict=True):
        if y == other_y:
            continue
        crosses = (points.imag < y) != (points.imag < other_y)
        result ^= crosses & (points.real < x + (points.imag - y) / (other_y - y) * (other_x - x))
    return result


def _grid(sources: Sources, drawing: Drawing, way: float, mirror: int | None) -> _Grid:
    """mirror : 1 or -1 where the field is even or odd about x = 0; only its right half is computed then."""
    copper = tuple(part.outline * [1.0, way] for part in drawing.conductors if part.role != "plane")
    corners = np.vstack([part.outline * [1.0, way] for part in drawing.conductors if part.role == "trace"])
    faces, layers = sources.layers.faces, sources.layers
    width = float(np.ptp(corners[:, 0]))
    finite = faces[(np.abs(faces) < 100.0 * (width + np.ptp(corners[:, 1]) + np.sort(np.abs(faces))[1]))]
    low, high = float(min(finite.min(), corners[:, 1].min())), float(max(finite.max(), corners[:, 1].max()))
    room = max(0.9 * (high - low), 0.35 * width)
    low, high = low - (0.0 if layers.bottom_plane else room), high + (0.0 if layers.top_plane else room)
    half = min(0.5 * width + 1.1 * (high - low), 0.5 * WIDEST * max(high - low, width))
    grounds = [part.outline[:, 0] for part in drawing.conductors if part.role == "ground"]
    half = max([half, *(float(np.abs(outline).min()) + 0.3 * (high - low) for outline in grounds)])
    step = (high - low) / ROWS
    columns = int(np.ceil(half / step))
    across = step * np.arange(0 if mirror else -columns, columns + 1, dtype=np.float64)
    height = low + step * np.arange(ROWS + 1, dtype=np.float64)
    xs, ys = (values.ravel() for values in np.meshgrid(across, height))
    found = field_at(sources, across=xs, height=ys)
    shape = height.size, across.size
    potential = found.potential.reshape(shape)
    field = -(found.gradient[:, 0] + 1j * found.gradient[:, 1]).reshape(shape)
    if mirror is not None:
        across = np.concatenate([-across[:0:-1], across])
        potential = np.concatenate([mirror * potential[:, :0:-1], potential], axis=1)
        field = np.concatenate([-mirror * field[:, :0:-1].conj(), field], axis=1)
    return _Grid(np.asarray(across), np.asarray(height), potential, field, copper)


def _outlines(sources: Sources) -> list[Outline]:
    numbers = sorted({face.trace for face in sources.faces})
    return [outline_of([face for face in sources.faces if face.trace == number]) for number in numbers]


def _field_lines(sources: Sources, grid: _Grid) -> list[ComplexArray]:
    """From each trace at equal steps of charge; a line that comes in at a trace is told by the trace it leaves."""
    lines: list[ComplexArray] = []
    for outline in _outlines(sources):
        sign = 1.0 if outline.charges.sum() > 0.0 else -1.0
        starts, normals = outline.places(LINES)

        def along(points: ComplexArray, sign: float = sign) -> ComplexArray:
            return sign * grid.directions(points)

        begun = starts + 0.7 * grid.step * normals
        found = follow(begun, along, grid.inside, step=0.5 * grid.step, most=40 * ROWS)
        for start, line in zip(starts, found, strict=True):
            ends_in_copper = any(in_polygon(line[-1:], shape)[0] for shape in grid.copper)
            if sign > 0.0 or not ends_in_copper:
                lines.append(np.concatenate([[start], line]))
    return lines


def _points(line: ComplexArray, way: float) -> FloatArray:
    return read_only(np.stack([line.real, way * line.imag], axis=1))


def _profile(outline: Outline, way: float) -> CurrentProfile:
    return CurrentProfile(
        _points(outline.ends, way), _points(outline.normals, way), read_only(outline.density),
        mean=1.0 / float(np.abs(np.diff(outline.ends)).sum()))
