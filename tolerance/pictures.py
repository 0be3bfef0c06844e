"""What a picture of a line's field is made of: finished arrays, drawn by the report as they are.

Lengths in metres, x sideways and y up as in the stackup; potentials as a share of the voltage on the trace, of a
broadside pair as a share of half the voltage between its traces.
"""

from __future__ import annotations

from dataclasses import dataclass

from tolerance.arrays import FloatArray
from tolerance.sections.drawing import Drawing


@dataclass(frozen=True, slots=True)
class CurrentProfile:
    """Current density round one trace: corners of the pieces of its faces (pieces + 1, 2) [m] in one round, outward
    normals (pieces, 2), and density (pieces,) [A/m for 1 A in the trace]; `mean` : 1 A over the perimeter."""

    outline: FloatArray
    normals: FloatArray
    density: FloatArray
    mean: float


@dataclass(frozen=True, slots=True)
class FieldPicture:
    """The field of one line at its nominals, in its mode.

    across (columns,), height (rows,) [m] : the grid.  potential : (rows, columns), on copper that of the copper.
    field_lines : each (points, 2) [m] from a trace on; between neighbours of one trace lies the same charge, 1 /
    `lines_of_charge` of the trace's.  symmetry_plane : in words where x = 0 is one, else empty.
    """

    name: str
    kind: str
    layer: str
    references: tuple[str, ...]
    mode: str  # single | differential | common
    impedance: float
    drawing: Drawing
    across: FloatArray
    height: FloatArray
    potential: FloatArray
    field_lines: tuple[FloatArray, ...]
    lines_of_charge: int
    currents: tuple[CurrentProfile, ...]
    symmetry_plane: str = ""
