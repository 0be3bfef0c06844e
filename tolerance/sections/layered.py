"""A batch of as-built cross-sections with traces on several layers: broadside pairs.

Every array has shape (sections,), lengths in metres. Layers are told from the bottom up; each trace lies in one of
them, its foot on that layer's lower or upper face, its crest inside.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from tolerance.arrays import BoolArray, FloatArray, IntArray, NumberArray
from tolerance.sections.section import Metals

Index = IntArray | BoolArray | slice


@dataclass(frozen=True, slots=True)
class PlacedTrace:
    """A trace in layer number `layer` (from the bottom), its foot on that layer's upper face if `foot_up`.

    centre : where its middle lies sideways.
    """

    layer: int
    foot_up: bool
    foot_width: FloatArray
    crest_width: FloatArray
    thickness: FloatArray
    centre: FloatArray

    def rows(self, index: Index) -> PlacedTrace:
        """The trace in the sections picked by `index`."""
        return replace(self, foot_width=self.foot_width[index], crest_width=self.crest_width[index],
                       thickness=self.thickness[index], centre=self.centre[index])


@dataclass(frozen=True, slots=True)
class LayeredSection:
    """Flat layers from the bottom up, ended by planes or by air, and the traces in them."""

    thicknesses: tuple[FloatArray, ...]
    dks: tuple[NumberArray, ...]
    bottom_plane: bool
    top_plane: bool
    traces: tuple[PlacedTrace, ...]
    names: tuple[str, ...] = ()
    kinds: tuple[str, ...] = ()  # air | prepreg | core | mask | resin (at the height of a trace)
    dfs: tuple[FloatArray, ...] = ()  # where the line is evaluated at a frequency, as the two below
    dk_frequencies: tuple[float | None, ...] = ()
    metals: Metals | None = None

    @property
    def count(self) -> int:
        """How many sections the batch holds."""
        return int(self.traces[0].centre.shape[0])

    @property
    def possible(self) -> BoolArray:
        """Which sections can exist: every length above nought, finite, every Dk at least 1, no Df below 0."""
        lengths = [*self.thicknesses]
        for trace in self.traces:
            lengths += [trace.foot_width, trace.crest_width, trace.thickness]
        result = np.ones(self.count, dtype=np.bool_)
        for length in lengths:
            result &= np.isfinite(length) & (length > 0.0)
        for dk in self.dks:
            result &= np.isfinite(dk) & (dk >= 1.0)
        for df in self.dfs:
            result &= np.isfinite(df) & (df >= 0.0)
        return result

    def rows(self, index: Index) -> LayeredSection:
        """The sections picked by `index`."""
        return replace(self, thicknesses=tuple(part[index] for part in self.thicknesses),
                       dks=tuple(part[index] for part in self.dks), dfs=tuple(part[index] for part in self.dfs),
                       traces=tuple(trace.rows(index) for trace in self.traces))

    def in_air(self) -> LayeredSection:
        """The same copper with every Dk 1."""
        return replace(self, dks=tuple(np.ones(dk.shape) for dk in self.dks))
