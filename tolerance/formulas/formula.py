"""What a published formula says of itself: its source, the accuracy its authors claim, and where it holds."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray


class OutsideRangeError(ValueError):
    """A formula was asked outside the range it is published for. The message names quantity, value and range."""


@dataclass(frozen=True, slots=True)
class Range:
    """Both ends of what a formula allows for one quantity, by name: "width / height", "dk"."""

    quantity: str
    low: float
    high: float


@dataclass(frozen=True, slots=True)
class Formula:
    """A closed form for the impedance of one kind of line.

    accuracy_claimed : the authors' claim, as a share; nought where the formula is exact, None where none is known.
    claim_needs_thin : the claim is for copper without thickness only, though the formula goes on.
    applies_to : "microstrip", "microstrip pair", "stripline" or "stripline pair", bare and of one Dk.
    function : keyword-only lengths [m] and Dk, and `odd` for pairs, to the impedance [ohm] of the mode. Raises
    OutsideRangeError.
    """

    name: str
    source: str
    accuracy_claimed: float | None
    ranges: tuple[Range, ...]
    function: Callable[..., FloatArray]
    applies_to: str
    claim_needs_thin: bool = False


def require_inside(ranges: tuple[Range, ...], values: Mapping[str, FloatArray | float]) -> None:
    """Raise OutsideRangeError unless each of `values` (by quantity) lies in its range; ends are allowed."""
    for limits in ranges:
        value = np.asarray(values[limits.quantity], dtype=np.float64)
        wrong = ~((value >= limits.low) & (value <= limits.high))
        if np.any(wrong):
            worst = float(value[wrong].flat[0])
            raise OutsideRangeError(f"{limits.quantity} is {worst:.3g}, {_allowed(limits)}")


def _allowed(limits: Range) -> str:
    if limits.low == limits.high:
        return f"must be {limits.low:g}"
    if np.isinf(limits.high):
        return f"must be {limits.low:g} or more"
    return f"must lie between {limits.low:g} and {limits.high:g}"
