"""What re-makes a run, as one JSON file: texts and tables that entered, seed and sample, versions, and the result."""

from __future__ import annotations

import base64
import hashlib
import json
import zlib
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from tolerance.report.files import put_in_place
from tolerance.report.json_text import run_json, run_object
from tolerance.results import RunResult
from tolerance.scenario import Scenario
from tolerance.scenario.entered import EnteredFile
from tolerance.scenario.fingerprint import fingerprint
from tolerance.solver.plan import SolverSettings
from tolerance.study.versions import machine, program_digest, settings_of, versions

NAME = "run-record.json"
RECORD = 1  # version of the file
LARGEST_HELD = 5_000_000  # bytes, packed, of a file that the record holds; of a larger one it has the digest only


def write_record(
    result: RunResult, scenario: Scenario, entered: Sequence[EnteredFile], folder: Path, *, direct: int,
) -> Path:
    """Write the record of a run into `folder`. Raises UnfinishedError where it cannot be written."""
    content = {
        "record": RECORD,
        "title": result.title, "seed": int(result.seed), "coupons": int(result.coupons), "direct": int(direct),
        "fingerprint": fingerprint(scenario),
        "files": [_file(one) for one in entered],
        "made_with": made_with(),
        "result_digest": digest_of(run_json(result).encode()),
        "result": run_object(result),
    }
    text = json.dumps(content, indent=1, allow_nan=False)
    return put_in_place(folder / NAME, lambda beside: beside.write_text(text, encoding="utf-8"))


def made_with() -> dict[str, str]:
    """Everything but the scenario that the bits of a result depend on."""
    return {**versions(), "text of the program": program_digest()[:16], **settings_of(SolverSettings()), **machine()}


def digest_of(content: bytes) -> str:
    """SHA-256 in hexadecimal digits."""
    return hashlib.sha256(content).hexdigest()


def _file(entered: EnteredFile) -> dict[str, Any]:
    packed = base64.b64encode(zlib.compress(entered.content, 9)).decode("ascii")
    return {"name": entered.name, "path": entered.path.as_posix(), "bytes": len(entered.content),
            "sha256": digest_of(entered.content), "zlib_base64": packed if len(packed) <= LARGEST_HELD else None}
