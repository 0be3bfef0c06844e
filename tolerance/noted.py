"""What goes on the fabrication drawing. Imports nothing heavy, so that the note is there at once."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import pandas as pd


@dataclass(frozen=True, slots=True)
class NotedLine:
    """One row of the impedance table of a fabrication drawing."""

    name: str
    kind: str
    mode: str
    target: float
    limit: float
    low_limit: float
    high_limit: float
    layer: str
    partner: str | None
    references: tuple[str, ...]
    width: float
    gap: float | None
    ground_gap: float | None
    most_width_change: float


@dataclass(frozen=True, slots=True)
class NoteResult:
    """The impedance table and the note for a fabrication drawing."""

    title: str
    lines: tuple[NotedLine, ...]
    notes: tuple[str, ...] = field(default=())

    @property
    def table(self) -> pd.DataFrame:
        """One row a line; lengths in metres."""
        import pandas as pd  # here, so that the note itself is there at once

        return pd.DataFrame([{
            "line": one.name, "kind": one.kind, "target_ohm": one.target, "limit": one.limit, "layer": one.layer,
            "references": ", ".join(one.references), "width": one.width, "gap": one.gap, "ground_gap": one.ground_gap,
            "most_width_change": one.most_width_change} for one in self.lines])
