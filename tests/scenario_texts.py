"""Invented boards for the tests of scenarios, as texts."""

from __future__ import annotations

from tolerance.errors import ScenarioError
from tolerance.scenario import parse

HEAD = """
format = 1
title = "Orchard gateway"

[evaluation]
limit = "10 %"
seed = 1
"""

SIX_LAYERS = """
[[layers]]
name = "top mask"
kind = "mask"
thickness = "25 um"
over_copper = "15 um"
dk = 3.5

[[layers]]
name = "L1"
kind = "copper"
use = "signal"
foil = "18 um"
plating = "25 um"
etch_factor = 3.0

[[layers]]
name = "P1"
kind = "prepreg"
thickness = "100 um"
dk = 4.0

[[layers]]
name = "L2"
kind = "copper"
use = "plane"
foil = "16 um"

[[layers]]
name = "C1"
kind = "core"
thickness = "120 um"
dk = 4.2

[[layers]]
name = "L3"
kind = "copper"
use = "signal"
foil = "16 um"
etch_factor = 2.5

[[layers]]
name = "P2"
kind = "prepreg"
thickness = "300 um"
dk = 3.9

[[layers]]
name = "L4"
kind = "copper"
use = "plane"
foil = "16 um"
"""

LINES = """
[[lines]]
name = "radio feed"
layer = "L1"
width = "180 um"
target = "50 ohm"

[[lines]]
name = "clock pair"
layer = "L3"
width = "100 um"
gap = "150 um"
target = "100 ohm"
"""

VARIATIONS = """
[[variations]]
of = "P1.thickness"
tolerance = "10 %"

[[variations]]
of = "P*.dk"
tolerance = 0.1
together = true

[[variations]]
of = ["L1.etch", "L3.etch"]
tolerance = "10 %"
"""

BOARD = HEAD + SIX_LAYERS + LINES + VARIATIONS


def changed(text: str, *changes: tuple[str, str]) -> str:
    """The text with each `(old, new)` put in once; an `old` that is not there is a mistake of the test."""
    for old, new in changes:
        assert old in text, old
        text = text.replace(old, new, 1)
    return text


def messages(text: str, name: str = "orchard.toml") -> list[str]:
    """The lines of the error that the text brings; none when it is a scenario."""
    try:
        parse(text, name=name)
    except ScenarioError as error:
        return str(error).split("\n")
    return []
