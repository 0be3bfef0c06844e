"""Where a line's training runs lie, and how its sections are seen by the polynomial.

The box of the training runs is wider than the tolerances, so that a changed tolerance, shift or limit needs no new
run. Coordinates are linear in the logarithms of the section's own dimensions (impedance goes nearly as powers of
lengths and permittivities), as many as there are directions in which the variables can move those; each is nearly one
variable, and the box fills [-1, 1].
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg import qr

from tolerance.arrays import FloatArray
from tolerance.process.draws import ETCH, Process, sobol_uniforms
from tolerance.process.laws import Law, quantile
from tolerance.process.resin import through_resin

REACH = 3.0  # germs from minus to plus this span the tolerance; uniform laws: from end to end
WIDER = 1.25  # the box over that span
LEAST_OF_LOW_END = 0.5  # what a low end above nought keeps at least when the box is made wider
LEAST_OF_NOMINAL = 0.05  # where the low end is not above nought itself
SMALL_STEP = 1e-4  # of the box, for derivatives
DEPENDENT = 1e-4  # of a direction's length that must be its own
FARTHEST = 2.0  # coordinates are held within, far outside every draw of a section that can exist


@dataclass(frozen=True, slots=True)
class BoxValues:
    """Process values in the box of one line: see ProcessValues. What is drawn together moves together, as in draws.

    columns : of the process's variables that reach the line.  width : drawn width of the line [m].
    shares : (points, columns) places in the box, each from -1 to 1.
    """

    process: Process
    columns: tuple[int, ...]
    width: float
    shares: FloatArray

    def value(self, name: str) -> FloatArray:
        """Values [SI] of the property `name`, shape (points,)."""
        return through_resin(name, self._own, self.process.resins)

    def etch(self, layer: str, *, width: float) -> FloatArray:
        """Finished foot width minus drawn width [m] of a line `width` [m] wide, shape (points,)."""
        return self._value(f"{layer}.{ETCH}", 0.0, width)

    def _own(self, name: str) -> FloatArray:
        return self._value(name, self.process.nominals[name])

    def _value(self, name: str, nominal: float, width: float | None = None) -> FloatArray:
        for position, column in enumerate(self.columns):
            for member, law in self.process.variables[column].members:
                if member.name == name:
                    low, high = box_ends(law, reference=nominal if width is None else width)
                    share = 0.5 * (1.0 + self.shares[:, position])
                    if law.shape == "lognormal":
                        return np.asarray(low * np.exp(share * np.log(high / low)), dtype=np.float64)
                    return np.asarray(low + share * (high - low), dtype=np.float64)
        return np.full(len(self.shares), nominal)


def box_ends(law: Law, *, reference: float) -> tuple[float, float]:
    """Ends of the box [SI] in one property."""
    reach = np.inf if law.shape == "uniform" else REACH
    if law.measured is not None:
        reach *= law.measured.widest
    low, high = (float(end) for end in quantile(law, np.array([-reach, reach]), reference=reference))
    centre, half = 0.5 * (low + high), 0.5 * WIDER * (high - low)
    lowest = centre - half
    if law.nominal > 0.0:
        lowest = max(lowest, LEAST_OF_LOW_END * low if low > 0.0 else LEAST_OF_NOMINAL * law.nominal)
    return lowest, centre + half


def training_shares(dimensions: int, *, runs: int, chance: np.random.Generator) -> FloatArray:
    """Places of training runs in the box, (runs, dimensions): even, of low discrepancy.

    Fewer runs are the first rows of more runs from a generator in the same state.
    """
    points = 1 << max(runs - 1, 1).bit_length()
    return 2.0 * sobol_uniforms(dimensions, points, chance)[:runs] - 1.0


def small_steps(dimensions: int) -> FloatArray:
    """The middle of the box, and small steps from it to both sides in each variable: for `coordinates_of`."""
    step = SMALL_STEP * np.eye(dimensions)
    return np.concatenate([np.zeros((1, dimensions)), step, -step])


@dataclass(frozen=True, slots=True)
class Coordinates:
    """Coordinates = matrix @ logarithms - origin; matrix (coordinates, dimensions), origin (coordinates,)."""

    matrix: FloatArray
    origin: FloatArray

    @property
    def count(self) -> int:
        return len(self.matrix)

    def of(self, logarithms: FloatArray) -> FloatArray:
        """Coordinates (sections, coordinates) of logarithms (dimensions, sections)."""
        result = self.matrix @ logarithms
        result -= self.origin[:, np.newaxis]
        return np.clip(result, -FARTHEST, FARTHEST, out=result).T


def coordinates_of(steps: FloatArray, box: FloatArray) -> Coordinates:
    """Coordinates from logarithms at `small_steps` and at many points of the box, both (dimensions, points).

    Directions of variables that only repeat others (foil and plating; all lengths together, without loss) are left
    out: those of the columns that a pivoted orthogonal decomposition finds dependent.
    """
    variables = (steps.shape[1] - 1) // 2
    middle = steps[:, 0]
    slopes = (steps[:, 1 : variables + 1] - steps[:, variables + 1 :]) / (2.0 * SMALL_STEP)
    lengths = np.linalg.norm(slopes, axis=0)
    _, triangular, order = qr(slopes, mode="economic", pivoting=True)
    own = np.abs(np.diag(triangular))
    kept = order[: len(own)][own > DEPENDENT * lengths[order[: len(own)]]]
    if kept.size == 0:
        return Coordinates(np.empty((0, len(middle))), np.empty(0))
    matrix = np.linalg.pinv(slopes[:, np.sort(kept)])
    places = matrix @ (box - middle[:, np.newaxis])
    low, high = np.min(places, axis=1), np.max(places, axis=1)
    scale = 2.0 / (high - low)
    matrix = scale[:, np.newaxis] * matrix
    return Coordinates(matrix, matrix @ middle + 0.5 * scale * (low + high))
