"""Dk and Df carried to another frequency by the wideband causal model, and sections with their Dk made complex."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from tolerance.arrays import ComplexArray, FloatArray
from tolerance.sections.layered import LayeredSection
from tolerance.sections.section import Mask, Ply, Section

#: Ends of the band over which the loss tangent stays nearly level [Hz].
LOWEST_FREQUENCY, HIGHEST_FREQUENCY = 1e3, 1e13


def complex_dk(
    *, dk: FloatArray, df: FloatArray, dk_frequency: float | None, frequency: float,
) -> ComplexArray:
    """Dk' - j Dk'' at `frequency` [Hz] of a dielectric with `dk` and loss tangent `df` at `dk_frequency` [Hz].

    dk, df : [-], any one shape, which the result has.  dk_frequency : None where they hold at `frequency` itself.

    The wideband model, eps(f) = eps_inf + step * ln((high + j f) / (low + j f)), whose two constants follow from dk
    and df at the anchor. It obeys the Kramers-Kronig relations; between `low` = 1 kHz and `high` = 10 THz the loss is
    nearly level and dk falls by (2 / pi) ln(10) dk df = 1.466 dk df a decade. Meant for 10 kHz to 1 THz.
    Source: A. R. Djordjevic, R. M. Biljic, V. D. Likar-Smiljanic, T. K. Sarkar, "Wideband frequency-domain
    characterization of FR-4 and time-domain causality", IEEE Transactions on Electromagnetic Compatibility, volume 43,
    pages 662-667, November 2001.
    """
    if dk_frequency is None or dk_frequency == frequency:
        return np.asarray(dk * (1.0 - 1j * df))
    anchored, carried = _logarithm(dk_frequency), _logarithm(frequency)
    step = dk * df / -anchored.imag
    return np.asarray(dk - step * anchored.real + step * carried)


def at_frequency(section: Section, frequency: float) -> Section:
    """The section with the complex Dk of every dielectric at `frequency` [Hz]; ValueError where one has no df."""
    def ply_at(ply: Ply) -> Ply:
        return replace(ply, dk=_carried(ply, frequency))

    mask, band = section.mask, section.band_dk
    if band is not None:  # resin that comes out of the ply that presses into the copper, with its loss tangent
        band = _carried(replace(section.crest_side[0], dk=band), frequency)
    return replace(
        section, foot_side=tuple(map(ply_at, section.foot_side)), crest_side=tuple(map(ply_at, section.crest_side)),
        mask=None if mask is None else replace(mask, dk=_carried(mask, frequency)), band_dk=band,
    )


def layered_at_frequency(section: LayeredSection, frequency: float) -> LayeredSection:
    """The same for traces on several layers."""
    if len(section.dfs) != len(section.dks):
        raise ValueError("a section without df, which losses need")
    anchors = section.dk_frequencies or (None,) * len(section.dks)
    return replace(section, dks=tuple(
        complex_dk(dk=dk, df=df, dk_frequency=anchor, frequency=frequency)
        for dk, df, anchor in zip(section.dks, section.dfs, anchors, strict=True)))


def _carried(part: Ply | Mask, frequency: float) -> ComplexArray:
    if part.df is None:
        raise ValueError(f"dielectric {part.name!r} has no df, which losses need")
    return complex_dk(dk=part.dk, df=part.df, dk_frequency=part.dk_frequency, frequency=frequency)


def _logarithm(frequency: float) -> complex:
    return complex(np.log((HIGHEST_FREQUENCY + 1j * frequency) / (LOWEST_FREQUENCY + 1j * frequency)))
