"""What the series resistance of a line adds to the reading of a reflectometer on a coupon."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class ReadingRise:
    """What is added `position` [m] from the launch: `rise` [ohm], the direct-current `resistance` [ohm/m] times it."""

    position: float
    resistance: float
    rise: float


def reading_rise(resistances: Sequence[float], *, position: float, side_by_side: bool) -> ReadingRise:
    """The rise at `position` [m] on traces of `resistances` [ohm/m], in series or, tied together, side by side.

    Every piece of series resistance on the way reflects a little; to first order the apparent impedance at a one-way
    distance is higher by the resistance up to there (textbook, reflection on a line of small loss). A step's slow part
    sees direct-current resistance; what the skin effect adds fades within the reading's first moments.
    """
    whole = 1.0 / sum(1.0 / each for each in resistances) if side_by_side else sum(resistances)
    return ReadingRise(position, whole, whole * position)
