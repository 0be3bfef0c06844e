"""What of a scenario enters a result, as one digest."""

from __future__ import annotations

import hashlib
import json

from tolerance.scenario.tables import Scenario


def fingerprint(scenario: Scenario) -> str:
    """Digest of everything that a checked scenario says, readings of its tables included.

    Where it was read from, how its text is laid out, and which other scenarios it stands for make no difference.
    """
    content = scenario.model_dump(exclude={"source", "text", "sweep", "allowed"})
    return hashlib.sha256(json.dumps(content, sort_keys=True, default=repr).encode()).hexdigest()
