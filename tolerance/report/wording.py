"""How numbers are worded: the same digits in text, sheet and figure, and no more of them than are known."""

from __future__ import annotations

import math
import textwrap
from typing import TYPE_CHECKING, Literal

if TYPE_CHECKING:
    from collections.abc import Sequence

    from tolerance.results import Interval

LengthUnit = Literal["um", "mil"]

METRES_IN = {"um": 1e-6, "mil": 25.4e-6}
LENGTH_DIGITS = {"um": 1, "mil": 2}
MOST_PERCENT_DIGITS = 3  # 10 parts in a million; rarer failures are told in those
CAUTION = ("A predicted yield is an estimate: it is as good as the tolerances that went in. "
           "The fabricator's process data and measured coupons decide.")


def fixed(value: float | None, digits: int) -> str:
    """The value with so many digits after the point; "-" where there is none."""
    if value is None or not math.isfinite(value):
        return "-"
    text = f"{value:.{digits}f}"
    return text.removeprefix("-") if float(text) == 0.0 else text


def percent_digits(interval: Interval, *, target: float | None = None) -> int:
    """Digits after the point of a percentage that its interval allows: the last one moves by 2 to 20 inside it.

    A share under its `target` gets as many more as it takes to show that: 98.83, not 99 % under a target of 99 %.
    """
    half_width = 100.0 * max(interval.high - interval.value, interval.value - interval.low)
    digits = math.ceil(-math.log10(half_width / 2.0)) if half_width > 0.0 else MOST_PERCENT_DIGITS
    digits = min(max(digits, 0), MOST_PERCENT_DIGITS)
    if target is not None and interval.value < target:
        while digits < MOST_PERCENT_DIGITS and round(100.0 * interval.value, digits) >= 100.0 * target:
            digits += 1
    return digits


def percent(share: float, digits: int) -> str:
    """0.9843 -> "98.43 %"."""
    return f"{fixed(100.0 * share, digits)} %"


def share_text(interval: Interval, *, target: float | None = None) -> str:
    """The share in percent, with the digits that its interval allows."""
    return percent(interval.value, percent_digits(interval, target=target))


def share_range_text(interval: Interval, *, target: float | None = None) -> str:
    """The ends of a share's interval in percent: "[98.38, 98.48]"."""
    digits = percent_digits(interval, target=target)
    return f"[{fixed(100.0 * interval.low, digits)}, {fixed(100.0 * interval.high, digits)}]"


def doubt_text(interval: Interval, *, target: float | None = None) -> str:
    """What stands under a yield: the ends of its interval, or where those read the same "0.0183 ppm fail"."""
    text = share_range_text(interval, target=target)
    low, high = text[1:-1].split(", ")
    if low != high or interval.value < 0.5:
        return text
    if interval.value == 1.0:
        return f"under {1e6 * (1.0 - interval.low):.2g} ppm fail"
    return f"{1e6 * (1.0 - interval.value):.3g} ppm fail"


def headline_text(interval: Interval, *, target: float | None = None) -> str:
    """The share in percent for a headline; where it or its interval reaches 100 %: "above 99.99 %"."""
    rounded = round(100.0 * interval.value, percent_digits(interval))
    if (interval.high < 1.0 and rounded < 100.0) or (target is not None and interval.value < target):
        return share_text(interval, target=target)
    digits = max(percent_digits(interval) - 1, 0)
    surely = math.floor(100.0 * interval.low * 10**digits) / 10**digits
    return f"above {fixed(surely, digits)} %" if surely > 0.0 else share_text(interval)


def share_with_range(interval: Interval) -> str:
    """98.43 % [98.38, 98.48]."""
    return f"{share_text(interval)} {share_range_text(interval)}"


def trimmed(value: float, digits: int) -> str:
    """The value with at most so many digits after the point: 50.0 -> "50"."""
    text = fixed(value, digits)
    return text.rstrip("0").rstrip(".") if "." in text else text


def length_text(metres: float, lengths: LengthUnit) -> str:
    """180e-6 -> "180 um"; "7.09 mil"."""
    return f"{trimmed(metres / METRES_IN[lengths], LENGTH_DIGITS[lengths])} {lengths}"


def variable_words(name: str) -> str:
    """A driver's name with its layer once where members share it: "top mask.thickness + over_copper"."""
    words, layer = [], None
    for member in name.split(" + "):
        own, _, item = member.rpartition(".")
        words.append(item if own and own == layer else member)
        layer = own
    return " + ".join(words)


def place_words(layer: str, references: Sequence[str], *, joint: str = " and ") -> str:
    """Where a line lies: "L6, reference L5", "L3, references L2 and L4"; the layer alone where it has none."""
    return f"{layer}, reference{'s' if len(references) > 1 else ''} {joint.join(references)}" if references else layer


def shorten(text: str, width: int) -> str:
    """The text in at most `width` signs on one line, cut in its middle: names mostly differ at their ends."""
    text = " ".join(text.split())
    if len(text) <= width:
        return text
    kept = width - 3
    return f"{text[:kept - kept // 2].rstrip()}...{text[len(text) - kept // 2:].lstrip()}"


def two_rows(text: str, width: int) -> str:
    """The text on at most two rows of so many signs, broken between words where that serves."""
    text = " ".join(text.split())
    rows = textwrap.wrap(text, width)
    if len(rows) <= 2:
        return "\n".join(rows)
    return f"{rows[0]}\n...{text[3 - width:].lstrip()}"
