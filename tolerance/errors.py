"""What can go wrong in a way the user can mend: exceptions of our own, each with its exit status.

Anything else that is raised keeps its traceback: it is a defect of this program, not of the input.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
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
    """One mistake in a scenario: where it stands, what was given, and what is allowed.

    `entry` is the name of the entry of a table; one that has none is told by its `number`, counted from 1.
    """

    file: str
    table: str
    allowed: str
    entry: str = ""
    key: str = ""
    given: object = None
    number: int = 0

    def __str__(self) -> str:
        """`orchard.toml: [[lines]] "clock pair": gap = "-4 mil": must be a length above 0 um`."""
        place = self.table
        if self.entry:
            place += f" {as_toml(self.entry)}"
        elif self.number:
            place += f" number {self.number}"
        value = f" = {as_toml(self.given)}" if self.given is not None else ""
        parts = [self.file, place, _cut(self.key) + value if self.key else "", self.allowed]
        return on_one_line(": ".join(part for part in parts if part))


class ScenarioError(ToleranceError):
    """A scenario with one or more problems; every one of them is told, a line each."""

    exit_status = 2

    def __init__(self, problems: Sequence[Problem]) -> None:
        self.problems = tuple(problems)
        super().__init__("\n".join(str(problem) for problem in self.problems))


def on_one_line(text: str) -> str:
    """The text with every character that does not print (a line end, say) as its escape."""
    return "".join(one if one.isprintable() else one.encode("unicode_escape").decode("ascii") for one in text)


_LONGEST_SHOWN = 80


def as_toml(value: object) -> str:
    """The value as it would stand in the scenario, on one line, cut where it is long."""
    text = _toml_text(value)
    return f'{_cut(text[:-1], _LONGEST_SHOWN - 1)}"' if isinstance(value, str) else _cut(text)


def _cut(text: str, longest: int = _LONGEST_SHOWN) -> str:
    return text if len(text) <= longest else text[: longest - 3] + "..."


def _toml_text(value: object) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int) and value.bit_length() > 4 * _LONGEST_SHOWN:
        return "an integer of very many digits"
    if isinstance(value, str):
        return json.dumps(value[: 2 * _LONGEST_SHOWN], ensure_ascii=False)
    if isinstance(value, Mapping):
        pairs = ", ".join(f"{name} = {as_toml(item)}" for name, item in value.items())
        return f"{{ {pairs} }}" if pairs else "{}"
    if isinstance(value, Sequence):
        return "[" + ", ".join(as_toml(item) for item in value[:_LONGEST_SHOWN]) + "]"
    return str(value)
