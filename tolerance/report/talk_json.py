"""The talk with a fabricator as JSON: what is asked, what was taken, how measured coupons agree."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

from tolerance.sheet.layout import name_of

if TYPE_CHECKING:
    from tolerance.exchanged import Request, Taken
    from tolerance.results import Interval, RunResult


def request_json(request: Request) -> str:
    """The result of `tolerance ask` as one JSON object."""
    return text({
        "title": request.scenario.title, "seed": int(request.result.seed), "coupons": int(request.result.coupons),
        "yield": interval(request.result.inside),
        "rows": [{"dimension": name_of(row.variation.of), "members": [member.name for member in row.members],
                  "weight": float(row.weight),
                  "lines": [{"name": name, "share": float(share)} for name, share in row.lines]}
                 for row in request.rows],
    })


def taken_json(taken: Taken) -> str:
    """The result of `tolerance take` as one JSON object."""
    return text({
        "title": taken.title, "seed": int(taken.before.seed), "coupons": int(taken.before.coupons),
        "changes": [{"cell": change.address, "dimension": name_of(change.of), "table": change.table,
                     "key": change.key, "value": change.value} for change in taken.changes],
        "not_taken": [{"cell": note.address, "reason": note.said} for note in taken.notes],
        "remarks": [{"dimension": name_of(of), "remark": said} for of, said in taken.remarks],
        "scenario": taken.text or None,
        "before": _yields(taken.before), "after": _yields(taken.before if taken.after is None else taken.after),
    })


def interval(value: Interval) -> dict[str, float]:
    """An estimate with the ends of its 95 % interval."""
    return {"value": float(value.value), "low": float(value.low), "high": float(value.high)}


def text(value: object) -> str:
    """The JSON text. ValueError where a number is not finite."""
    return json.dumps(value, indent=2, allow_nan=False)


def _yields(result: RunResult) -> dict[str, object]:
    return {"yield": interval(result.inside),
            "lines": [{"name": line.name, "yield": interval(line.inside)} for line in result.lines]}
