"""What a sample of readings says of all: tolerance intervals, intervals of mean, deviation and capability.

A tolerance interval holds a stated share of all readings to come (its content) with a stated confidence.
Sources: W. G. Howe, "Two-sided tolerance limits for normal populations: some improvements", Journal of the American
Statistical Association, volume 64, pages 610-620, 1969; S. S. Wilks, "Determination of sample sizes for setting
tolerance limits", Annals of Mathematical Statistics, volume 12, pages 91-96, 1941; A. F. Bissell, "How reliable is
your capability index?", Applied Statistics, volume 39, pages 331-340, 1990; NIST/SEMATECH e-Handbook of Statistical
Methods, sections 7.2.6.3 and 6.1.6.
"""

from __future__ import annotations

import numpy as np
from scipy.special import betaincinv, chdtri, nctdtrit, ndtri, stdtrit

from tolerance.arrays import FloatArray
from tolerance.statistics.estimates import CONFIDENCE, Interval

CONTENT = 0.95


def howe_factor(count: int, *, content: float = CONTENT, confidence: float = CONFIDENCE) -> float:
    """Factor k of the two-sided interval mean -+ k deviation of a normal, from `count` readings, at least 2.

    Approximate; within 0.5 % of the exact factor for 10 readings and more.
    """
    degrees = count - 1
    chi = chdtri(degrees, confidence)  # chi-squared that is exceeded with that probability
    return float(ndtri(0.5 + 0.5 * content) * np.sqrt(degrees * (1.0 + 1.0 / count) / chi))


def one_sided_factor(count: int, *, content: float = CONTENT, confidence: float = CONFIDENCE) -> float:
    """Factor k of the one-sided limit mean + k deviation of a normal: exact, by the noncentral t distribution."""
    root = np.sqrt(count)
    return float(nctdtrit(count - 1, ndtri(content) * root, confidence) / root)


def content_of_range(count: int, *, confidence: float = CONFIDENCE) -> float:
    """The share of all readings that lies between the smallest and the largest of `count`, whatever the law.

    Wilks: 1 - p^n - n (1 - p) p^(n - 1) = confidence.
    """
    return float(betaincinv(count - 1, 2, 1.0 - confidence))


def readings_needed(*, content: float, confidence: float, outside: int = 2) -> int:
    """Readings whose order statistics hold `content` with `confidence`, whatever the law.

    outside : 2: between the smallest and the largest; 1: below the largest; a one-sided limit at the m-th largest has
    m.  The content is distributed as Beta(n + 1 - outside, outside).
    """
    count = outside
    while betaincinv(count + 1 - outside, outside, 1.0 - confidence) < content:
        count += 1
    return count


def mean_interval(values: FloatArray) -> Interval:
    """The mean of independent readings of a normal, with its interval by Student's t."""
    count, mean = len(values), float(np.mean(values))
    half = float(stdtrit(count - 1, 0.5 + 0.5 * CONFIDENCE) * np.std(values, ddof=1) / np.sqrt(count))
    return Interval(mean, mean - half, mean + half)


def deviation_interval(values: FloatArray) -> Interval:
    """The deviation of independent readings of a normal, with its interval by chi-squared."""
    degrees, deviation = len(values) - 1, float(np.std(values, ddof=1))
    tail = 0.5 * (1.0 - CONFIDENCE)
    low, high = (deviation * float(np.sqrt(degrees / chdtri(degrees, above))) for above in (tail, 1.0 - tail))
    return Interval(deviation, low, high)


def capability(values: FloatArray, *, low: float | None, high: float | None) -> tuple[Interval | None, Interval | None]:
    """Cp (with both limits) and Cpk of readings against limits, with intervals; None without a deviation or limit.

    Cp = (high - low) / (6 s), interval by chi-squared; Cpk = nearest distance / (3 s), interval after Bissell:
    Cpk -+ z sqrt(1 / (9 n) + Cpk^2 / (2 (n - 1))).
    """
    mean, spread = float(np.mean(values)), deviation_interval(values)
    rooms = [room for room in (None if high is None else high - mean, None if low is None else mean - low)
             if room is not None]
    if spread.value <= 0.0 or not rooms:
        return None, None
    cpk = min(rooms) / (3.0 * spread.value)
    half = float(ndtri(0.5 + 0.5 * CONFIDENCE) * np.sqrt(
        1.0 / (9.0 * len(values)) + cpk**2 / (2.0 * (len(values) - 1))))
    if low is None or high is None:
        return None, Interval(cpk, cpk - half, cpk + half)
    width = (high - low) / 6.0
    return (Interval(width / spread.value, width / spread.high, width / spread.low),
            Interval(cpk, cpk - half, cpk + half))
