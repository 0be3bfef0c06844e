"""The talk with the fabricator: what to ask, and what a reply changes. The order of the steps of both."""

from __future__ import annotations

import os
from pathlib import Path

from tolerance.cores import Progress, plain_algebra
from tolerance.errors import InputError, ScenarioError, as_toml
from tolerance.exchanged import Request, RequestRow, Taken
from tolerance.results import LineResult, RunResult
from tolerance.scenario.checking import parse
from tolerance.scenario.properties import members
from tolerance.scenario.tables import Scenario, Variation
from tolerance.sheet.amending import Amendment, amend, amendment_text
from tolerance.sheet.layout import name_of
from tolerance.sheet.reading import Answer, Note, Reply, read_reply
from tolerance.study.run import run
from tolerance.study.solved import SolvedCache


@plain_algebra
def ask(
    scenario: Scenario, *, coupons: int | None = None, seed: int | None = None, on_progress: Progress | None = None,
    cache: SolvedCache | None = None,
) -> Request:
    """What to ask the fabricator, the most important first: the run's own drivers, line by line.

    A line's variance counts in units of its own limit, so that the lines that fail most decide the order.
    """
    result = run(scenario, coupons=coupons, seed=seed, on_progress=on_progress, cache=cache, brief=True)
    return request_of(scenario, result)


def request_of(scenario: Scenario, result: RunResult) -> Request:
    """The same from a run that is there already."""
    rows = [_row(scenario, variation, result) for variation in scenario.variations]
    total = sum(row.weight for row in rows)
    scaled = [RequestRow(row.variation, row.members, row.weight / total if total else 0.0, row.lines) for row in rows]
    kept = sorted((row for row in scaled if row.lines), key=lambda row: -row.weight)
    return Request(scenario, tuple(kept), result)


def _row(scenario: Scenario, variation: Variation, result: RunResult) -> RequestRow:
    found = members(scenario, variation)
    names = [member.name for member in found]
    variables = {" + ".join(names)} if variation.together else set(names)
    weight, lines = 0.0, []
    for line in result.lines:
        shares = [(driver.total if driver.shapley is None else driver.shapley).value
                  for driver in line.drivers if driver.variable in variables]
        if shares:
            lines.append((line.name, sum(shares)))
            weight += max(sum(shares), 0.0) * _spread(line)
    return RequestRow(variation, found, weight, tuple(sorted(lines, key=lambda one: -one[1])))


def _spread(line: LineResult) -> float:
    """Variance of a line in units of the half-width of its limits."""
    return (2.0 * line.deviation.value / (line.high_limit - line.low_limit)) ** 2


@plain_algebra
def take(
    scenario: Scenario, reply: str | os.PathLike[str], *, out: str | os.PathLike[str] | None = None,
    coupons: int | None = None, seed: int | None = None, on_progress: Progress | None = None,
    cache: SolvedCache | None = None,
) -> Taken:
    """What a filled sheet changes, and the yield before and after, with the same draws.

    out : where the new scenario is to stand (it is not written here); its `extends` leads from there to the first.
    Raises InputError where the reply cannot be read, or where the scenario does not come from a file.
    """
    base = Path(scenario.source)
    if not base.is_file():
        raise InputError("a reply is taken for a scenario that stands in a file; this one does not")
    out = answered_path(base) if out is None else Path(out)
    read = read_reply(Path(reply), scenario)
    amendment, amended, notes = _checked(scenario, amend(scenario, read.answers), read, out, Path(reply).name)
    before = run(scenario, coupons=coupons, seed=seed, on_progress=on_progress, cache=cache, brief=True)
    asked = request_of(scenario, before).rows
    missing = [row.variation for row in asked if row.variation not in read.rows]
    notes += [Note(read.sheet, f"the row {as_toml(name_of(variation.of))} is missing; nothing is changed there")
              for variation in missing]
    after = None if amended is None else run(amended, coupons=coupons, seed=before.seed, on_progress=on_progress,
                                             cache=cache, brief=True)
    return Taken(
        title=scenario.title, changes=amendment.changes, notes=tuple(notes), remarks=amendment.remarks,
        text="" if amended is None else _text(scenario, amendment, out, Path(reply).name), before=before,
        scenario=amended, after=after,
    )


def answered_path(base: Path) -> Path:
    """Where the new scenario stands unless told otherwise: beside the first."""
    return base.with_name(f"{base.stem}-answered.toml")


def _checked(
    scenario: Scenario, amendment: Amendment, read: Reply, out: Path, reply: str,
) -> tuple[Amendment, Scenario | None, list[Note]]:
    """The amendment as far as a checked scenario comes of it; what the check refuses is told at its cell."""
    notes = [*read.notes, *amendment.notes]
    while amendment.changes:
        try:
            text = _text(scenario, amendment, out, reply)
            allow = map(Path, scenario.allowed)
            return amendment, parse(text, name=out.name, folder=out.parent, allow=allow), notes
        except ScenarioError as error:
            refused = {(problem.table, problem.entry) for problem in error.problems}
            found = [(answer, table) for answer in read.answers for table in ("variations", "offers")
                     if (f"[[{table}]]", name_of(answer.variation.of)) in refused]
            if not found:
                raise
            for answer, table in found:
                said = "; ".join(f"{problem.key}: {problem.allowed}" for problem in error.problems
                                 if (problem.table, problem.entry) == (f"[[{table}]]", name_of(answer.variation.of)))
                notes.append(Note(_place(answer, table), f"cannot be used, and its row with it: {said}"))
                amendment = amendment.without(answer.variation.of, table)
    return amendment, None, notes


def _place(answer: Answer, table: str) -> str:
    keys = ("tighter", "price") if table == "offers" else ("tolerance", "mean", "deviation", "cpk", "basis")
    return next((answer.places[key] for key in keys if key in answer.places), name_of(answer.variation.of))


def _text(scenario: Scenario, amendment: Amendment, out: Path, reply: str) -> str:
    base = Path(scenario.source)
    try:
        extends = Path(os.path.relpath(base.resolve(), out.parent.resolve())).as_posix()
    except ValueError:  # another drive
        extends = str(base.resolve())
    return amendment_text(amendment, extends=extends, title=f"{scenario.title}, as answered", reply=reply)
