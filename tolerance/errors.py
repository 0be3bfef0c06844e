"""What can go wrong in a way the user can mend: exceptions of our own, each with its exit status.

Anything else that is raised keeps its traceback: it is a defect of this program, not of the input.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass


class ToleranceError(Exception):
    """Base of every error a user may see. `exit_status` is what the command line ends with."""

    exit_status = 3


class UnfinishedError(ToleranceError):
    """The work could not be finished although the input is well formed."""

    exit_status = 3


class InputError(ToleranceError):
    """The input is bad in a way that one sentence tells (a missing file, a refused overwrite)."""

    exit_status = 2


@dataclass(frozen=True, slots=True)
class Problem:
    """One mistake in a scenario: where it stands, what was given, and what is allowed."""

    file: str
    table: str
    allowed: str
    entry: str = ""
    key: str = ""
    given: object = None

    def __str__(self) -> str:
        """`orchard.toml: [[lines]] "clock pair": gap = "-4 mil": must be a length above 0 um`."""
        place = self.table + (f' "{self.entry}"' if self.entry else "")
        value = f" = {_as_toml(self.given)}" if self.given is not None else ""
        parts = [self.file, place, self.key + value if self.key else "", self.allowed]
        return ": ".join(part for part in parts if part)


class ScenarioError(ToleranceError):
    """A scenario with one or more problems; every one of them is told, a line each."""

    exit_status = 2

    def __init__(self, problems: Sequence[Problem]) -> None:
        self.problems = tuple(problems)
        super().__init__("\n".join(str(problem) for problem in self.problems))


def _as_toml(value: object) -> str:
    """The value as it would stand in the scenario, cut where it is long."""
    if isinstance(value, bool):
        return "true" if value else "false"
    text = f'"{value}"' if isinstance(value, str) else str(value)
    return text if len(text) <= 80 else text[:77] + "..."
