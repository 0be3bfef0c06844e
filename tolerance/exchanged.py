"""What the talk with a fabricator comes to: the rows of the sheet that is sent, and what a reply changes."""

from __future__ import annotations

from dataclasses import dataclass

import pandas as pd

from tolerance.results import RunResult
from tolerance.scenario.properties import Property
from tolerance.scenario.tables import Scenario, Variation
from tolerance.sheet.amending import Change
from tolerance.sheet.layout import name_of
from tolerance.sheet.reading import Note


@dataclass(frozen=True, slots=True)
class RequestRow:
    """One thing to ask: a variation with its members.

    weight : its share in the spread of all lines, each in units of its own limit; all weights add up to about 1.
    lines : name and share of the line's variance, largest first; only lines that it reaches.
    """

    variation: Variation
    members: tuple[Property, ...]
    weight: float
    lines: tuple[tuple[str, float], ...]


@dataclass(frozen=True, slots=True)
class Request:
    """What `tolerance ask` sends: rows in order of what they do to the yield; what moves no line is left out.

    result : the run, without groups of drivers and levers.
    """

    scenario: Scenario
    rows: tuple[RequestRow, ...]
    result: RunResult

    @property
    def table(self) -> pd.DataFrame:
        """One row for each thing to ask, the most important first."""
        return pd.DataFrame([
            {"dimension": name_of(row.variation.of), "weight": row.weight,
             "lines": ", ".join(name for name, _ in row.lines)} for row in self.rows])


@dataclass(frozen=True, slots=True)
class Taken:
    """What `tolerance take` makes of a reply.

    changes : every key that changes, with the cell it comes from.  notes : every cell that could not be used.
    text : the scenario that extends the first, as TOML; "" where nothing changes.
    scenario, after : that scenario and its run; None where nothing changes.  Runs are without groups and levers.
    """

    title: str
    changes: tuple[Change, ...]
    notes: tuple[Note, ...]
    remarks: tuple[tuple[tuple[str, ...], str], ...]
    text: str
    before: RunResult
    scenario: Scenario | None = None
    after: RunResult | None = None

    @property
    def change_table(self) -> pd.DataFrame:
        """One row for each key that changes."""
        return pd.DataFrame([
            {"cell": change.address, "dimension": name_of(change.of), "table": change.table, "key": change.key,
             "value": change.value} for change in self.changes],
            columns=["cell", "dimension", "table", "key", "value"])

    @property
    def note_table(self) -> pd.DataFrame:
        """One row for each cell that could not be used."""
        return pd.DataFrame([{"cell": note.address, "reason": note.said} for note in self.notes],
                            columns=["cell", "reason"])

    @property
    def yield_table(self) -> pd.DataFrame:
        """One row a line: yield before and after, with the ends of its intervals; the last row is all lines."""
        after = self.before if self.after is None else self.after
        pairs = [*zip((line.name for line in self.before.lines), (line.inside for line in self.before.lines),
                      (line.inside for line in after.lines), strict=True),
                 ("all lines together", self.before.inside, after.inside)]
        return pd.DataFrame([
            {"line": name, "before": old.value, "before_low": old.low, "before_high": old.high,
             "after": new.value, "after_low": new.low, "after_high": new.high} for name, old, new in pairs])
