"""The scenario: one TOML file read, checked whole, and held in SI."""

from __future__ import annotations

from tolerance.scenario.amounts import Amount, LevelShares
from tolerance.scenario.checking import load, parse
from tolerance.scenario.properties import Property, members, properties
from tolerance.scenario.schema import json_schema
from tolerance.scenario.stackup import Planes, foot_side, reference_planes
from tolerance.scenario.starter import starter_text, write_starter
from tolerance.scenario.tables import (
    Correlation,
    Evaluation,
    ImpedanceTest,
    Layer,
    Line,
    Offer,
    Report,
    Scenario,
    Sweep,
    Variation,
)

__all__ = [
    "Amount", "Correlation", "Evaluation", "ImpedanceTest", "Layer", "LevelShares", "Line", "Offer", "Planes",
    "Property", "Report", "Scenario", "Sweep", "Variation", "foot_side", "json_schema", "load", "members", "parse",
    "properties", "reference_planes", "starter_text", "write_starter",
]
