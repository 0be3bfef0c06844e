"""Finished rows in the folder of a sweep: a file each, named by all that enters it, whole or not there."""

from __future__ import annotations

import hashlib
import json
import secrets
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from tolerance.report.files import put_in_place, remove_left_over
from tolerance.scenario import Scenario
from tolerance.scenario.fingerprint import fingerprint
from tolerance.solver.plan import SolverSettings
from tolerance.study.versions import settings_of
from tolerance.sweeps.work import Outcome
from tolerance.swept import SweepResult, SweptRow

RECORD = 1  # version of these files
_LARGEST = 50_000_000  # bytes


def key_of(scenario: Scenario, *, seed: int, coupons: int | None, program: Mapping[str, str]) -> str:
    """Digest of everything that enters a row: the scenario with its readings, seed, sample, settings, versions."""
    content = {
        "record": RECORD, "scenario": fingerprint(scenario), "seed": seed, "coupons": coupons, **program,
        **settings_of(SolverSettings()),
    }
    return hashlib.sha256(json.dumps(content, sort_keys=True).encode()).hexdigest()


class KeptRows:
    """The rows that are finished, in `folder`/rows."""

    def __init__(self, folder: Path) -> None:
        self._folder = folder
        remove_left_over(folder / "rows")

    def seed(self) -> int:
        """The seed of scenarios that have none: drawn once for the folder, so that a resumed sweep goes on with it.

        Raises UnfinishedError where the folder takes no files.
        """
        path = self._folder / "sweep.json"
        found = _json_in(path)
        seed = found.get("seed") if found.get("record") == RECORD else None
        if isinstance(seed, int) and not isinstance(seed, bool) and seed >= 0:
            return seed
        drawn = secrets.randbelow(2**31)
        _write(path, {"record": RECORD, "seed": drawn})
        return drawn

    def find(self, key: str) -> Outcome | None:
        """The outcome of a finished row; None where there is none, or what stands there is not one of ours."""
        found = _json_in(self._path(key))
        if found.get("record") != RECORD or found.get("key") != key:
            return None
        result, message = found.get("result"), found.get("message")
        if result is None:
            return Outcome(None, message) if isinstance(message, str) and message else None
        return Outcome(result) if _makes_tables(result) else None

    def keep(self, key: str, outcome: Outcome) -> None:
        """Keep a finished row; one that may go otherwise next time is not kept. Raises UnfinishedError."""
        if outcome.lasting:
            _write(self._path(key), {"record": RECORD, "key": key, "result": outcome.result,
                                     "message": outcome.message})

    def _path(self, key: str) -> Path:
        return self._folder / "rows" / f"{key}.json"


def _makes_tables(result: object) -> bool:
    """Whether a result has all that the tables show: it may have been altered by hand."""
    if not isinstance(result, dict):
        return False
    made = SweepResult((SweptRow("", {}, result),))
    try:
        return len(made.table) == 1 and len(made.line_table) > 0
    except (KeyError, TypeError, IndexError, AttributeError, ValueError):
        return False


def _json_in(path: Path) -> dict[str, Any]:
    try:
        if path.stat().st_size > _LARGEST:
            return {}
        found = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError, RecursionError):
        return {}
    return found if isinstance(found, dict) else {}


def _write(path: Path, content: Mapping[str, object]) -> None:
    text = json.dumps(content, allow_nan=False)
    put_in_place(path, lambda beside: beside.write_text(text, encoding="utf-8"))
