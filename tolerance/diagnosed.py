"""What `tolerance doctor` finds: versions, speed, and exact results beside what comes out here."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Reference:
    """A value from outside this program beside what the program finds; `allowed` is how far they may lie apart."""

    name: str
    unit: str
    source: str
    expected: float
    found: float
    allowed: float

    @property
    def holds(self) -> bool:
        """Whether the two agree; never true of a value that is not a number."""
        return abs(self.found - self.expected) <= self.allowed


@dataclass(frozen=True, slots=True)
class Speed:
    """Sections of a kind that the field solver does in a second on one core."""

    kind: str
    sections: float


@dataclass(frozen=True, slots=True)
class Diagnosis:
    """All of it. optional : version of what an extra brings, None where it is not installed.  cache : where solved
    sections are kept, and whether it can be written; None where there is none."""

    versions: Mapping[str, str]
    optional: Mapping[str, str | None]
    machine: Mapping[str, str]
    cores: int
    cache: tuple[str, bool] | None
    speeds: tuple[Speed, ...]
    references: tuple[Reference, ...]
    same_again: bool  # whether two runs of one scenario are the same to the last bit

    @property
    def well(self) -> bool:
        """Whether every result is as it must be."""
        return self.same_again and all(one.holds for one in self.references)
