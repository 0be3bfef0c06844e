"""Which published formulas speak about a section, and what they say. Never used for results."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.formulas.formula import Formula, OutsideRangeError
from tolerance.formulas.microstrip import HAMMERSTAD_JENSEN, WHEELER_MICROSTRIP
from tolerance.formulas.microstrip_pair import KIRSCHNING_JANSEN
from tolerance.formulas.stripline import (
    CENTRED_STRIP,
    COUPLED_STRIPS,
    COUPLED_THICK_STRIPS,
    NARROW_THICK_STRIP,
    WHEELER_STRIPLINE,
    WIDE_THICK_STRIP,
)
from tolerance.sections.section import Ply, Section

FORMULAS: tuple[Formula, ...] = (
    HAMMERSTAD_JENSEN, WHEELER_MICROSTRIP, KIRSCHNING_JANSEN, WHEELER_STRIPLINE, WIDE_THICK_STRIP, NARROW_THICK_STRIP,
    CENTRED_STRIP, COUPLED_STRIPS, COUPLED_THICK_STRIPS,
)
#: Off the middle by this share of the plane spacing still counts as centred: the impedance moves by its square.
OFF_CENTRE_ALLOWED = 0.02
ODD = -1


@dataclass(frozen=True, slots=True)
class SecondOpinion:
    """What one formula says of one mode: an impedance [ohm], or None with the reason.

    accuracy_claimed : as a share; None where no claim holds for this section.  remark : the reason, or what was
    simplified.
    """

    formula: Formula
    impedance: float | None
    accuracy_claimed: float | None
    remark: str


def second_opinions(section: Section, mode: int) -> list[SecondOpinion]:
    """Opinions on the first row of `section`, mode 1 (even, or single) or -1 (odd); none for kinds without formulas."""
    if why_none(section):
        return []
    one = section.rows(slice(0, 1))
    kind = ("stripline" if one.crest_plane else "microstrip") + ("" if one.gap is None else " pair")
    sizes = _sizes(one)
    tapered = not np.isclose(float(one.foot_width[0]), float(one.crest_width[0]), rtol=1e-9)
    remark = "sloping sides: taken with the mean of foot and crest" if tapered else ""
    return [_ask(formula, sizes, mode, remark) for formula in FORMULAS if formula.applies_to == kind]


def why_none(section: Section) -> str:
    """Why no formula here speaks about the first row of `section`; empty where some do."""
    one = section.rows(slice(0, 1))
    if one.ground_gap is not None:
        return "grounded copper beside it"
    if one.mask is not None:
        return "solder mask covers it"
    if not one.foot_plane:
        return "no plane on the side of its foot"
    if one.crest_side and not one.crest_plane:
        return "dielectric covers it"
    dks = {round(float(ply.dk[0]), 9) for ply in (*one.foot_side, *one.crest_side)}
    if one.band_dk is not None:
        dks.add(round(float(one.band_dk[0]), 9))
    if len(dks) > 1:
        return "dielectrics of different Dk"
    if one.crest_plane and abs(_depth(one.foot_side) - _depth(one.crest_side)) > OFF_CENTRE_ALLOWED * _spacing(one):
        return "not midway between its planes"
    return ""


def _ask(formula: Formula, sizes: dict[str, FloatArray], mode: int, remark: str) -> SecondOpinion:
    thick = bool(sizes["thickness"][0] > 0.0)
    claim = None if formula.claim_needs_thin and thick else formula.accuracy_claimed
    which = {"odd": mode == ODD} if "gap" in sizes else {}
    try:
        value = formula.function(**sizes, **which)
    except OutsideRangeError as outside:
        return SecondOpinion(formula, None, claim, str(outside))
    return SecondOpinion(formula, float(value[0]), claim, remark)


def _sizes(one: Section) -> dict[str, FloatArray]:
    """Arguments of the formulas: the trapezoid as a rectangle of its mean width."""
    sizes = {"width": 0.5 * (one.foot_width + one.crest_width), "thickness": one.thickness, "dk": one.foot_side[0].dk}
    if one.crest_plane:
        sizes["plane_spacing"] = np.array([_spacing(one)])
    else:
        sizes["height"] = np.array([_depth(one.foot_side)])
    if one.gap is not None:
        sizes["gap"] = one.gap + 0.5 * (one.foot_width - one.crest_width)
    return sizes


def _depth(plies: tuple[Ply, ...]) -> float:
    return sum(float(ply.thickness[0]) for ply in plies)


def _spacing(one: Section) -> float:
    return _depth(one.foot_side) + float(one.thickness[0]) + _depth(one.crest_side)
