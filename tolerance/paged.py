"""What a page that can be moved is made of: a run, and all that its arithmetic needs. Frozen; SI unless a name says so.

A value of a property is its law at a germ; dimensions of a line's section are sums of such values; coordinates are
linear in the logarithms of the dimensions, and ln Z is a cubic polynomial of the coordinates.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from tolerance.arrays import FloatArray, IntArray
from tolerance.results import RunResult
from tolerance.scenario.amounts import Amount
from tolerance.scenario.writing import Piece
from tolerance.surrogate.wide import PowerTree as PowerTree


@dataclass(frozen=True, slots=True)
class MeasuredTable:
    """The law of readings: straight lines between `germs` and `values` (of the logarithm where `logarithmic`)."""

    germs: FloatArray
    values: FloatArray
    logarithmic: bool
    mean: float
    deviation: float


@dataclass(frozen=True, slots=True)
class PagedProperty:
    """One property that varies: its column of the germs, and the variation whose law it has."""

    name: str
    column: int
    variation: int
    nominal: float
    is_etch: bool
    measured: MeasuredTable | None


@dataclass(frozen=True, slots=True)
class PagedVariation:
    """One entry of [[variations]] as it is given, and how far its mean can be moved.

    shift_relative, shift_reach : the unit of the mean's slider, and how far it goes either way; 0: it cannot be moved.
    anchor : the point that stays when ends are scaled; None: their middle.
    kept : lines of the scenario's text that stay whatever is moved.
    """

    of: tuple[str, ...]
    together: bool
    shape: str
    tolerance: Amount | None
    shift: Amount | None
    sigmas: float | None
    cpk: float | None
    low: float | None
    high: float | None
    measure: str  # length | copper length | share | number
    shift_relative: bool
    shift_reach: float
    anchor: float | None
    kept: str


@dataclass(frozen=True, slots=True)
class Sum:
    """`constant` + factors x inputs of a line, by number of the input."""

    constant: float
    inputs: tuple[int, ...]
    factors: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class Form:
    """A dimension of a line's section: a sum, or what is made of sums.

    least : what it must lie above for the section to exist, or with `least_in` at least; None: anything.
    logarithm : whether its logarithm is what coordinates are made of.
    crest : numbers of the forms of foot and thickness, and of the input of the etch factor: then it is the foot less
        twice the thickness over the factor.
    over : then it is half the logarithm of 1 + the square of the ratio of the two sums.
    """

    sum: Sum
    least: float | None
    least_in: bool
    logarithm: bool
    crest: tuple[int, int, int] | None = None
    over: Sum | None = None


@dataclass(frozen=True, slots=True)
class Input:
    """What a line's dimensions are made of: a property, its own law or, where nothing varies it, its nominal.

    property : number of the property whose law it has; None: the nominal.  low, high : what the fit covers, in the own
    value; None where it stands still.  drawn : whether the line's drawn width, less the one given, is part of it.
    resin : number of the mixture whose factor it has; by_resin : "thickness" or "dk".
    """

    name: str
    nominal: float
    property: int | None
    drawn: bool
    resin: int | None = None
    by_resin: str = ""


@dataclass(frozen=True, slots=True)
class PagedResin:
    """A ply of glass and resin: see laminate.Ply. `content`, and `filled` by copper: numbers of properties, or values.

    glass : volume of the glass per area [m].  resin : volume per area of the resin where its share by weight is one
    half.  thickness, dk : at the nominals.
    """

    content: tuple[int | None, float]
    filled: tuple[tuple[float, tuple[tuple[int | None, float], ...]], ...]
    glass: float
    resin: float
    resin_dk: float
    glass_dk: float
    thickness: float
    dk: float


@dataclass(frozen=True, slots=True)
class PagedLine:
    """One line as the page computes it.

    forms : dimensions, then what must only be possible.  matrix (coordinates, dimensions), origin (coordinates,).
    farthest : coordinates are held within it on both sides.
    covered : for each property that reaches the line, by number, the range of values that the fit was made for; of an
        etch with the change of the drawn width.
    solved_at (runs, coordinates), errors (runs,) [ohm] : the solved sections, and how far each is predicted off from
        the others.  error : root mean square of those in the inner part.
    """

    name: str
    width: float
    width_reach: float
    inputs: tuple[Input, ...]
    forms: tuple[Form, ...]
    matrix: FloatArray
    origin: FloatArray
    farthest: float
    powers: PowerTree
    covered: Mapping[int, tuple[float, float]]
    solved_at: FloatArray
    errors: FloatArray
    error: float
    solver_runs: int


@dataclass(frozen=True, slots=True)
class SobolDraws:
    """The run's own draws in brief: every number is an exclusive or of direction numbers and a digital shift.

    shifts (replicates, variables), directions (replicates, variables, bits): whole numbers of `bits_of_a_number` bits.
    """

    shifts: IntArray
    directions: IntArray
    bits_of_a_number: int


@dataclass(frozen=True, slots=True)
class PagedDraws:
    """Standard normals of coupons: `block` of each of the replicates, the first of those that the run has.

    roots : for correlated variables, their columns and the root of their correlation, which independent draws are
        multiplied by.  sobol : how they come about; None: they are `stored` (coupons, variables) as they are.
    """

    replicates: int
    block: int
    variables: int
    roots: tuple[tuple[tuple[int, ...], FloatArray], ...]
    sobol: SobolDraws | None
    stored: FloatArray | None


@dataclass(frozen=True, slots=True)
class PagedOffer:
    """An offer in words, its price, and the half-width that it offers for each property, by number."""

    words: str
    cost: float
    tolerances: Mapping[int, Amount]


@dataclass(frozen=True, slots=True)
class Page:
    """A run and what moves it."""

    result: RunResult
    lengths: str
    pieces: tuple[Piece, ...]
    properties: tuple[PagedProperty, ...]
    variations: tuple[PagedVariation, ...]
    resins: tuple[PagedResin, ...]
    lines: tuple[PagedLine, ...]
    own_limits: tuple[bool, ...]  # whether a line has a limit of its own, not that of all
    drawn: tuple[tuple[float, float | None, float | None], ...]  # width, gap, ground gap of each line
    draws: PagedDraws
    offers: tuple[PagedOffer, ...]
