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
from scipy.special import ndtr, ndtri

from tolerance.arrays import FloatArray
from tolerance.process.draws import ETCH, Process, Variable, sobol_uniforms
from tolerance.process.laws import Law, quantile
from tolerance.process.resin import through_resin
from tolerance.scenario.properties import Property

REACH = 3.0  # germs from minus to plus this span the tolerance; uniform laws: from end to end
WIDER = 1.25  # the box over that span
LEAST_OF_LOW_END = 0.5  # what a low end above nought keeps at least when the box is made wider
LEAST_OF_NOMINAL = 0.05  # where the low end is not above nought itself
GATHERED = 0.35  # deviation of training runs over half the width of the box: 1.3 of that of a normal law
OFF_MIDDLE = 0.15  # of the box: where the directions of the coordinates are found
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
        return through_resin(name, self.own, self.process.resins)

    def etch(self, layer: str, *, width: float) -> FloatArray:
        """Finished foot width minus drawn width [m] of a line `width` [m] wide, shape (points,)."""
        return self._value(f"{layer}.{ETCH}", 0.0, width)

    def own(self, name: str) -> FloatArray:
        """Values of the property by its own law alone, (points,)."""
        return self._value(name, self.process.nominals[name])

    def _value(self, name: str, nominal: float, width: float | None = None) -> FloatArray:
        for position, column in enumerate(self.columns):
            variable = self.process.variables[column]
            for member, law in variable.members:
                if member.name == name:
                    low, high = _wide_ends(law, nominal if width is None else width)
                    first = _first_share(variable, self.process, self.width)
                    share = first + (1.0 - first) * 0.5 * (1.0 + self.shares[:, position])
                    value = low + share * (high - low)
                    return np.asarray(np.exp(value) if law.shape == "lognormal" else value, dtype=np.float64)
        return np.full(len(self.shares), nominal)


def box_spans(process: Process, columns: tuple[int, ...], *, width: float) -> dict[str, tuple[int, float]]:
    """By property name: the place in `columns` of what moves it, and half the width of the box in it [SI]."""
    spans = {}
    for position, column in enumerate(columns):
        variable = process.variables[column]
        first = _first_share(variable, process, width)
        for member, law in variable.members:
            low, high = _wide_ends(law, _reference(member, process, width))
            low += first * (high - low)
            low, high = (np.exp(low), np.exp(high)) if law.shape == "lognormal" else (low, high)
            spans[member.name] = position, float(0.5 * (high - low))
    return spans


def _reference(member: Property, process: Process, width: float) -> float:
    """What percentages of a member's law are of [SI]."""
    return width if member.property == ETCH else process.nominals[member.name]


def _first_share(variable: Variable, process: Process, width: float) -> float:
    """The share of the way between its ends at which the box of a variable begins.

    All that is drawn together begins at one share, where the first of it would become too small to exist: the members
    then hang together in the box as they do in draws.
    """
    return max(_share_kept_off(law, _reference(member, process, width)) for member, law in variable.members)


def _share_kept_off(law: Law, reference: float) -> float:
    low, high = _wide_ends(law, reference)
    if law.nominal <= 0.0 or law.shape == "lognormal" or low == high:
        return 0.0
    inner, _ = _ends(law, reference)
    least = LEAST_OF_LOW_END * inner if inner > 0.0 else LEAST_OF_NOMINAL * law.nominal
    return max(0.0, (least - low) / (high - low))


def box_ends(law: Law, *, reference: float) -> tuple[float, float]:
    """Ends of the box [SI] in one property that is drawn alone."""
    low, high = _wide_ends(law, reference)
    low += _share_kept_off(law, reference) * (high - low)
    return (float(np.exp(low)), float(np.exp(high))) if law.shape == "lognormal" else (low, high)


def _wide_ends(law: Law, reference: float) -> tuple[float, float]:
    """What the tolerance spans, made wider; of a lognormal in its logarithm."""
    low, high = _ends(law, reference)
    centre, half = 0.5 * (low + high), 0.5 * WIDER * (high - low)
    return centre - half, centre + half


def _ends(law: Law, reference: float) -> tuple[float, float]:
    reach = np.inf if law.shape == "uniform" else REACH
    if law.measured is not None:
        reach *= law.measured.widest
    ends = quantile(law, np.array([-reach, reach]), reference=reference)
    low, high = np.log(ends) if law.shape == "lognormal" else ends
    return float(low), float(high)


def training_shares(dimensions: int, *, runs: int, chance: np.random.Generator) -> FloatArray:
    """Places of training runs in the box, (runs, dimensions): even, of low discrepancy.

    Fewer runs are the first rows of more runs from a generator in the same state.
    """
    points = 1 << max(runs - 1, 1).bit_length()
    return 2.0 * sobol_uniforms(dimensions, points, chance)[:runs] - 1.0


def gathered(process: Process, columns: tuple[int, ...], shares: FloatArray) -> FloatArray:
    """Shares of the box (points, columns) gathered towards its middle where the draws of a law do: a normal one cut at
    the ends of the box. The draws of a uniform law do not."""
    result = shares.copy()
    for position, column in enumerate(columns):
        if any(law.shape != "uniform" for _, law in process.variables[column].members):
            lowest = ndtr(-1.0 / GATHERED)
            result[:, position] = GATHERED * ndtri(lowest + (1.0 - 2.0 * lowest) * 0.5 * (1.0 + shares[:, position]))
    return result


def small_steps(dimensions: int) -> FloatArray:
    """A place near the middle of the box, and small steps from it to both sides in each variable.

    For `coordinates_of`. The place is the middle in no variable, nor are two variables alike there: what the impedance
    is even in (two registrations that make one distance) is level in the very middle.
    """
    order = np.arange(dimensions)
    place = OFF_MIDDLE * (1.0 + order / max(dimensions, 1)) * (-1.0) ** order
    step = SMALL_STEP * np.eye(dimensions)
    return np.asarray(place + np.concatenate([np.zeros((1, dimensions)), step, -step]), dtype=np.float64)


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
