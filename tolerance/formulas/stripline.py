"""Closed forms for a rectangular trace, or two, midway between planes in one dielectric.

All arrays share one shape; lengths in metres, impedances in ohm. Constants and claims are quoted from memory of the
papers and were compared with a separate boundary-element calculation.
"""

from __future__ import annotations

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.formulas.elliptic import integral_ratio
from tolerance.formulas.formula import Formula, Range, require_inside
from tolerance.formulas.microstrip import FREE_SPACE_IMPEDANCE

NO_THICKNESS = Range("thickness / plane spacing", 0.0, 0.0)
CENTRED_STRIP_RANGES = (Range("width / plane spacing", 0.01, 20.0), NO_THICKNESS)
COUPLED_STRIP_RANGES = (Range("width / plane spacing", 0.01, 10.0), Range("gap / plane spacing", 0.001, 10.0),
                        NO_THICKNESS)
WIDE_RANGES = (Range("width / (plane spacing - thickness)", 0.35, np.inf), Range("thickness / plane spacing", 0.0, 0.5))
NARROW_RANGES = (Range("width / (plane spacing - thickness)", 0.0, 0.35), Range("thickness / width", 0.0, 0.5),
                 Range("thickness / plane spacing", 0.0, 0.25))
WHEELER_RANGES = (Range("widened / (plane spacing - thickness)", 0.0, 10.0),
                  Range("thickness / plane spacing", 0.0, 0.2), Range("thickness / width", 0.0, 1.0))
COUPLED_THICK_RANGES = (Range("width / plane spacing", 0.35, 10.0), Range("gap / thickness", 5.0, np.inf),
                        Range("gap / plane spacing", 0.001, 10.0), Range("thickness / plane spacing", 0.0, 0.1))


def centred_strip(
    *, width: FloatArray, thickness: FloatArray, plane_spacing: FloatArray, dk: FloatArray,
) -> FloatArray:
    """Impedance [ohm] of a strip without thickness. Exact; width over plane spacing 0.01 to 20.

    Source: S. B. Cohn, "Characteristic impedance of the shielded-strip transmission line", IRE Transactions on
    Microwave Theory and Techniques 2 (July 1954), pages 52-57.
    """
    require_inside(CENTRED_STRIP_RANGES, {
        "width / plane spacing": width / plane_spacing, "thickness / plane spacing": thickness / plane_spacing})
    x = 0.5 * np.pi * width / plane_spacing
    return _from_modulus(np.tanh(x), 1.0 / np.cosh(x), dk)


def coupled_strips(
    *, width: FloatArray, gap: FloatArray, thickness: FloatArray, plane_spacing: FloatArray, dk: FloatArray, odd: bool,
) -> FloatArray:
    """Even- or odd-mode impedance [ohm] of two strips without thickness. Exact.

    Width over plane spacing 0.01 to 10, gap over plane spacing 0.001 to 10.
    Source: S. B. Cohn, "Shielded coupled-strip transmission line", IRE Transactions on Microwave Theory and
    Techniques 3 (October 1955), pages 29-38.
    """
    require_inside(COUPLED_STRIP_RANGES, {
        "width / plane spacing": width / plane_spacing, "gap / plane spacing": gap / plane_spacing,
        "thickness / plane spacing": thickness / plane_spacing})
    return _coupled(width, gap, plane_spacing, dk, odd=odd)


def wide_thick_strip(
    *, width: FloatArray, thickness: FloatArray, plane_spacing: FloatArray, dk: FloatArray,
) -> FloatArray:
    """Impedance [ohm] where the fringing fields of both edges do not meet; claimed to 1.2 % at the end of its range.

    Width over (plane spacing - thickness) at least 0.35.  Source: as centred_strip.
    """
    require_inside(WIDE_RANGES, {
        "width / (plane spacing - thickness)": width / (plane_spacing - thickness),
        "thickness / plane spacing": thickness / plane_spacing})
    t = thickness / plane_spacing
    capacitance = 4.0 * (width / plane_spacing / (1.0 - t) + fringe(t))
    return np.asarray(FREE_SPACE_IMPEDANCE / np.sqrt(dk) / capacitance)


def narrow_thick_strip(
    *, width: FloatArray, thickness: FloatArray, plane_spacing: FloatArray, dk: FloatArray,
) -> FloatArray:
    """Impedance [ohm] by the equivalent round wire; claimed to 1.2 % at the end of its range.

    Width over (plane spacing - thickness) at most 0.35, thickness at most a quarter of the spacing and half of the
    width.  Source: as centred_strip.
    """
    require_inside(NARROW_RANGES, {
        "width / (plane spacing - thickness)": width / (plane_spacing - thickness),
        "thickness / width": thickness / width, "thickness / plane spacing": thickness / plane_spacing})
    t = np.where(thickness > 0.0, thickness / width, 1.0)
    more = t / np.pi * (1.0 + np.log(4.0 * np.pi / t) + 0.51 * np.pi * t**2)
    diameter = 0.5 * width * (1.0 + np.where(thickness > 0.0, more, 0.0))
    return np.asarray(FREE_SPACE_IMPEDANCE / (2.0 * np.pi * np.sqrt(dk))
                      * np.log(4.0 * plane_spacing / (np.pi * diameter)))


def wheeler_stripline(
    *, width: FloatArray, thickness: FloatArray, plane_spacing: FloatArray, dk: FloatArray,
) -> FloatArray:
    """Impedance [ohm], claimed to 0.5 % where the widened strip is less than 10 (plane spacing - thickness).

    Used up to thickness over plane spacing 0.2 and over width 1: a narrow upright bar is up to 2.7 % off.
    Source: H. A. Wheeler, "Transmission-line properties of a stripline between parallel planes", IEEE Transactions
    on Microwave Theory and Techniques 26 (1978), pages 866-876.
    """
    free = plane_spacing - thickness
    some = thickness > 0.0
    x = np.where(some, thickness, 0.5 * plane_spacing) / plane_spacing
    power = 2.0 / (1.0 + 2.0 / 3.0 * x / (1.0 - x))
    inside = (x / (2.0 - x)) ** 2 + (0.0796 * x / (width / plane_spacing + 1.1 * x)) ** power
    wider = np.where(some, free * x / (np.pi * (1.0 - x)) * (1.0 - 0.5 * np.log(inside)), 0.0)
    require_inside(WHEELER_RANGES, {
        "widened / (plane spacing - thickness)": (width + wider) / free,
        "thickness / plane spacing": thickness / plane_spacing, "thickness / width": thickness / width})
    r = 8.0 / np.pi * free / (width + wider)
    return np.asarray(30.0 / np.sqrt(dk) * np.log1p(0.5 * r * (r + np.sqrt(r**2 + 6.27))))


def coupled_thick_strips(
    *, width: FloatArray, gap: FloatArray, thickness: FloatArray, plane_spacing: FloatArray, dk: FloatArray, odd: bool,
) -> FloatArray:
    """Even- or odd-mode impedance [ohm] of two thick strips: the coupling of thin ones, scaled by the fringe.

    Width over plane spacing at least 0.35, thickness at most a tenth of the spacing and a fifth of the gap.
    No accuracy is known; against the field solver the even mode is within 1.7 %, the odd mode within 4.4 % (worst at
    the narrowest gap). Source: as coupled_strips, range as recalled.
    """
    require_inside(COUPLED_THICK_RANGES, {
        "width / plane spacing": width / plane_spacing, "gap / plane spacing": gap / plane_spacing,
        "gap / thickness": gap / np.where(thickness > 0.0, thickness, 1e-30),
        "thickness / plane spacing": thickness / plane_spacing})
    none = np.zeros_like(thickness)
    thin = centred_strip(width=width, thickness=none, plane_spacing=plane_spacing, dk=dk)
    thick = wide_thick_strip(width=width, thickness=thickness, plane_spacing=plane_spacing, dk=dk)
    scale = fringe(thickness / plane_spacing) / fringe(none)
    coupled = _coupled(width, gap, plane_spacing, dk, odd=odd)
    return np.asarray(1.0 / (1.0 / thick + scale * (1.0 / coupled - 1.0 / thin)))


def fringe(thickness_share: FloatArray) -> FloatArray:
    """Fringing capacitance of one edge to one plane [of permittivity]; `thickness_share` of the plane spacing.

    Source: Cohn 1954, as centred_strip.
    """
    x = 1.0 / (1.0 - thickness_share)
    some = x > 1.0
    rest = np.where(some, (x - 1.0) * np.log(np.where(some, x**2 - 1.0, 1.0)), 0.0)
    return np.asarray((2.0 * x * np.log(x + 1.0) - rest) / np.pi)


def _coupled(
    width: FloatArray, gap: FloatArray, plane_spacing: FloatArray, dk: FloatArray, *, odd: bool,
) -> FloatArray:
    strip, both = 0.5 * np.pi * width / plane_spacing, 0.5 * np.pi * (width + gap) / plane_spacing
    between = 0.5 * np.pi * gap / plane_spacing
    if odd:
        # 1 - (tanh a / tanh b)^2 = sinh(b - a) sinh(b + a) / (sinh b cosh a)^2
        complement = np.sqrt(np.sinh(between) * np.sinh(strip + both)) / (np.sinh(both) * np.cosh(strip))
        return _from_modulus(np.tanh(strip) / np.tanh(both), complement, dk)
    # 1 - (tanh a tanh b)^2 = cosh(b - a) cosh(b + a) / (cosh a cosh b)^2
    complement = np.sqrt(np.cosh(between) * np.cosh(strip + both)) / (np.cosh(strip) * np.cosh(both))
    return _from_modulus(np.tanh(strip) * np.tanh(both), complement, dk)


def _from_modulus(modulus: FloatArray, complement: FloatArray, dk: FloatArray) -> FloatArray:
    return np.asarray(0.25 * FREE_SPACE_IMPEDANCE / np.sqrt(dk) * integral_ratio(modulus, complement))


_COHN = "IRE Transactions on Microwave Theory and Techniques 2 (July 1954), pages 52-57"
_COHN_COUPLED = "IRE Transactions on Microwave Theory and Techniques 3 (October 1955), pages 29-38"
CENTRED_STRIP = Formula("Cohn 1954, thin", _COHN, 0.0, CENTRED_STRIP_RANGES, centred_strip, "stripline")
WIDE_THICK_STRIP = Formula("Cohn 1954, wide and thick", _COHN, 0.012, WIDE_RANGES, wide_thick_strip, "stripline")
NARROW_THICK_STRIP = Formula(
    "Cohn 1954, narrow and thick", _COHN, 0.012, NARROW_RANGES, narrow_thick_strip, "stripline")
WHEELER_STRIPLINE = Formula(
    "Wheeler 1978", "IEEE Transactions on Microwave Theory and Techniques 26, pages 866-876", 0.005, WHEELER_RANGES,
    wheeler_stripline, "stripline")
COUPLED_STRIPS = Formula("Cohn 1955, thin", _COHN_COUPLED, 0.0, COUPLED_STRIP_RANGES, coupled_strips, "stripline pair")
COUPLED_THICK_STRIPS = Formula(
    "Cohn 1955, thick", _COHN_COUPLED, None, COUPLED_THICK_RANGES, coupled_thick_strips, "stripline pair")
