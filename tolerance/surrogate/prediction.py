"""The impedance of one line, predicted: ln Z as a polynomial of its coordinates, with its errors in ohm."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.errors import UnfinishedError
from tolerance.process.changes import Change, ChangedValues
from tolerance.process.draws import ETCH, Process, ProcessDraws
from tolerance.process.resin import through_resin
from tolerance.process.values import ProcessValues
from tolerance.surrogate.coordinates import BoxValues, Coordinates, coordinates_of, small_steps, training_shares
from tolerance.surrogate.polynomial import Polynomial, Prior, Slopes, fit

BLOCK_ROWS = 8192  # coupons predicted at a time: what they need stays in the cache
PLACES = 256  # of the box, from which the reach of the coordinates is known

Logarithms = Callable[[ProcessValues], FloatArray]  # process values -> logarithms of dimensions (dimensions, points)


@dataclass(frozen=True, slots=True)
class Seen:
    """How one line is seen by its prediction.

    columns : of the process's variables that reach the line.
    logarithms : dimensions of its sections for process values.
    """

    process: Process
    columns: tuple[int, ...]
    logarithms: Logarithms
    coordinates: Coordinates

    def of(self, values: ProcessValues) -> FloatArray:
        """Coordinates (points, coordinates) for process values."""
        return self.coordinates.of(self.logarithms(values))


@dataclass(frozen=True, slots=True)
class Predictor:
    """Predicts one line's impedance. `level` [ohm]: the geometric mean of the training impedances.

    The process may be another than that of the training runs, as long as its draws stay in their box.
    """

    seen: Seen
    polynomial: Polynomial
    level: float

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the variables that reach the line."""
        return tuple(self.seen.process.variables[column].name for column in self.seen.columns)

    @property
    def correlation(self) -> FloatArray:
        """Correlation of the germs of these variables, (variables, variables)."""
        columns = self.seen.columns
        return np.asarray(self.seen.process.correlation[np.ix_(columns, columns)], dtype=np.float64)

    @property
    def leave_one_out(self) -> FloatArray:
        """Error [ohm] at each training run, predicted from the others: (runs,)."""
        return self.polynomial.leave_one_out * self.level

    @property
    def leave_one_out_in_doubts(self) -> FloatArray:
        """The same in units of the standard error that the fit itself sees there."""
        return self.polynomial.leave_one_out / self.polynomial.leave_one_out_doubt

    def impedance(self, germ: FloatArray) -> FloatArray:
        """Impedances [ohm] (coupons,) of draws of the whole process, germ (coupons, variables)."""
        result = np.empty(len(germ))
        for start in range(0, len(germ), BLOCK_ROWS):
            rows = slice(start, start + BLOCK_ROWS)
            result[rows] = self.impedance_of(ProcessDraws(self.seen.process, germ[rows]))
        return result

    def impedance_of(self, values: ProcessValues) -> FloatArray:
        """Impedances [ohm] (points,) for process values."""
        return np.exp(self.polynomial.evaluate(self.seen.of(values)))

    def impedance_at(self, germ: FloatArray, *, change: Change | None = None) -> FloatArray:
        """Impedances [ohm] (points,) at germs of the variables that reach the line alone: (points, their number).

        change : to mean or spread of a variable.
        """
        result = np.empty(len(germ))
        for start in range(0, len(germ), BLOCK_ROWS):
            rows = slice(start, start + BLOCK_ROWS)
            draws = ProcessDraws(self.seen.process, self._whole(germ[rows]))
            result[rows] = self.impedance_of(draws if change is None else ChangedValues(draws, change))
        return result

    def impedance_swapped(self, germ: FloatArray, other: FloatArray) -> FloatArray:
        """Impedances [ohm] (2 + variables, points) at germs of the variables that reach the line, (points, variables):
        at `germ`, at `other`, and at `germ` with one column after another from `other`.

        What laws come to is worked out once for each of the two.
        """
        result = np.empty((2 + len(self.seen.columns), len(germ)))
        for start in range(0, len(germ), BLOCK_ROWS):
            rows = slice(start, start + BLOCK_ROWS)
            pair = [ProcessDraws(self.seen.process, self._whole(part[rows])) for part in (germ, other)]
            known: dict[tuple[bool, str], FloatArray] = {}
            for number, column in enumerate((-1, None, *self.seen.columns)):
                result[number, rows] = self.impedance_of(_Swapped(pair[0], pair[1], column, known))
        return result

    def _whole(self, germ: FloatArray) -> FloatArray:
        """Germs of the whole process from those of the variables that reach the line."""
        whole = np.zeros((len(germ), len(self.seen.process.variables)), order="F")
        whole[:, self.seen.columns] = germ
        return whole

    def doubt(self, germ: FloatArray) -> FloatArray:
        """Standard error [ohm] of the predicted impedances, (coupons,), as the fit itself sees it."""
        at = self.seen.of(ProcessDraws(self.seen.process, germ))
        return self.polynomial.doubt(at) * np.exp(self.polynomial.evaluate(at))


@dataclass(frozen=True, slots=True)
class _Swapped:
    """Draws with the variable of one column from other draws (None: all of them, -1: none): see ProcessValues.

    known : what laws came to, by whether it is of the other draws, and the property's name; filled as it is asked.
    The etch is asked for one width only: that of the line.
    """

    draws: ProcessDraws
    other: ProcessDraws
    column: int | None
    known: dict[tuple[bool, str], FloatArray]

    def value(self, name: str) -> FloatArray:
        """Values [SI] of the property `name`."""
        return through_resin(name, self._own, self.draws.process.resins)

    def etch(self, layer: str, *, width: float) -> FloatArray:
        """Finished foot width minus drawn width [m] of a line `width` [m] wide."""
        return self._once(f"{layer}.{ETCH}", lambda draws: draws.etch(layer, width=width))

    def _own(self, name: str) -> FloatArray:
        return self._once(name, lambda draws: draws.own(name))

    def _once(self, name: str, work: Callable[[ProcessDraws], FloatArray]) -> FloatArray:
        place = self.draws.process.place(name)
        swapped = self.column is None or (place is not None and place[0] == self.column)
        if (swapped, name) not in self.known:
            self.known[swapped, name] = work(self.other if swapped else self.draws)
        return self.known[swapped, name]


def fit_predictor(
    seen: Seen, coordinates: FloatArray, impedance: FloatArray, *, slopes: Slopes | None = None,
    prior: Prior | None = None,
) -> Predictor:
    """Predictor from training runs at `coordinates` (runs, coordinates), impedance (runs,) [ohm].

    slopes : of ln Z by the coordinates, where they are known.  prior : that of an earlier fit; found anew where absent.
    Raises UnfinishedError where an impedance is not a finite positive number, or as `polynomial.fit` does.
    """
    if not np.all(np.isfinite(impedance) & (impedance > 0.0)):
        raise UnfinishedError("a training run gave an impedance that is not a positive number")
    logarithm = np.log(impedance)
    polynomial = fit(coordinates, logarithm, slopes=slopes, prior=prior)
    return Predictor(seen, polynomial, float(np.exp(np.mean(logarithm))))


def see(
    process: Process, columns: tuple[int, ...], logarithms: Logarithms, *, width: float, chance: np.random.Generator,
) -> Seen:
    """How a line with the variables at `columns` is seen; width: the drawn width of the line [m]."""
    steps, box = (
        logarithms(BoxValues(process, columns, width, shares))
        for shares in (small_steps(len(columns)), training_shares(len(columns), runs=PLACES, chance=chance))
    )
    return Seen(process, columns, logarithms, coordinates_of(steps, box))
