"""Closed form for two equal bare microstrips without thickness, side by side. Arrays share one shape; lengths in [m].

Constants and claims are quoted from memory of the paper and were compared with a separate boundary-element calculation.
"""

from __future__ import annotations

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.formulas.formula import Formula, Range, require_inside
from tolerance.formulas.microstrip import FREE_SPACE_IMPEDANCE, hammerstad_jensen, hammerstad_jensen_effective_dk

KIRSCHNING_JANSEN_RANGES = (Range("width / height", 0.1, 10.0), Range("gap / height", 0.1, 10.0),
                            Range("dk", 1.0, 18.0), Range("thickness / height", 0.0, 0.0))


def kirschning_jansen(
    *, width: FloatArray, gap: FloatArray, thickness: FloatArray, height: FloatArray, dk: FloatArray, odd: bool,
) -> FloatArray:
    """Even- or odd-mode impedance [ohm] at zero frequency, claimed to 0.6 %.

    Width and gap over height 0.1 to 10, Dk 1 to 18, no thickness. Against the field solver the claim holds for width
    over height 0.5 to 2; the odd mode of wide traces closer than a fifth of the height is up to 1.6 % off.
    Source: M. Kirschning and R. H. Jansen, "Accurate wide-range design equations for the frequency-dependent
    characteristic of parallel coupled microstrip lines", IEEE Transactions on Microwave Theory and Techniques 32
    (1984), pages 83-90.
    """
    u, g = width / height, gap / height
    require_inside(KIRSCHNING_JANSEN_RANGES, {
        "width / height": u, "gap / height": g, "dk": dk, "thickness / height": thickness / height})
    single = hammerstad_jensen(width=width, thickness=thickness, height=height, dk=dk)
    single_dk = hammerstad_jensen_effective_dk(u, dk)
    mode_dk, coupling = ((_odd_effective_dk(u, g, dk, single_dk), _odd_coupling(u, g)) if odd
                         else (_even_effective_dk(u, g, dk), _even_coupling(u, g)))
    share = single / FREE_SPACE_IMPEDANCE * np.sqrt(single_dk) * coupling
    return np.asarray(single * np.sqrt(single_dk / mode_dk) / (1.0 - share))


def _even_effective_dk(u: FloatArray, g: FloatArray, dk: FloatArray) -> FloatArray:
    return hammerstad_jensen_effective_dk(u * (20.0 + g**2) / (10.0 + g**2) + g * np.exp(-g), dk)


def _odd_effective_dk(u: FloatArray, g: FloatArray, dk: FloatArray, single_dk: FloatArray) -> FloatArray:
    mean = 0.5 * (dk + 1.0)
    a = 0.7287 * (single_dk - mean) * (1.0 - np.exp(-0.179 * u))
    b = 0.747 * dk / (0.15 + dk)
    c = b - (b - 0.207) * np.exp(-0.414 * u)
    d = 0.593 + 0.694 * np.exp(-0.562 * u)
    return np.asarray((mean + a - single_dk) * np.exp(-c * g**d) + single_dk)


def _even_coupling(u: FloatArray, g: FloatArray) -> FloatArray:
    """The quantity Q of the even mode: `first`, `second`, `third` and the result are its numbers 1 to 4."""
    first, second = 0.8695 * u**0.194, _second(g)
    third = (0.1975 + (16.6 + (8.4 / g) ** 6) ** -0.387 + np.log(g**10 / (1.0 + (g / 3.4) ** 10)) / 241.0)
    return np.asarray(2.0 * first / (second * (np.exp(-g) * u**third + (2.0 - np.exp(-g)) * u**-third)))


def _odd_coupling(u: FloatArray, g: FloatArray) -> FloatArray:
    """The quantity Q of the odd mode: numbers 5 to 10 of its chain, in order."""
    second = _second(g)
    fifth = 1.794 + 1.14 * np.log1p(0.638 / (g + 0.517 * g**2.43))
    sixth = 0.2305 + np.log(g**10 / (1.0 + (g / 5.8) ** 10)) / 281.3 + np.log1p(0.598 * g**1.154) / 5.1
    seventh = (10.0 + 190.0 * g**2) / (1.0 + 82.3 * g**3)
    eighth = np.exp(-6.5 - 0.95 * np.log(g) - (g / 0.15) ** 5)
    ninth = np.log(seventh) * (eighth + 1.0 / 16.5)
    return np.asarray((second * _even_coupling(u, g) - fifth * np.exp(np.log(u) * sixth * u**-ninth)) / second)


def _second(g: FloatArray) -> FloatArray:
    return np.asarray(1.0 + 0.7519 * g + 0.189 * g**2.31)


KIRSCHNING_JANSEN = Formula(
    "Kirschning and Jansen 1984", "IEEE Transactions on Microwave Theory and Techniques 32, pages 83-90", 0.006,
    KIRSCHNING_JANSEN_RANGES, kirschning_jansen, "microstrip pair")
