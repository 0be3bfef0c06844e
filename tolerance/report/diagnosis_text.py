"""What the doctor found, on the terminal and as JSON."""

from __future__ import annotations

import json
import textwrap
from typing import TYPE_CHECKING

from rich.text import Text

from tolerance.report.printed import print_table, say, text_table

if TYPE_CHECKING:
    from rich.console import Console

    from tolerance.diagnosed import Diagnosis

NAME_WIDTH, SOURCE_WIDTH = 30, 22


def print_diagnosis(found: Diagnosis, console: Console) -> None:
    """Versions, speed, and exact results beside what comes out."""
    say(console, ", ".join(f"{name} {version}" for name, version in found.versions.items()) + ".")
    say(console, "Extras: " + ", ".join(f"{name} {version or 'not installed'}"
                                        for name, version in found.optional.items()) + ".")
    say(console, f"{found.cores} cores; {', '.join(one for one in found.machine.values() if one)}.")
    if found.cache is not None:
        folder, writable = found.cache
        say(console, f"Solved sections are kept in {folder}{'' if writable else ', which cannot be written'}.")
    table = text_table(("field solver, one core", True), ("sections a second", False))
    for speed in found.speeds:
        table.add_row(Text(speed.kind), f"{speed.sections:,.0f}")
    print_table(console, table)
    table = text_table(("result", True), ("source", True), ("exact", False), ("here", False), ("", True))
    for one in found.references:
        table.add_row(_wrapped(one.name, NAME_WIDTH), _wrapped(one.source, SOURCE_WIDTH),
                      f"{one.expected:.7g}", f"{one.found:.7g}", "" if one.holds else "OFF")
    print_table(console, table)
    say(console, "A run made twice is the same to the last bit." if found.same_again else
        "A run made twice is NOT the same to the last bit.")
    say(console, "All is well." if found.well else "NOT WELL: do not rely on results from this installation.")


def diagnosis_json(found: Diagnosis) -> str:
    """The same as one JSON object."""
    return json.dumps({
        "well": found.well, "versions": dict(found.versions), "extras": dict(found.optional),
        "machine": dict(found.machine), "cores": found.cores,
        "cache": None if found.cache is None else {"folder": found.cache[0], "writable": found.cache[1]},
        "sections_per_second": {speed.kind: round(speed.sections, 1) for speed in found.speeds},
        "same_again": found.same_again,
        "references": [{"name": one.name, "unit": one.unit, "source": one.source, "expected": one.expected,
                        "found": one.found, "allowed": one.allowed, "holds": one.holds} for one in found.references],
    }, indent=2, allow_nan=False)


def _wrapped(text: str, width: int) -> Text:
    return Text("\n".join(textwrap.wrap(text, width)))
