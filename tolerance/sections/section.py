"""A batch of as-built cross-sections of one line: dimensions in metres, every array of shape (sections,).

The trace is a trapezoid whose foot (the face bonded to laminate) lies at height 0 and whose crest lies at
`thickness`. Dielectric is told outwards from the trace: `foot_side` from the foot, `crest_side` from the crest.
The first ply of the crest side also fills the height of the trace. Beyond an open side there is air.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace

import numpy as np

from tolerance.arrays import BoolArray, FloatArray, IntArray


@dataclass(frozen=True, slots=True)
class Ply:
    """One flat dielectric: thickness [m] and Dk [-], each of shape (sections,)."""

    thickness: FloatArray
    dk: FloatArray
    name: str = ""
    kind: str = ""


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

    @property
    def count(self) -> int:
        """How many sections the batch holds."""
        return int(self.foot_width.shape[0])

    @property
    def possible(self) -> BoolArray:
        """Which sections can exist: every length above nought, finite, and every Dk at least 1."""
        lengths = [self.foot_width, self.crest_width, self.thickness]
        lengths += [] if self.gap is None else [self.gap]
        dks = []
        for ply in (*self.foot_side, *self.crest_side):
            lengths.append(ply.thickness)
            dks.append(ply.dk)
        if self.mask is not None:
            lengths += [self.mask.on_laminate, self.mask.over_copper]
            dks.append(self.mask.dk)
        result = np.ones(self.count, dtype=np.bool_)
        for length in lengths:
            result &= np.isfinite(length) & (length > 0.0)
        for dk in dks:
            result &= np.isfinite(dk) & (dk >= 1.0)
        return result

    def rows(self, index: IntArray | BoolArray | slice) -> Section:
        """The sections picked by `index`."""
        def pick(value: object) -> object:
            if isinstance(value, np.ndarray):
                return value[index]
            if isinstance(value, tuple):
                return tuple(pick(item) for item in value)
            if isinstance(value, Ply | Mask):
                return replace(value, **{part.name: pick(getattr(value, part.name)) for part in fields(value)})
            return value

        return replace(self, **{part.name: pick(getattr(self, part.name)) for part in fields(self)})
