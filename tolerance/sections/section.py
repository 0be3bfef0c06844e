"""A batch of as-built cross-sections of one line: dimensions in metres, every array of shape (sections,).

The trace is a trapezoid whose foot (the face bonded to laminate) lies at height 0 and whose crest lies at
`thickness`. Dielectric is told outwards from the trace: `foot_side` from the foot, `crest_side` from the crest.
The first ply of the crest side also fills the height of the trace, unless a band of resin of its own Dk does. Beyond an
open side there is air.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tolerance.arrays import BoolArray, FloatArray, IntArray


@dataclass(frozen=True, slots=True)
class Ply:
    """One flat dielectric: thickness [m] and Dk [-], each of shape (sections,)."""

    thickness: FloatArray
    dk: FloatArray
    name: str = ""
    kind: str = ""

    def rows(self, index: IntArray | BoolArray | slice) -> Ply:
        """The ply of the sections picked by `index`."""
        return Ply(self.thickness[index], self.dk[index], self.name, self.kind)


@dataclass(frozen=True, slots=True)
class Mask:
    """Solder mask that follows the trace: flat at `on_laminate` above the foot, `over_copper` above the crest."""

    on_laminate: FloatArray
    over_copper: FloatArray
    dk: FloatArray
    name: str = ""


@dataclass(frozen=True, slots=True)
class Section:
    """Cross-sections of a single line (`gap` is None) or of a pair (foot edge to foot edge `gap`)."""

    foot_width: FloatArray
    crest_width: FloatArray
    thickness: FloatArray
    gap: FloatArray | None
    foot_side: tuple[Ply, ...]
    foot_plane: bool  # a reference plane ends the foot side
    crest_side: tuple[Ply, ...]
    crest_plane: bool
    mask: Mask | None = None  # only over an open crest side without plies
    ground_gap: FloatArray | None = None  # coplanar: from the outer foot edges to grounded copper of the same layer
    band_dk: FloatArray | None = None  # of the resin at the height of the trace; only under plies on the crest side

    @property
    def count(self) -> int:
        """How many sections the batch holds."""
        return int(self.foot_width.shape[0])

    @property
    def possible(self) -> BoolArray:
        """Which sections can exist: every length above nought, finite, and every Dk at least 1."""
        lengths = [self.foot_width, self.crest_width, self.thickness]
        lengths += [space for space in (self.gap, self.ground_gap) if space is not None]
        dks = []
        for ply in (*self.foot_side, *self.crest_side):
            lengths.append(ply.thickness)
            dks.append(ply.dk)
        if self.mask is not None:
            lengths += [self.mask.on_laminate, self.mask.over_copper]
            dks.append(self.mask.dk)
        if self.band_dk is not None:
            dks.append(self.band_dk)
        result = np.ones(self.count, dtype=np.bool_)
        for length in lengths:
            result &= np.isfinite(length) & (length > 0.0)
        for dk in dks:
            result &= np.isfinite(dk) & (dk >= 1.0)
        return result

    def rows(self, index: IntArray | BoolArray | slice) -> Section:
        """The sections picked by `index`."""
        mask = self.mask
        return Section(
            self.foot_width[index], self.crest_width[index], self.thickness[index],
            None if self.gap is None else self.gap[index],
            tuple(ply.rows(index) for ply in self.foot_side), self.foot_plane,
            tuple(ply.rows(index) for ply in self.crest_side), self.crest_plane,
            None if mask is None else Mask(mask.on_laminate[index], mask.over_copper[index], mask.dk[index], mask.name),
            None if self.ground_gap is None else self.ground_gap[index],
            None if self.band_dk is None else self.band_dk[index],
        )
