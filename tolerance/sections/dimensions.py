"""The dimensions of a section that its impedance depends on, as logarithms: what a prediction is fitted in.

Inputs that act through one dimension are merged here: foil and plating are the thickness of the trace, absent copper
thickens the ply that fills it, neighbouring plies that always have the same Dk (and loss) are one ply. Without loss
the impedance depends on ratios of lengths only, so that the logarithms of lengths are taken off their mean.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.sections.layered import LayeredSection
from tolerance.sections.section import Section

SMALLEST_LENGTH = 1e-12  # [m] what a length that is not above nought counts as; such a section is not possible
SMALLEST_DK = 1e-3
DF_SCALE = 10.0  # loss tangents stand plain, since they may be nought, and act little: in tenths

Runs = tuple[tuple[int, ...], ...]  # numbers of neighbouring plies that count as one, outwards or upwards


@dataclass(frozen=True, slots=True)
class Dimensions:
    """Which plies of a line's sections count as one.

    sides : runs of ply numbers, for each stack of plies of the section.
    scale_free : the impedance stays where every length is scaled alike (no loss).
    """

    sides: tuple[Runs, ...]
    scale_free: bool = True

    def logarithms(self, section: Section | LayeredSection) -> FloatArray:
        """Logarithms of lengths (off their mean where scale-free), of Dk, and plain ratios: (dimensions, sections).

        Where a line is evaluated at a frequency the ratios hold its loss tangents too.
        """
        lengths, dks, plain = self.rows(section)
        split = len(lengths)
        result = np.empty((split + len(dks) + len(plain), section.count))
        np.log(np.maximum(lengths, SMALLEST_LENGTH), out=result[:split])
        np.log(np.maximum(dks, SMALLEST_DK), out=result[split : split + len(dks)])
        if self.scale_free:
            result[:split] -= np.mean(result[:split], axis=0)
        for row, ratio in enumerate(plain, start=split + len(dks)):
            result[row] = ratio
        return result

    def rows(self, section: Section | LayeredSection) -> tuple[list[FloatArray], list[FloatArray], list[FloatArray]]:
        """What the logarithms are of, each (sections,): lengths [m], Dk, and ratios and loss tangents as they stand."""
        lengths, dks, dfs = list(_copper_lengths(section)), [], []
        for side, runs in zip(_sides(section), self.sides, strict=True):
            for run in runs:
                lengths.append(sum((side.thicknesses[number] for number in run[1:]), start=side.thicknesses[run[0]]))
                dks.append(side.dks[run[0]])
                dfs += [DF_SCALE * side.dfs[run[0]]] if side.dfs else []
        if isinstance(section, Section) and section.mask is not None:
            lengths += [section.mask.on_laminate + 0.5 * section.foot_width,
                        section.mask.over_copper + section.thickness]
            dks.append(section.mask.dk)
            dfs += [] if section.mask.df is None else [DF_SCALE * section.mask.df]
        if isinstance(section, Section) and section.band_dk is not None:
            dks.append(section.band_dk)
        return lengths, dks, [*_ratios(section), *dfs]


def dimensions_like(section: Section | LayeredSection, *, scale_free: bool = True) -> Dimensions:
    """The dimensions of sections like those of a batch in which everything that varies does so."""
    if isinstance(section, LayeredSection):
        alone = {trace.layer for trace in section.traces}
        return Dimensions(tuple(_equal_neighbours(side, alone) for side in _sides(section)), scale_free)
    return Dimensions(tuple(_equal_neighbours(side, set()) for side in _sides(section)), scale_free)


def _copper_lengths(section: Section | LayeredSection) -> list[FloatArray]:
    if isinstance(section, LayeredSection):
        return [length for trace in section.traces
                for length in (trace.foot_width, trace.crest_width, trace.thickness)]
    lengths = [section.foot_width, section.crest_width, section.thickness]
    return lengths + [space for space in (section.gap, section.ground_gap) if space is not None]


def _ratios(section: Section | LayeredSection) -> list[FloatArray]:
    """How far the traces of a broadside pair lie apart sideways: logarithm of a distance, over what it is without that.

    Registration to one side or the other makes the same pair mirrored. So the impedance is an even function of the
    sideways distance, and smooth in its square; and where that is large it goes with the whole distance.
    """
    if not isinstance(section, LayeredSection):
        return []
    first = section.traces[0]
    ratios = []
    for trace in section.traces[1:]:
        low, high = sorted((first.layer, trace.layer))
        between = sum(section.thicknesses[low + 1 : high], start=np.zeros(section.count))
        straight = np.maximum(first.foot_width + between, SMALLEST_LENGTH)
        ratios.append(0.5 * np.log1p(((trace.centre - first.centre) / straight) ** 2))
    return ratios


@dataclass(frozen=True, slots=True)
class _Side:
    """A stack of plies; `dfs` and `anchors` (where Dk and Df hold) are empty where there is no frequency."""

    thicknesses: Sequence[FloatArray]
    dks: Sequence[FloatArray]
    dfs: Sequence[FloatArray]
    anchors: Sequence[float | None]

    def alike(self, one: int, other: int) -> bool:
        """Whether two plies are the same dielectric in every section."""
        if not np.array_equal(self.dks[one], self.dks[other]):
            return False
        return not self.dfs or (np.array_equal(self.dfs[one], self.dfs[other])
                                and self.anchors[one] == self.anchors[other])


def _sides(section: Section | LayeredSection) -> list[_Side]:
    """Each stack of plies."""
    if isinstance(section, LayeredSection):
        return [_Side(section.thicknesses, section.dks, section.dfs, section.dk_frequencies)]
    return [_Side([ply.thickness for ply in side], [ply.dk for ply in side],
                  [ply.df for ply in side if ply.df is not None], [ply.dk_frequency for ply in side])
            for side in (section.foot_side, section.crest_side)]


def _equal_neighbours(side: _Side, alone: set[int]) -> Runs:
    """Numbers of plies in runs of one dielectric; those in `alone` (they hold a trace) stay by themselves."""
    runs: list[list[int]] = []
    for number in range(len(side.dks)):
        before = runs[-1][-1] if runs else None
        if before is not None and not {number, before} & alone and side.alike(number, before):
            runs[-1].append(number)
        else:
            runs.append([number])
    return tuple(tuple(run) for run in runs)
