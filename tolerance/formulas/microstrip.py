"""Closed forms for a bare microstrip: a rectangular trace on one dielectric over a plane, air above.

All arrays share one shape; lengths in metres, impedances in ohm. Constants and claims are quoted from memory of the
papers and were compared with a separate boundary-element calculation.
"""

from __future__ import annotations

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.formulas.formula import Formula, Range, require_inside

FREE_SPACE_IMPEDANCE = 376.730313668  # [ohm], CODATA 2018

HAMMERSTAD_JENSEN_RANGES = (Range("width / height", 0.01, 100.0), Range("dk", 1.0, 128.0),
                            Range("thickness / height", 0.0, 0.4))
WHEELER_RANGES = (Range("width / height", 0.25, 5.0), Range("dk", 1.0, 10.0), Range("thickness / height", 0.0, 0.4))


def hammerstad_jensen(*, width: FloatArray, thickness: FloatArray, height: FloatArray, dk: FloatArray) -> FloatArray:
    """Impedance [ohm]; width over height 0.01 to 100, Dk 1 to 128. Claimed for no thickness: 0.03 % in air, 0.2 % in
    effective Dk. Its correction for thickness carries no claim; used up to thickness over height 0.4.

    Source: E. Hammerstad and O. Jensen, "Accurate models for microstrip computer-aided design", IEEE MTT-S
    International Microwave Symposium Digest, 1980, pages 407-409.
    """
    require_inside(HAMMERSTAD_JENSEN_RANGES, {
        "width / height": width / height, "dk": dk, "thickness / height": thickness / height})
    u, t = width / height, thickness / height
    some = t > 0.0
    t = np.where(some, t, 1.0)
    wider = t / np.pi * np.log1p(4.0 * np.e / (t / np.tanh(np.sqrt(6.517 * u)) ** 2))
    wider = np.where(some, wider, 0.0)
    u_on_dielectric = u + 0.5 * (1.0 + 1.0 / np.cosh(np.sqrt(dk - 1.0))) * wider
    effective = hammerstad_jensen_effective_dk(u_on_dielectric, dk)
    return _air_impedance(u_on_dielectric) / np.sqrt(effective)


def hammerstad_jensen_effective_dk(u: FloatArray, dk: FloatArray) -> FloatArray:
    """Effective Dk [-] of a strip without thickness, `u` its width over height. Source and range as above."""
    a = (1.0 + np.log((u**4 + (u / 52.0) ** 2) / (u**4 + 0.432)) / 49.0 + np.log1p((u / 18.1) ** 3) / 18.7)
    b = 0.564 * ((dk - 0.9) / (dk + 3.0)) ** 0.053
    return np.asarray(0.5 * (dk + 1.0) + 0.5 * (dk - 1.0) * (1.0 + 10.0 / u) ** (-a * b))


def _air_impedance(u: FloatArray) -> FloatArray:
    f = 6.0 + (2.0 * np.pi - 6.0) * np.exp(-((30.666 / u) ** 0.7528))
    return np.asarray(FREE_SPACE_IMPEDANCE / (2.0 * np.pi) * np.log(f / u + np.sqrt(1.0 + 4.0 / u**2)))


def wheeler_microstrip(*, width: FloatArray, thickness: FloatArray, height: FloatArray, dk: FloatArray) -> FloatArray:
    """Impedance [ohm], claimed to 2 %; used for width over height 0.25 to 5, thickness over height to 0.4, Dk to 10.

    Source: H. A. Wheeler, "Transmission-line properties of a strip on a dielectric sheet on a plane", IEEE
    Transactions on Microwave Theory and Techniques 25 (1977), pages 631-647.
    """
    require_inside(WHEELER_RANGES, {
        "width / height": width / height, "dk": dk, "thickness / height": thickness / height})
    some = thickness > 0.0
    t = np.where(some, thickness, height)
    ends = np.sqrt((t / height) ** 2 + (1.0 / (np.pi * (width / t + 1.1))) ** 2)
    wider = np.where(some, t / np.pi * np.log(4.0 * np.e / ends), 0.0)
    r = 4.0 * height / (width + 0.5 * (1.0 + 1.0 / dk) * wider)
    a = (14.0 + 8.0 / dk) / 11.0
    inner = a * r + np.sqrt((a * r) ** 2 + 0.5 * (1.0 + 1.0 / dk) * np.pi**2)
    return np.asarray(42.4 / np.sqrt(dk + 1.0) * np.log1p(r * inner))


HAMMERSTAD_JENSEN = Formula(
    "Hammerstad and Jensen 1980", "IEEE MTT-S International Microwave Symposium Digest 1980, pages 407-409",
    0.0013, HAMMERSTAD_JENSEN_RANGES, hammerstad_jensen, "microstrip", claim_needs_thin=True)
WHEELER_MICROSTRIP = Formula(
    "Wheeler 1977", "IEEE Transactions on Microwave Theory and Techniques 25, pages 631-647", 0.02, WHEELER_RANGES,
    wheeler_microstrip, "microstrip")
