"""`again`: a run re-made from its record, and a clear word on what is not as it was."""

from __future__ import annotations

import tempfile
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from tolerance.cores import Progress
from tolerance.errors import InputError, ScenarioError
from tolerance.records.reading import RunRecord, lay_out, read_record, same_file
from tolerance.records.record import digest_of, made_with
from tolerance.report.json_text import run_json, run_object
from tolerance.results import RunResult
from tolerance.scenario import Scenario, load
from tolerance.scenario.fingerprint import fingerprint
from tolerance.study.run import run
from tolerance.study.solved import SolvedCache


@dataclass(frozen=True, slots=True)
class Figure:
    """One figure then and now."""

    name: str
    then: float
    now: float


@dataclass(frozen=True, slots=True)
class AgainResult:
    """A run re-made.

    same : to the last bit.  made_with : what computed it, where that is not the same (name, then, now).
    changed : files that are no longer what entered; the copies in the record were used.
    figures : those that are not the same, yields as shares of 1 and impedances in ohm.
    """

    result: RunResult
    scenario: Scenario
    same: bool
    made_with: tuple[tuple[str, str, str], ...]
    changed: tuple[str, ...]
    figures: tuple[Figure, ...]


def again(path: Path, *, on_progress: Progress | None = None, cache: SolvedCache | None = None) -> AgainResult:
    """Re-make the run whose record is in a folder (or is the file).

    Raises InputError where there is no record, or it does not hold together; what `run` raises besides.
    """
    record = read_record(path)
    scenario = _scenario(record)
    result = run(scenario, coupons=record.coupons, seed=record.seed, direct=record.direct, on_progress=on_progress,
                 cache=cache)
    now = made_with()
    same = digest_of(run_json(result).encode()) == record.result_digest
    return AgainResult(
        result, scenario, same,
        made_with=tuple((name, record.made_with.get(name, "not told"), now.get(name, "not told"))
                        for name in dict.fromkeys([*now, *record.made_with])
                        if record.made_with.get(name) != now.get(name)),
        changed=tuple(one.name for one in record.files if Path(one.path).is_file() and same_file(one) is None),
        figures=() if same else tuple(_figures(record.result, run_object(result))),
    )


def _scenario(record: RunRecord) -> Scenario:
    with tempfile.TemporaryDirectory(prefix="tolerance-") as folder:
        try:
            scenario = load(lay_out(record, Path(folder)), allow=[folder])
        except ScenarioError as problem:
            raise InputError(f"the scenario in the run record cannot be read by this version:\n{problem}") from None
        except OSError as problem:
            raise InputError(f"the files of the run record cannot be laid out: {problem.strerror or problem}") from None
    if fingerprint(scenario) != record.fingerprint:
        raise InputError("the scenario in the run record is not the one that was run: it extends a file by an absolute "
                         "path that has changed, names a preset that has, or was altered")
    return scenario


def _figures(then: Mapping[str, Any], now: Mapping[str, Any]) -> Iterator[Figure]:
    """Yields, means and deviations that are not the same; what the record tells otherwise is passed over."""
    yield from _pair("yield of all lines together", then.get("yield"), now["yield"], "value")
    before = {line.get("name"): line for line in _mappings(then.get("lines"))}
    for line in _mappings(now["lines"]):
        old = before.get(line["name"], {})
        yield from _pair(f"{line['name']}: yield", old.get("yield"), line["yield"], "value")
        for key, words in (("mean_ohm", "mean [ohm]"), ("std_ohm", "deviation [ohm]")):
            yield from _pair(f"{line['name']}: {words}", old, line, key)


def _pair(name: str, then: object, now: Mapping[str, Any], key: str) -> Iterator[Figure]:
    found = then.get(key) if isinstance(then, Mapping) else None
    if isinstance(found, (int, float)) and not isinstance(found, bool) and found != now[key]:
        yield Figure(name, float(found), float(now[key]))


def _mappings(value: object) -> list[Mapping[str, Any]]:
    return [one for one in value if isinstance(one, Mapping)] if isinstance(value, list) else []
