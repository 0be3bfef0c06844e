"""The presets of tolerances, on the terminal and as JSON: each value with its status."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

from rich.text import Text

if TYPE_CHECKING:
    from collections.abc import Sequence

    from rich.console import Console

    from tolerance.scenario.presets import Preset, PresetEntry


def print_presets(presets: Sequence[Preset], console: Console) -> None:
    """Every preset with its entries."""
    for preset in presets:
        console.print(Text(f"{preset.name}: {preset.title}", style="bold"))
        console.print(Text(f"  {preset.note}"))
        for entry in preset.entries:
            console.print(Text(f"  {_what(entry)}: {_how(entry)}. {_sentence(entry.status)}"))
        console.print()
    console.print(Text('In a scenario: preset = "NAME" above all tables. What a [[variations]] entry names stays '
                       "with it. Figures of your own fabricator beat every preset."))


def presets_json(presets: Sequence[Preset]) -> str:
    """The same as one JSON object."""
    return json.dumps({"presets": [
        {"name": preset.name, "title": preset.title, "note": preset.note,
         "entries": [_object(entry) for entry in preset.entries]} for preset in presets]}, indent=2)


def _what(entry: PresetEntry) -> str:
    joined = " or else " if entry.one else " with " if entry.keys.get("together") else ", "
    return f"{entry.on}, {joined.join(entry.properties)}"


def _how(entry: PresetEntry) -> str:
    shape = str(entry.keys.get("shape", "normal")).replace("_", " ")
    shift = f", shifted by {entry.keys['shift']}" if "shift" in entry.keys else ""
    if not entry.ranges:
        return f"{shape}, half-width {entry.keys['tolerance']}{shift}"
    classes = ", ".join(f"up to {to} {half}" for _, to, half in entry.ranges)
    return f"{shape}, half-width by nominal: {classes}"


def _sentence(words: str) -> str:
    return words[:1].upper() + words[1:] + "."


def _object(entry: PresetEntry) -> dict[str, object]:
    return {
        "on": entry.on, "properties": list(entry.properties), **dict(entry.keys),
        **({"ranges": [{"to": to, "tolerance": half} for _, to, half in entry.ranges]} if entry.ranges else {}),
        "status": entry.status,
    }
