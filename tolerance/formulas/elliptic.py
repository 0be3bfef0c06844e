"""The ratio of complete elliptic integrals that conformal maps end in."""

from __future__ import annotations

import numpy as np

from tolerance.arrays import FloatArray

STEPS = 12  # of the mean, which doubles its digits at each: enough for moduli down to 1e-300


def integral_ratio(modulus: FloatArray, complement: FloatArray) -> FloatArray:
    """K(k') / K(k) for `modulus` k and `complement` k' = sqrt(1 - k^2), both given so that neither loses digits.

    K(k) = pi / (2 M(1, k')), M the arithmetic-geometric mean (Abramowitz and Stegun, section 17.6).
    """
    return _mean_with_one(complement) / _mean_with_one(modulus)


def _mean_with_one(other: FloatArray) -> FloatArray:
    high, low = np.ones_like(other), np.asarray(other, dtype=np.float64)
    for _ in range(STEPS):
        high, low = 0.5 * (high + low), np.sqrt(high * low)
    return high
