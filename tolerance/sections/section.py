"""A batch of as-built cross-sections of one line: dimensions in metres, every array of shape (sections,).

The trace is a trapezoid whose foot (the face bonded to laminate) lies at height 0 and whose crest lies at
`thickness`. Dielectric is told outwards from the trace: `foot_side` from the foot, `crest_side` from the crest.
The first ply of the crest side also fills the height of the trace, unless a band of resin of its own Dk does. Beyond an
open side there is air.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from tolerance.arrays import BoolArray, FloatArray, IntArray, NumberArray


@dataclass(frozen=True, slots=True)
class Ply:
    """One flat dielectric: thickness [m] and Dk [-], each of shape (sections,).

    df : loss tangent (sections,), where the line is evaluated at a frequency.
    dk_frequency : where dk and df hold [Hz]; None: at the frequency of the evaluation.
    """

    thickness: FloatArray
    dk: NumberArray
    name: str = ""
    kind: str = ""
    df: FloatArray | None = None
    dk_frequency: float | None = None

    def rows(self, index: IntArray | BoolArray | slice) -> Ply:
        """The ply of the sections picked by `index`."""
        return replace(self, thickness=self.thickness[index], dk=self.dk[index],
                       df=None if self.df is None else self.df[index])


@dataclass(frozen=True, slots=True)
class Mask:
    """Solder mask that follows the trace: flat at `on_laminate` above the foot, `over_copper` above the crest.

    df, dk_frequency : as of a ply.
    """

    on_laminate: FloatArray
    over_copper: FloatArray
    dk: NumberArray
    name: str = ""
    df: FloatArray | None = None
    dk_frequency: float | None = None

    def rows(self, index: IntArray | BoolArray | slice) -> Mask:
        """The mask of the sections picked by `index`."""
        return replace(self, on_laminate=self.on_laminate[index], over_copper=self.over_copper[index],
                       dk=self.dk[index], df=None if self.df is None else self.df[index])


@dataclass(frozen=True, slots=True)
class PlaneMetal:
    """What of a reference plane matters to losses: conductivity [S/m], thickness [m], and rms roughness [m] of the
    face that the line sees."""

    conductivity: float
    thickness: float
    roughness: float = 0.0


@dataclass(frozen=True, slots=True)
class TraceMetal:
    """What of the copper of a trace matters to losses: conductivity [S/m], rms roughness [m] of the foot, and of the
    crest and the sides."""

    conductivity: float
    roughness_foot: float = 0.0
    roughness_crest: float = 0.0


@dataclass(frozen=True, slots=True)
class Metals:
    """All the copper of a line: of its traces in their order (a pair on one layer has one entry), and of the planes.

    lower, upper : the plane on the foot side and on the crest side, or at the bottom and the top of a broadside pair.
    """

    traces: tuple[TraceMetal, ...]
    lower: PlaneMetal | None = None
    upper: PlaneMetal | None = None


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
    # Dk of the resin at the height of the trace, with the Df of the first ply on the crest side, which must be there
    band_dk: NumberArray | None = None
    metals: Metals | None = None  # where the line is evaluated at a frequency

    @property
    def count(self) -> int:
        """How many sections the batch holds."""
        return int(self.foot_width.shape[0])

    @property
    def possible(self) -> BoolArray:
        """Which sections can exist: every length above nought, finite, every Dk at least 1, no Df below 0."""
        lengths = [self.foot_width, self.crest_width, self.thickness]
        lengths += [space for space in (self.gap, self.ground_gap) if space is not None]
        dks, dfs = [], []
        for ply in (*self.foot_side, *self.crest_side):
            lengths.append(ply.thickness)
            dks.append(ply.dk)
            dfs.append(ply.df)
        if self.mask is not None:
            lengths += [self.mask.on_laminate, self.mask.over_copper]
            dks.append(self.mask.dk)
            dfs.append(self.mask.df)
        if self.band_dk is not None:
            dks.append(self.band_dk)
        result = np.ones(self.count, dtype=np.bool_)
        for length in lengths:
            result &= np.isfinite(length) & (length > 0.0)
        for dk in dks:
            result &= np.isfinite(dk) & (dk >= 1.0)
        for df in dfs:
            if df is not None:
                result &= np.isfinite(df) & (df >= 0.0)
        return result

    def rows(self, index: IntArray | BoolArray | slice) -> Section:
        """The sections picked by `index`."""
        mask = self.mask
        return Section(
            self.foot_width[index], self.crest_width[index], self.thickness[index],
            None if self.gap is None else self.gap[index],
            tuple(ply.rows(index) for ply in self.foot_side), self.foot_plane,
            tuple(ply.rows(index) for ply in self.crest_side), self.crest_plane,
            None if mask is None else mask.rows(index),
            None if self.ground_gap is None else self.ground_gap[index],
            None if self.band_dk is None else self.band_dk[index], self.metals,
        )
