"""Where to centre: how far to move a drawn width, or another dimension, so that most coupons pass.

The yield that a sample shows is a staircase, and near its top flat: the best place is taken from the same sample with
every ln Z spread out a little by a normal, which moves no optimum that lies midway and gives a slope everywhere. All
yields that are told are those of the sample itself.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import partial

import numpy as np
from scipy.optimize import brentq, minimize_scalar
from scipy.special import log_ndtr, logsumexp, ndtr

from tolerance.arrays import BoolArray, FloatArray
from tolerance.decisions.board import LineModel
from tolerance.decisions.interpolation import Path, path_of
from tolerance.process.draws import Process
from tolerance.process.laws import Law
from tolerance.process.other_laws import laws_of, moved, with_laws
from tolerance.statistics.estimates import Interval, interval_of

PLACES = 5
SMOOTHING = 0.05  # deviations of ln Z by which each coupon is spread out
FAR = 6.0  # of these spreads inside the limits a coupon adds nothing to what fails
NEAREST = 256  # coupons nearest to their limits, which always count
SCAN = 17  # places looked at before the best is refined
FINEST = 1e-9  # [m] to which places are found


@dataclass(frozen=True, slots=True)
class Centre:
    """A place on a path, by what it is moved [SI].

    best : where most coupons pass.  on_target : where the mean impedance is the target; None: nowhere in reach.
    at_end : the best place is the end of what was looked at, so that there may be a better one beyond.
    """

    best: float
    on_target: float | None
    at_end: bool


def path_of_moves(
    line: LineModel, germ: FloatArray, names: Sequence[str], *, low: float, high: float, nominal: bool,
) -> Path:
    """A line while the centres of the properties `names` move from `low` to `high` [SI], all by the same.

    nominal : the nominal moves along, and relative tolerances with it; else only the centre.
    """
    laws = {name: law for name, law in laws_of(line.process).items() if name in names}
    return path_of(line, germ, _nodes(low, high), partial(_process_moved, line.process, laws, nominal))


def _process_moved(process: Process, laws: Mapping[str, Law], nominal: bool, by: float) -> Process:
    return with_laws(process, {name: moved(law, by, nominal=nominal) for name, law in laws.items()})


def centre_of(paths: Sequence[Path]) -> Centre:
    """The best place of one line, or of several that move together: then that of the line that fails most.

    `on_target` is only told of one line.
    """
    low, high = float(paths[0].places[0]), float(paths[0].places[-1])
    failing = log_failing_at(paths)
    scan = np.linspace(low, high, SCAN)
    heights = [failing(float(place)) for place in scan]
    lowest = int(np.argmin(heights))
    ends = float(scan[max(lowest - 1, 0)]), float(scan[min(lowest + 1, SCAN - 1)])
    found = minimize_scalar(failing, bounds=ends, method="bounded", options={"xatol": FINEST})
    best = float(found.x) if found.fun < heights[lowest] else float(scan[lowest])
    return Centre(best, _on_target(paths[0]) if len(paths) == 1 else None, lowest in (0, SCAN - 1))


def on_grid(best: float, start: float, grid: float | None, failing: Callable[[float], float]) -> float:
    """The move to the better of the two neighbours on a grid; start: what is moved [SI], of which grid is a part."""
    if grid is None:
        return best
    below = np.floor((start + best) / grid + 1e-9) * grid - start
    return float(min((below, below + grid), key=failing))


def log_failing_at(paths: Sequence[Path]) -> Callable[[float], float]:
    """ln of the smoothed failing share against the place, of the line that fails most."""
    return lambda place: max(_log_failing(path, place) for path in paths)


def chance_when_centred(
    impedance: FloatArray, possible: BoolArray, line: LineModel, *, error: float, lot_coupons: int | None,
) -> FloatArray:
    """Chance (coupons,) that a coupon passes when the fabricator brings each lot's median to the target.

    impedance [ohm] (coupons,).  error : standard deviation of the logarithm of what is left of a lot's offset.
    lot_coupons : coupons of a lot, one after another; None: coupons are of a process without lots, whose median alone
    is brought to the target.
    """
    logarithm = np.log(impedance / line.target)
    lots = logarithm.reshape(1 if lot_coupons is None else -1, -1 if lot_coupons is None else lot_coupons)
    left = (lots - np.mean(lots, axis=1, keepdims=True)).ravel()
    low, high = (np.log(end / line.target) for end in (line.limits.low, line.limits.high))
    if error == 0.0:
        chance = ((left >= low) & (left <= high)).astype(np.float64)
    else:
        chance = ndtr((high - left) / error) - ndtr((low - left) / error)
    return np.asarray(chance * possible, dtype=np.float64)


def mean_chance(chance: FloatArray, replicates: int) -> Interval:
    """Yield from the chances of coupons (coupons,), with its interval."""
    each = chance.reshape(replicates, -1).mean(axis=1)
    return interval_of(each, value=float(np.mean(chance))).within(0.0, 1.0)


def _nodes(low: float, high: float) -> FloatArray:
    """Chebyshev's places from `low` to `high`, ends included; the middle one is the middle."""
    turns = np.cos(np.linspace(np.pi, 0.0, PLACES))
    return np.asarray(0.5 * (low + high) + 0.5 * (high - low) * turns, dtype=np.float64)


def _on_target(path: Path) -> float | None:
    def off(place: float) -> float:
        return float(np.mean(path.impedance(place))) - path.line.target

    low, high = float(path.places[0]), float(path.places[-1])
    if off(low) * off(high) > 0.0:
        return None
    return float(brentq(off, low, high, xtol=FINEST))


def _log_failing(path: Path, place: float) -> float:
    """ln of the share that fails, each ln Z spread out by a normal."""
    logarithm = path.at(place)
    scale = SMOOTHING * max(float(np.std(logarithm)), 1e-6)
    room = np.minimum(logarithm - np.log(path.line.limits.low), np.log(path.line.limits.high) - logarithm)
    nearest = min(NEAREST, room.size) - 1
    near = room[room <= max(FAR * scale, float(np.partition(room, nearest)[nearest]))]
    return float(logsumexp(log_ndtr(-near / scale)) - np.log(room.size))
