"""Tables of the scenario as it was understood: stackup, drawn lines, variations. Lengths in the unit of the report."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from tolerance.report.tables import Cell, Column, Table
from tolerance.report.wording import LENGTH_DIGITS, METRES_IN, LengthUnit
from tolerance.scenario.properties import MEASURE, members
from tolerance.scenario.stackup import foot_side, reference_planes

if TYPE_CHECKING:
    from tolerance.scenario.amounts import Amount, LevelShares
    from tolerance.scenario.properties import Property
    from tolerance.scenario.tables import Layer, Line, Scenario, Variation

SIGMAS = 3.0  # deviations that a half-width covers where the scenario names none (the format's default)
SPREADING = ("normal", "truncated_normal", "lognormal")


def stackup_table(scenario: Scenario) -> Table:
    """The layers from top to bottom; columns that no layer fills are left out."""
    unit = scenario.report.lengths
    digits = LENGTH_DIGITS[unit]
    columns = (
        Column("name", "layer"), Column("kind", "kind"), Column("use", "use"),
        Column("thickness", "thickness", unit, digits), Column("over_copper", "over copper", unit, digits),
        Column("foil", "foil", unit, digits), Column("plating", "plating", unit, digits),
        Column("etch_factor", "etch factor"), Column("foot", "foot points"),
        Column("dk", "Dk", "", 3), Column("df", "Df", "", 4),
        Column("dk_frequency", "Dk and Df hold at", "GHz"), Column("conductivity", "conductivity", "MS/m", 1),
        Column("roughness_foot", "roughness of the foot", unit, 2),
        Column("roughness_crest", "roughness of the crest", unit, 2),
        Column("resin_dk", "Dk of the resin", "", 3),
        Column("resin_content", "resin content by weight", "share", 1),
    )
    rows = [_layer_row(scenario, layer, unit) for layer in scenario.layers]
    filled = tuple(column for column in columns if any(row[column.key] is not None for row in rows))
    return Table.of(filled, rows)


def drawn_table(scenario: Scenario) -> Table:
    """The lines as drawn, with the reference planes that were found."""
    unit = scenario.report.lengths
    digits = LENGTH_DIGITS[unit]
    columns = (
        Column("name", "line"), Column("layer", "layer"), Column("above", "plane above"),
        Column("below", "plane below"), Column("width", "width at the foot", unit, digits),
        Column("gap", "gap", unit, digits), Column("ground_gap", "ground gap", unit, digits),
        Column("partner", "partner layer"), Column("offset", "offset", unit, digits), Column("mode", "mode"),
        Column("target", "target", "ohm", 2), Column("limit", "limit, half-width", "share", 1),
    )
    rows = [_drawn_row(scenario, line, unit) for line in scenario.lines]
    filled = tuple(column for column in columns if any(row[column.key] is not None for row in rows))
    return Table.of(filled, rows)


def variation_table(scenario: Scenario) -> Table:
    """One row for each property that varies: its nominal, its law and what the half-width means."""
    columns = (
        Column("variable", "variable"), Column("property", "property"), Column("nominal", "nominal"),
        Column("unit", "unit"), Column("shape", "shape"), Column("tolerance", "half-width"),
        Column("tolerance_unit", "half-width in"), Column("basis", "the half-width is"), Column("shift", "shift"),
        Column("shift_unit", "shift in"), Column("low", "low end"), Column("high", "high end"),
        Column("level", "level"), Column("measured", "measured values"), Column("origin", "where from"),
    )
    rows = []
    for variation in scenario.variations:
        named = members(scenario, variation)
        joined = " + ".join(item.name for item in named)
        rows += [_variation_row(variation, item, joined if variation.together else item.name, scenario.report.lengths)
                 | {"origin": _origin(scenario, item)} for item in named]
    needed = ("variable", "property", "nominal", "unit", "shape", "tolerance", "tolerance_unit", "basis")
    filled = tuple(column for column in columns
                   if column.key in needed or any(row[column.key] is not None for row in rows))
    return Table.of(filled, rows)


def correlation_table(scenario: Scenario) -> Table:
    """One row for each pair of correlated variables."""
    columns = (Column("one", "variable"), Column("other", "correlated with"),
               Column("coefficient", "coefficient, of the underlying normals", "", 2))
    return Table.of(columns, [{"one": item.between[0], "other": item.between[1], "coefficient": item.coefficient}
                              for item in scenario.correlations])


def board_thickness(scenario: Scenario) -> float:
    """All layers together [m]."""
    return math.fsum(layer.copper_thickness if layer.kind == "copper" else layer.thickness or 0.0
                     for layer in scenario.layers)


def _length(metres: float | None, unit: LengthUnit) -> float | None:
    """In the unit of the report, free of the last digits' rounding."""
    return None if metres is None else float(f"{metres / METRES_IN[unit]:.10g}")


def _layer_row(scenario: Scenario, layer: Layer, unit: LengthUnit) -> dict[str, Cell]:
    copper = layer.kind == "copper"
    signal = copper and layer.use == "signal"
    etch_factor: Cell = None
    if signal:
        etch_factor = "vertical edges" if math.isinf(layer.etch_factor) else layer.etch_factor
    lossy = scenario.evaluation.frequency is not None
    return {
        "name": layer.name, "kind": layer.kind, "use": layer.use,
        "thickness": _length(layer.copper_thickness if copper else layer.thickness, unit),
        "over_copper": _length(layer.over_copper, unit), "foil": _length(layer.foil, unit),
        "plating": _length(layer.plating, unit) if copper else None, "etch_factor": etch_factor,
        "foot": foot_side(scenario, layer.name) if signal else None, "dk": layer.dk, "df": layer.df,
        "dk_frequency": None if layer.dk_frequency is None else layer.dk_frequency / 1e9,
        "conductivity": layer.conductivity / 1e6 if copper and lossy else None,
        "roughness_foot": _length(layer.roughness_foot, unit),
        "roughness_crest": _length(layer.roughness_crest, unit), "resin_content": layer.resin_content,
        "resin_dk": layer.resin_dk,
    }


def _drawn_row(scenario: Scenario, line: Line, unit: LengthUnit) -> dict[str, Cell]:
    above, below = reference_planes(scenario, line)
    pair = line.gap is not None or line.partner is not None
    return {
        "name": line.name, "layer": line.layer, "above": above, "below": below, "width": _length(line.width, unit),
        "gap": _length(line.gap, unit), "ground_gap": _length(line.ground_gap, unit), "partner": line.partner,
        "offset": _length(line.offset, unit) if line.partner is not None else None,
        "mode": line.mode if pair else None, "target": line.target, "limit": scenario.limit_of(line),
    }


def _variation_row(variation: Variation, item: Property, variable: str, lengths: LengthUnit) -> dict[str, Cell]:
    is_length = MEASURE[item.property] in ("length", "copper length")
    unit: LengthUnit | None = lengths if is_length else None
    tolerance, tolerance_unit = _amount(variation.tolerance, item, unit)
    shift, shift_unit = _amount(variation.shift, item, unit)
    return {
        "variable": variable, "property": item.name,
        "nominal": _rounded(_in_unit(item.nominal, unit)), "unit": unit or "-",
        "shape": variation.shape.replace("_", " "), "tolerance": tolerance, "tolerance_unit": tolerance_unit,
        "basis": _basis(variation), "shift": shift, "shift_unit": shift_unit,
        "low": _in_unit(variation.low, unit), "high": _in_unit(variation.high, unit),
        "level": _level(variation.level), "measured": _measured(variation),
    }


def _origin(scenario: Scenario, item: Property) -> str | None:
    """Where the law comes from; nothing is said in a scenario without a preset."""
    return scenario.origins.get(item.name, "this scenario") if scenario.origins else None


def _in_unit(value: float | None, unit: LengthUnit | None) -> float | None:
    return value if unit is None else _length(value, unit)


def _rounded(value: float | None) -> float | None:
    """To six digits: nominals that follow from others, a ply's by its resin, have no end of them."""
    return None if value is None else float(f"{value:.6g}")


def _amount(amount: Amount | None, item: Property, unit: LengthUnit | None) -> tuple[float | None, str | None]:
    """The number and the words for its unit."""
    if amount is None:
        return None, None
    if amount.relative:
        whole = "each line's width" if item.property == "etch" else "the nominal"
        return float(f"{100.0 * amount.value:.10g}"), f"% of {whole}"
    return _in_unit(amount.value, unit), unit or "-"


def _basis(variation: Variation) -> str | None:
    if variation.shape not in SPREADING:
        return None if variation.shape == "measured" else "the ends"
    if variation.cpk is not None:
        return f"held with Cpk {variation.cpk:g}"
    covered = f"{SIGMAS if variation.sigmas is None else variation.sigmas:g} deviations"
    return f"{covered}, and the ends" if variation.shape == "truncated_normal" else covered


def _level(level: LevelShares | None) -> str | None:
    if level is None:
        return None
    shares = {"lot": level.lot, "panel": level.panel, "coupon": level.coupon}
    named = {name: share for name, share in shares.items() if share > 0.0}
    return next(iter(named)) if len(named) == 1 else ", ".join(f"{name} {share:g}" for name, share in named.items())


def _measured(variation: Variation) -> str | None:
    if variation.file is None:
        return None
    return ", ".join(part for part in (variation.file, variation.sheet, variation.column) if part is not None)
